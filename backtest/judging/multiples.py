"""How much would have sufficed: the multiple of the VaR, and of the ES, that the realised losses call for."""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy.special import betainc

from backtest.judging.nulls import resampled_tops

Floats = npt.NDArray[np.float64]

RESAMPLES = 1999
_ROUNDING = 1e-9


@dataclass(frozen=True, slots=True)
class Multiple:
    """The multiple that would have sufficed on ``days`` days, with its 95% interval.

    ``high`` None: no upper limit at this length; ``skipped`` days had a forecast that is not positive and are not in
    it; ``estimate`` None: no day is left.
    """

    estimate: float | None
    low: float | None
    high: float | None
    days: int
    skipped: int

    @property
    def notes(self) -> tuple[str, ...]:
        """What must stand beside the number."""
        notes = (f"{self.skipped} days with a forecast that is not positive left out of the multiple",)
        return notes if self.skipped else ()


def sufficient_multiple(losses: Floats, var: Floats, level: float) -> Multiple:
    """Return the level-quantile of loss/VaR with its interval by order statistics (exact for independent days).

    losses, var: float64[T], positive loss amounts; days with VaR <= 0 are skipped and counted. The quantile is the
    ceil(n q)-th smallest; the interval runs from x_(r), r the largest with P(Bin(n, q) <= r - 1) <= .025, to x_(s), s
    the smallest with P(Bin(n, q) <= s - 1) >= .975; where none reaches, the upper limit is None.
    """
    ratios = np.sort(losses[var > 0.0] / var[var > 0.0])
    n = len(ratios)
    if n == 0:
        return Multiple(None, None, None, 0, len(losses))
    low, high = order_limits(n, level)
    return Multiple(
        float(ratios[_rank(n, level) - 1]),
        None if low is None else float(ratios[low - 1]),
        None if high is None else float(ratios[high - 1]),
        n,
        len(losses) - n,
    )


def order_limits(n: int, q: float) -> tuple[int | None, int | None]:
    """Return the ranks (r, s), counted from 1, of the 95% interval for the q-quantile of n days; None: none reaches."""
    k = np.arange(n)  # P(Bin(n, q) <= k), k = 0..n-1
    cumulative = 1.0 - betainc(k + 1.0, n - k, q)
    lower, upper = np.flatnonzero(cumulative <= 0.025), np.flatnonzero(cumulative >= 0.975)
    return (int(lower[-1]) + 1 if len(lower) else None), (int(upper[0]) + 1 if len(upper) else None)


def _rank(n: int, q: float) -> int:
    return max(1, int(np.ceil(n * q - _ROUNDING)))


def sufficient_es_multiple(losses: Floats, es: Floats, level: float, seed: int) -> Multiple:
    """Return the empirical ES of loss/ES with a percentile bootstrap interval over days.

    losses, es: float64[T], positive loss amounts; days with ES <= 0 or unknown are skipped and counted. The empirical
    ES is the exact integral of the step-function quantile above ``level``.
    """
    known = es > 0.0
    ratios = np.sort(losses[known] / es[known])
    n = len(ratios)
    if n == 0:
        return Multiple(None, None, None, 0, len(losses))
    weights = _tail_weights(n, level)
    estimate = float(ratios[::-1][: len(weights)] @ weights)
    tops = resampled_tops(seed, level, n, len(weights), RESAMPLES)
    low, high = np.quantile(ratios[tops] @ weights, [0.025, 0.975])
    return Multiple(estimate, float(low), float(high), n, len(losses) - n)


def _tail_weights(n: int, level: float) -> Floats:
    """Weights of the largest values, largest first, in the mean of the upper 1 - level of n values."""
    mass = n * (1.0 - level)
    top = max(1, int(np.ceil(mass - _ROUNDING)))
    weights = np.full(top, 1.0 / mass)
    weights[-1] = 1.0 - (top - 1) / mass
    return weights
