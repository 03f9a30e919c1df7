"""Second implementations for tests of exceptions in time: slow, plain, written apart from the package."""

import itertools
from collections.abc import Callable

import numpy as np
from scipy import optimize, stats


def dynamic_quantile_slow(hits: np.ndarray, var: np.ndarray, level: float, lags: int) -> float:
    """Return H'X (X'X)^+ X'H / (a (1 - a)) with the matrix X written out."""
    rate, days = 1 - level, len(hits)
    rows = range(lags, days)
    x = np.array([[1.0, *(float(hits[t - k]) for k in range(1, lags + 1)), var[t]] for t in rows])
    h = hits[lags:] - rate
    return float(h @ x @ np.linalg.pinv(x.T @ x) @ x.T @ h / (rate * (1 - rate)))


def ljung_box_slow(hits: np.ndarray, lags: int) -> float:
    days, centred = len(hits), hits - np.mean(hits)
    total = float(centred @ centred)
    return (
        days * (days + 2) * sum(float(centred[k:] @ centred[:-k] / total) ** 2 / (days - k) for k in range(1, lags + 1))
    )


def weibull_slow(hits: np.ndarray) -> tuple[float, float, float]:
    """Return (shape, log likelihood, log likelihood at shape 1) of durations, both parameters found by search."""
    days = np.flatnonzero(hits) + 1
    whole, cut = np.diff(days), [d for d in (days[0] if days[0] > 1 else 0, len(hits) - days[-1]) if d > 0]

    def minus(parameters: np.ndarray) -> float:
        shape, scale = np.exp(parameters)
        alive = -((np.concatenate([whole, cut]) / scale) ** shape)
        return -float(alive.sum() + np.sum(np.log(shape / scale) + (shape - 1) * np.log(whole / scale)))

    start = np.array([0.0, np.log(np.mean(whole))])
    tight = {"xatol": 1e-10, "fatol": 1e-12, "maxiter": 4000}
    free = optimize.minimize(minus, start, method="Nelder-Mead", options=tight)
    fixed = optimize.minimize(
        lambda scale: minus(np.array([0.0, scale[0]])), start[1:], method="Nelder-Mead", options=tight
    )
    return float(np.exp(free.x[0])), -float(free.fun), -float(fixed.fun)


def all_arrangements(days: int, count: int) -> list[np.ndarray]:
    """Return the bool arrays of all arrangements of ``count`` exceptions in ``days`` days."""
    return [np.isin(np.arange(days), places) for places in itertools.combinations(range(days), count)]


def law_of(statistic: Callable[[np.ndarray], float], days: int, rate: float) -> tuple[np.ndarray, np.ndarray]:
    """Return value and probability of a statistic at all 2^days sequences of independent exceptions."""
    sequences = [np.array(hits, dtype=bool) for hits in itertools.product((0, 1), repeat=days)]
    values = np.array([statistic(hits) for hits in sequences])
    return values, np.array([rate ** hits.sum() * (1 - rate) ** (days - hits.sum()) for hits in sequences])


def capital_slow(
    losses: np.ndarray, var: np.ndarray, es: np.ndarray | None, level: float, restate: bool
) -> list[float]:
    """Return the capital day by day; past losses at today's forecast (restate) or e-values as they were."""

    def value(s: int, t: int) -> float:
        if es is None:
            return float(losses[s] > var[t]) / (1 - level)
        return max(losses[s] - var[t], 0.0) / ((1 - level) * (es[t] - var[t]))

    money, path = 1.0, []
    for t in range(len(losses)):
        past = np.array([value(s, t if restate else s) for s in range(t)]) - 1
        bet = min(max(past.sum() / (past**2).sum(), 0.0), 0.5) if t and (past**2).sum() > 0 else 0.0
        money *= 1 - bet + bet * value(t, t)
        path.append(money)
    return path


class SkewedT:
    """Skewed t of Fernandez and Steel (1998), standardised to mean 0 and variance 1; skewed to large values above 1."""

    def __init__(self, nu: float, skew: float) -> None:
        self.nu, self.skew, self.upper = nu, skew, skew**2 / (1 + skew**2)
        half = 2 / (skew + 1 / skew)
        self.mean = half * (skew**2 - skew**-2) * stats.t.pdf(0, nu) * nu / (nu - 1)
        second = (skew**3 + skew**-3) / (skew + 1 / skew) * nu / (nu - 2)
        self.sd = np.sqrt(second - self.mean**2)

    def draw(self, rng: np.random.Generator, size: tuple[int, ...]) -> np.ndarray:
        size_of = np.abs(rng.standard_t(self.nu, size))
        raw = np.where(rng.random(size) < self.upper, self.skew * size_of, -size_of / self.skew)
        return (raw - self.mean) / self.sd

    def tail(self, level: float) -> tuple[float, float]:
        """Return quantile and mean beyond it."""
        point = stats.t.isf((1 - level) / (2 * self.upper), self.nu)
        beyond = stats.t.pdf(point, self.nu) * (self.nu + point**2) / (self.nu - 1)
        mean = 2 * self.upper * self.skew * beyond / (1 - level)
        return (self.skew * point - self.mean) / self.sd, (mean - self.mean) / self.sd
