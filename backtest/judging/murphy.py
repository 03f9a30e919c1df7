"""Murphy diagrams: the difference of two models' elementary scores, one for each threshold.

Every consistent score is a mixture of elementary ones; a curve below zero everywhere means that the first model is
ahead by all of them. The band is pointwise: it does not cover the whole curve at once, so it cannot show dominance.
"""

from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from backtest.judging.ranking import mean_difference
from backtest.judging.samples import Sample

Floats = npt.NDArray[np.float64]

POINTS = 101


class Murphy(NamedTuple):
    """A curve, float64[K] each: thresholds, mean score difference there, and its pointwise 95% interval.

    Thresholds have the unit of the P&L. Where the difference is the same every day the interval has no width.
    """

    thresholds: Floats
    mean: Floats
    low: Floats
    high: Floats


def elementary_var(losses: Floats, var: Floats, level: float, thresholds: Floats) -> Floats:
    """Return the elementary scores of VaR, float64[T, K], no unit.

    At threshold h: level where v <= h < L, 1 - level where L <= h < v, else 0; their integral over h is the tick score.
    Source: Ehm, Gneiting, Jordan and Krueger (2016), in loss form.
    """
    loss, v = losses[:, None], var[:, None]
    above, below = (v <= thresholds) & (thresholds < loss), (loss <= thresholds) & (thresholds < v)
    return level * above + (1.0 - level) * below


def elementary_es(losses: Floats, var: Floats, es: Floats, level: float, thresholds: Floats) -> Floats:
    """Return the elementary scores of VaR and ES together, float64[T, K], in the unit of the P&L.

    At threshold h: v + (L - v)+/(1 - level) - h where e < h, else 0; the integral of a difference over h^-2 dh is the
    difference of FZ0. Source: Ziegel, Krueger, Jordan and Fasciati (2020), J. Financial Econometrics 18, in loss form.
    """
    reached = var + np.maximum(losses - var, 0.0) / (1.0 - level)
    return (es[:, None] < thresholds) * (reached[:, None] - thresholds)


def thresholds_of(one: Floats, other: Floats, points: int = POINTS) -> Floats:
    """Return equally spaced thresholds over the range of two models' forecasts: beyond it the curve is flat."""
    both = np.concatenate([one, other])
    return np.linspace(both.min(), both.max(), points)


def murphy_var(ours: Sample, theirs: Sample, points: int = POINTS) -> Murphy:
    """Return the curve of VaR for two samples on the same days (at least 2); negative favours ``ours``."""
    h = thresholds_of(ours.var, theirs.var, points)
    first, second = (elementary_var(s.losses, s.var, s.level, h) for s in (ours, theirs))
    return _curve(h, first - second)


def murphy_es(ours: Sample, theirs: Sample, points: int = POINTS) -> Murphy:
    """Return the curve of VaR and ES for two samples on the same days, ES known; negative favours ``ours``."""
    h = thresholds_of(ours.es, theirs.es, points)
    first, second = (elementary_es(s.losses, s.var, s.es, s.level, h) for s in (ours, theirs))
    return _curve(h, first - second)


def _curve(thresholds: Floats, differences: Floats) -> Murphy:
    found = [mean_difference(column) for column in differences.T]
    mean = np.array([f.mean for f in found])
    low, high = (np.array([f.mean if v is None else v for f, v in zip(found, side, strict=True)])
                 for side in ([f.low for f in found], [f.high for f in found]))  # fmt: skip
    return Murphy(thresholds, mean, low, high)
