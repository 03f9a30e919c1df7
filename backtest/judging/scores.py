"""Scores of forecasts, lower is better: tick for VaR, FZ0 and the half-homogeneous score for VaR and ES together."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from backtest.judging.samples import Sample

Floats = npt.NDArray[np.float64]


def tick(losses: Floats, var: Floats, level: float) -> Floats:
    """Return the tick score (1{L > v} - (1 - level)) (L - v) of each day, in the unit of the losses: float64[T]."""
    return ((losses > var) - (1.0 - level)) * (losses - var)


def fz0(losses: Floats, var: Floats, es: Floats, level: float) -> Floats:
    """Return (L - v)+/((1 - level) e) + v/e - 1 + ln e of each day: float64[T]; differences have no unit.

    Needs e > 0 and e >= v on every day. Source: Patton, Ziegel and Chen (2019), J. Econometrics 211, eq. 6.
    """
    return np.asarray(np.maximum(losses - var, 0.0) / ((1.0 - level) * es) + var / es - 1.0 + np.log(es))


def half_homogeneous(losses: Floats, var: Floats, es: Floats, level: float) -> Floats:
    """Return ((L - v)+ + (1 - level)(e + v))/(2 sqrt(e)) of each day, in the root of the losses' unit: float64[T].

    Needs e > 0 on every day. Source: Fissler and Ziegel (2016) with G1 = 0 and g2(e) = sqrt(e), in the loss form of
    Nolde and Ziegel (2017).
    """
    return np.asarray((np.maximum(losses - var, 0.0) + (1.0 - level) * (es + var)) / (2.0 * np.sqrt(es)))


@dataclass(frozen=True)
class Scored:
    """Scores of several forecasts of the same days by the one score they all allow: float64[T] each, and its name.

    ``note`` says why it is not FZ0, where it is not.
    """

    name: str
    scores: tuple[Floats, ...]
    note: str


def score_together(samples: Sequence[Sample]) -> Scored:
    """Score forecasts on the same days: FZ0 where ES is known, positive and at least VaR in all of them, else tick."""
    level = samples[0].level
    unknown = sorted({s.model for s in samples if np.isnan(s.es).any()})
    wrong = sum(int(np.count_nonzero(~((s.es > 0.0) & (s.es >= s.var)))) for s in samples)
    if not wrong:
        return Scored("FZ0", tuple(fz0(s.losses, s.var, s.es, level) for s in samples), "")
    why = (
        f"no ES on every day from {', '.join(unknown)}" if unknown else f"ES not positive or below VaR on {wrong} rows"
    )
    return Scored("tick", tuple(tick(s.losses, s.var, level) for s in samples), f"not FZ0: {why}")
