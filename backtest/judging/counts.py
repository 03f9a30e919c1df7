"""The binomial law of a count of exceptions, its tails to full precision, and the exact interval for the rate."""

import numpy as np
import numpy.typing as npt
from scipy.special import betainc, betaincinv, gammaln, xlog1py, xlogy

Floats = npt.NDArray[np.float64]


def pmf(days: int, rate: float) -> Floats:
    """Return P(X = k), k = 0..days, for X ~ Bin(days, rate): float64[days + 1]."""
    k = np.arange(days + 1)
    return np.asarray(np.exp(log_choose(days, k) + xlogy(k, rate) + xlog1py(days - k, -rate)))


def log_choose(n: npt.ArrayLike, k: npt.ArrayLike) -> Floats:
    """Return ln C(n, k) for 0 <= k <= n, elementwise."""
    n, k = np.asarray(n, dtype=np.float64), np.asarray(k, dtype=np.float64)
    return np.asarray(gammaln(n + 1.0) - gammaln(k + 1.0) - gammaln(n - k + 1.0))


def at_least(count: int, days: int, rate: float) -> float:
    """Return P(X >= count) for X ~ Bin(days, rate)."""
    if count <= 0:
        return 1.0
    return float(betainc(count, days - count + 1, rate)) if count <= days else 0.0


def at_most(count: int, days: int, rate: float) -> float:
    """Return P(X <= count) for X ~ Bin(days, rate)."""
    if count >= days:
        return 1.0
    return float(betainc(days - count, count + 1, 1.0 - rate)) if count >= 0 else 0.0


def two_sided(count: int, days: int, rate: float) -> float:
    """Return twice the smaller tail, capped at 1: the dual of the Clopper-Pearson interval."""
    return min(1.0, 2.0 * min(at_least(count, days, rate), at_most(count, days, rate)))


def rate_interval(count: int, days: int, confidence: float = 0.95) -> tuple[float, float]:
    """Return the exact interval (low, high) for the rate behind ``count`` in ``days`` (Clopper and Pearson, 1934)."""
    tail = (1.0 - confidence) / 2.0
    low = float(betaincinv(count, days - count + 1, tail)) if count > 0 else 0.0
    high = float(betaincinv(count + 1, days - count, 1.0 - tail)) if count < days else 1.0
    return low, high
