"""Paths of losses simulated day by day from a volatility recursion, and their sums over several days.

Innovations: bootstrapped residuals, with generalized Pareto tails in the place of those beyond a threshold on either
side (McNeil & Frey 2000, J. Empirical Finance 7:271-300, section on several days); or standard normal.
"""

import math

import numpy as np

from backtest.kernels.compiled import compiled
from backtest.kernels.gpd import quantile_and_shortfall

MOTION = 6
"""Columns of the recursion: c, phi, omega, alpha, gamma, beta."""

_STEP, _FIRST, _SECOND = np.uint64(0x9E3779B97F4A7C15), np.uint64(0xBF58476D1CE4E5B9), np.uint64(0x94D049BB133111EB)
_30, _27, _31, _11 = np.uint64(30), np.uint64(27), np.uint64(31), np.uint64(11)


@compiled
def uniform(state: np.uint64) -> float:
    """Return the number in (0, 1) of a state, which moves on by ``_STEP`` (SplitMix64; Steele, Lea & Flood 2014)."""
    z = (state ^ (state >> _30)) * _FIRST
    z = (z ^ (z >> _27)) * _SECOND
    return (np.float64((z ^ (z >> _31)) >> _11) + 0.5) * 2.0**-53


@compiled
def innovation(pool: np.ndarray, upper: np.ndarray, lower: np.ndarray, first: float, second: float) -> float:
    """Return one of ``pool``, or a draw from the tail where that one lies beyond its threshold (NaN: no such tail).

    ``upper`` and ``lower`` (xi, beta, threshold): the lower tail is that of the negative values. A draw is the value
    at the exceedance probability ``second``.
    """
    z = pool[int(first * pool.size)]
    if z > upper[2]:
        return quantile_and_shortfall(upper[2], upper[0], upper[1], second)[0]
    if -z > lower[2]:
        return -quantile_and_shortfall(lower[2], lower[0], lower[1], second)[0]
    return float(z)


@compiled
def normal(first: float, second: float) -> float:
    """Return a standard normal number from two uniform ones (Box & Muller 1958)."""
    return math.sqrt(-2.0 * math.log(first)) * math.cos(2.0 * math.pi * second)


@compiled
def simulate_sums(
    pools: np.ndarray,
    upper: np.ndarray,
    lower: np.ndarray,
    as_normal: bool,
    ahead: np.ndarray,
    motion: np.ndarray,
    keys: np.ndarray,
    horizons: np.ndarray,
    paths: int,
) -> np.ndarray:
    """Return sums of the losses of the first h days, (n, H, paths), of paths that start the day after each past.

    ``pools`` (n, m): residuals; ``upper``, ``lower`` (n, 3); ``as_normal``: standard normal innovations instead of
    these; ``ahead`` (n, 2): mean and sigma of the first day; ``motion`` (n, MOTION): mean_{t+1} = c + phi x_t,
    h_{t+1} = omega + (alpha + gamma [e_t > 0]) e_t^2 + beta h_t; ``keys`` uint64 (n): the randomness of each row;
    ``horizons`` int64 (H): days, ascending.
    """
    n, H = pools.shape[0], horizons.size
    sums = np.empty((n, H, paths))
    for i in range(n):
        state, pool, up, low = keys[i], pools[i], upper[i], lower[i]
        c, phi, omega, alpha, gamma, beta = motion[i]
        for j in range(paths):
            mean, h, total, k = ahead[i, 0], ahead[i, 1] * ahead[i, 1], 0.0, 0
            for day in range(1, horizons[H - 1] + 1):
                first = uniform(state + _STEP)
                state += _STEP + _STEP
                second = uniform(state)
                z = normal(first, second) if as_normal else innovation(pool, up, low, first, second)
                e = math.sqrt(h) * z
                total += mean + e
                if day == horizons[k]:
                    sums[i, k, j] = total
                    k += 1
                mean = c + phi * (mean + e)
                h = omega + (alpha + (gamma if e > 0.0 else 0.0)) * e * e + beta * h
    return sums


@compiled
def rebuild(residuals: np.ndarray, picked: np.ndarray, motion: np.ndarray, variance: float, out: np.ndarray) -> None:
    """Fill ``out`` (B, W) with pasts rebuilt by the recursion ``motion`` from resampled ``residuals`` (m).

    ``picked`` int64 (B, W): which residual each day takes; ``variance``: h before the first day, and its e^2.
    """
    c, phi, omega, alpha, gamma, beta = motion
    for b in range(out.shape[0]):
        last, h = 0.0, omega + (alpha + 0.5 * gamma + beta) * variance
        for t in range(out.shape[1]):
            e = math.sqrt(h) * residuals[picked[b, t]]
            last = c + phi * last + e
            out[b, t] = last
            h = omega + (alpha + (gamma if e > 0.0 else 0.0)) * e * e + beta * h
