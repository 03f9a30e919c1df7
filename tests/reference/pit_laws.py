"""Second implementations for tests of the PIT: slow, plain, written apart from the package."""

import itertools
import math
from fractions import Fraction

import numpy as np
from scipy import optimize, stats


def irwin_hall_cdf(n: int, x: Fraction) -> Fraction:
    """Return P(sum of n uniforms <= x) by the alternating sum in exact fractions."""
    if x <= 0:
        return Fraction(0)
    if x >= n:
        return Fraction(1)
    total = sum((-1) ** k * math.comb(n, k) * (x - k) ** n for k in range(math.floor(x) + 1))
    return total / math.factorial(n)


def graded_cdf(x: Fraction, days: int, graded: Fraction, full: Fraction) -> Fraction:
    """Return P(X <= x), X the sum of days that are uniform, 1 or 0 with probabilities graded, full, the rest."""
    total, none = Fraction(0), 1 - graded - full
    for n in range(days + 1):
        for m in range(days - n + 1):
            ways = math.comb(days, n) * math.comb(days - n, m)
            chance = ways * graded**n * full**m * none ** (days - n - m)
            inside = Fraction(int(m <= x)) if n == 0 else irwin_hall_cdf(n, x - m)
            total += chance * inside
    return total


def censored_log_likelihood(m: float, s: float, z: np.ndarray, level: float) -> float:
    """Return the log likelihood of normal scores z float64[T], those up to the quantile of the level censored."""
    c = stats.norm.ppf(level)
    tail = z[z > c]
    return float(stats.norm.logpdf(tail, m, s).sum() + (len(z) - len(tail)) * stats.norm.logcdf((c - m) / s))


def censored_ratio(z: np.ndarray, level: float) -> tuple[float, float, float]:
    """Return (LR, m, s) by a general-purpose search from several starts."""

    def minus(x: np.ndarray) -> float:
        return -censored_log_likelihood(x[0], math.exp(x[1]), z, level)

    starts = [(0.0, 0.0), (-2.0, 0.7), (1.0, -0.5)]
    options = {"xatol": 1e-10, "fatol": 1e-12, "maxiter": 20_000, "maxfev": 20_000}
    found = [optimize.minimize(minus, start, method="Nelder-Mead", options=options) for start in starts]
    best = min(found, key=lambda one: one.fun)
    return 2 * (-best.fun - censored_log_likelihood(0, 1, z, level)), best.x[0], math.exp(best.x[1])


def regression_ratio(z: np.ndarray) -> float:
    """Return LR(3) of the first-order autoregression against independent N(0, 1), by least squares."""
    x, y = np.column_stack([np.ones(len(z) - 1), z[:-1]]), z[1:]
    residuals = y - x @ np.linalg.lstsq(x, y, rcond=None)[0]
    free = stats.norm.logpdf(residuals, 0, np.sqrt(np.mean(residuals**2))).sum()
    return float(2 * (free - stats.norm.logpdf(y).sum()))


def depth_autocorrelation(pits: list[float], level: float, lags: int = 5) -> float:
    """Return C(m) of Du and Escanciano by plain loops."""
    days, a = len(pits), 1 - level
    h = [max(u - level, 0) / a - a / 2 for u in pits]

    def g(j: int) -> float:
        return sum(h[t] * h[t - j] for t in range(j, days)) / (days - j)

    return days * sum((g(j) / g(0)) ** 2 for j in range(1, lags + 1))


def pearson_of(pits: list[float], level: float, cells: int) -> float:
    """Return Pearson's statistic of the cell below the level and equal cells above it, by counting."""
    edges = [0.0, *(level + j * (1 - level) / cells for j in range(cells)), 1.0]
    total = 0.0
    for low, high in itertools.pairwise(edges):
        expected = len(pits) * (high - low)
        total += (sum(low < u <= high for u in pits) - expected) ** 2 / expected
    return total
