"""Second implementations for tests of judging: slow, plain, written apart from the package."""

import itertools
import math

import numpy as np
from scipy import stats


def equal_deviation_p(count: int, days: int, rate: float) -> float:
    """Return P(|N - T p| >= |x - T p|), N ~ Bin(T, p): the two-sided rule that McNeil and Frey's Table 2 follows."""
    counts = np.arange(days + 1)
    far = np.abs(counts - days * rate) >= abs(count - days * rate) - 1e-9
    return float(stats.binom.pmf(counts, days, rate)[far].sum())


def xlogx(n: float, share: float) -> float:
    return n * math.log(share) if n else 0.0


def likelihood_ratio_of_rate(hits: tuple[int, ...], rate: float) -> float:
    days, count = len(hits), sum(hits)
    free = xlogx(count, count / days) + xlogx(days - count, 1 - count / days)
    return 2 * (free - xlogx(count, rate) - xlogx(days - count, 1 - rate))


def likelihood_ratio_of_independence(hits: tuple[int, ...]) -> float:
    n = dict.fromkeys(itertools.product((0, 1), repeat=2), 0)
    for pair in itertools.pairwise(hits):
        n[pair] += 1
    apart = 0.0
    for row in (0, 1):
        total = n[row, 0] + n[row, 1]
        apart += sum(xlogx(n[row, to], n[row, to] / total) for to in (0, 1) if total)
    total = len(hits) - 1
    together = sum(xlogx(n[0, to] + n[1, to], (n[0, to] + n[1, to]) / total) for to in (0, 1))
    return 2 * (apart - together)


def brute_independence_p(hits: tuple[int, ...]) -> float:
    """Return the share of arrangements of the same number of exceptions whose LR_ind is at least as large."""
    observed, days, count = likelihood_ratio_of_independence(hits), len(hits), sum(hits)
    values = []
    for places in itertools.combinations(range(days), count):
        arranged = tuple(int(day in places) for day in range(days))
        values.append(likelihood_ratio_of_independence(arranged))
    return float(np.mean(np.array(values) >= observed - 1e-9))


def brute_coverage_tail(days: int, rate: float) -> list[tuple[float, float]]:
    """Return (LR_cc, probability) of all 2^days hit sequences."""
    found = []
    for hits in itertools.product((0, 1), repeat=days):
        value = likelihood_ratio_of_rate(hits, rate) + likelihood_ratio_of_independence(hits)
        found.append((value, rate ** sum(hits) * (1 - rate) ** (days - sum(hits))))
    return found


def es_t(nu: float, level: float) -> float:
    """Return the ES of a Student t loss: f(q) (nu + q^2) / ((nu - 1)(1 - level))."""
    q = stats.t.ppf(level, nu)
    return float(stats.t.pdf(q, nu) * (nu + q * q) / ((nu - 1) * (1 - level)))


def z2_of_iid(losses: np.ndarray, var: float, es: float, level: float) -> np.ndarray:
    """Return Z2 of many samples, losses float64[N, T], one VaR and ES for all days."""
    return 1.0 - (losses * (losses > var)).sum(axis=1) / (es * losses.shape[1] * (1 - level))


def gpd_losses(
    rng: np.random.Generator, shape: tuple[int, ...], *, var: float, es: float, xi: float, level: float
) -> np.ndarray:
    """Draw losses below VaR (a constant 0) or beyond it with a GPD excess that reproduces VaR and ES."""
    excess = stats.genpareto.rvs(xi, scale=(es - var) * (1 - xi), size=shape, random_state=rng)
    return np.where(rng.random(shape) < 1 - level, var + excess, 0.0)


def newey_west_slow(series: np.ndarray, lag: int) -> float:
    days, mean = len(series), float(np.mean(series))
    total = 0.0
    for j in range(-lag, lag + 1):
        pairs = [(series[t] - mean) * (series[t - abs(j)] - mean) for t in range(abs(j), days)]
        total += (1 - abs(j) / (lag + 1)) * sum(pairs) / days
    return total
