"""One past made ready for a fit: scaled, summed up, with the starting values of its mean and its start-up variance."""

import math
from typing import NamedTuple

import numpy as np

from backtest.kernels.compiled import compiled
from backtest.kernels.garch import EWMA_75, PHI, C

ZERO, CONSTANT_MEAN, AR1, AR1_NO_INTERCEPT = range(4)
"""Means of a filter."""


class Past(NamedTuple):
    """A past and what a fit needs to know of it; reused from day to day."""

    x: np.ndarray  # (W,) scaled losses
    moments: np.ndarray  # n, sum x, sum lag, sum x^2, sum lag^2, sum x*lag of the days with a residual
    mean: np.ndarray  # (2,) least-squares c and phi
    numbers: np.ndarray  # scale, fixed start-up variance, residual variance of least squares


@compiled
def new_past(W: int) -> Past:
    """Return an empty past of ``W`` days."""
    return Past(np.empty(W), np.empty(6), np.empty(2), np.empty(3))


@compiled
def prepare(past: Past, losses: np.ndarray, mean_kind: int, start: int, skip: int) -> bool:
    """Fill ``past`` from raw ``losses`` (W); return False where they do not vary enough to have a variance.

    Losses are divided by their own standard deviation: every later comparison, cap and ridge then sees the same numbers
    whatever the unit of the P&L (a power of two near it would leave the search path, and the tenth digit, to the unit).
    """
    W = losses.size
    average, largest = 0.0, 0.0
    for t in range(W):
        average += losses[t]
        largest = max(largest, abs(losses[t]))
    average /= W
    spread = 0.0
    for t in range(W):
        spread += ((losses[t] - average) / largest) ** 2 if largest > 0.0 else 0.0
    deviation = largest * math.sqrt(spread / W)
    if not (deviation > 1e-9 * largest and math.isfinite(deviation)):
        return False
    scale = deviation
    for t in range(W):
        past.x[t] = losses[t] / scale
    past.numbers[0] = scale
    _sums(past, skip)
    _least_squares(past, mean_kind)
    has_constant = mean_kind in (CONSTANT_MEAN, AR1)
    centre = average / scale if has_constant else 0.0
    if start == EWMA_75:
        past.numbers[1] = _weighted_start(past, skip)
    else:
        total = 0.0
        for t in range(W):
            total += (past.x[t] - centre) ** 2
        past.numbers[1] = total / W
    return True


@compiled
def _sums(past: Past, skip: int) -> None:
    m, x = past.moments, past.x
    m[:] = 0.0
    lag = x[0] if skip else 0.0
    for t in range(skip, x.size):
        m[0] += 1.0
        m[1] += x[t]
        m[2] += lag
        m[3] += x[t] * x[t]
        m[4] += lag * lag
        m[5] += x[t] * lag
        lag = x[t]


@compiled
def _least_squares(past: Past, mean_kind: int) -> None:
    """Fill the starting mean: regression of x_t on its lag over the days that have one."""
    x, pairs = past.x, past.x.size - 1.0
    sx = sl = sll = sxl = 0.0
    for t in range(1, x.size):
        sx += x[t]
        sl += x[t - 1]
        sll += x[t - 1] * x[t - 1]
        sxl += x[t] * x[t - 1]
    c, phi = 0.0, 0.0
    if mean_kind == CONSTANT_MEAN:
        c = past.moments[1] / past.moments[0]
    elif mean_kind == AR1:
        phi = (sxl - sx * sl / pairs) / (sll - sl * sl / pairs)
        c = (sx - phi * sl) / pairs
    elif mean_kind == AR1_NO_INTERCEPT:
        phi = sxl / sll
    past.mean[C], past.mean[PHI] = c, phi
    n, mx, ml, mxx, mll, mxl = past.moments
    past.numbers[2] = (mxx + phi * phi * mll - 2 * phi * mxl - 2 * c * mx + 2 * c * phi * ml) / n + c * c


@compiled
def _weighted_start(past: Past, skip: int) -> float:
    """Return the weighted mean of the first 75 squared least-squares residuals, weights 0.94^i normalised."""
    x, c, phi = past.x, past.mean[C], past.mean[PHI]
    lag = x[0] if skip else 0.0
    total, weights, weight = 0.0, 0.0, 1.0
    for t in range(skip, min(skip + 75, x.size)):
        e = x[t] - c - phi * lag
        total += weight * e * e
        weights += weight
        weight *= 0.94
        lag = x[t]
    return total / weights
