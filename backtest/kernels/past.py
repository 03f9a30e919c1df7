"""Pasts made ready for a fit, one a lane: scaled, summed up, with starting mean and start-up variance."""

import math
from typing import NamedTuple

import numpy as np

from backtest.kernels.compiled import inner
from backtest.kernels.lanes import WIDTH
from backtest.kernels.parameters import AR1, AR1_NO_INTERCEPT, CONSTANT_MEAN, EWMA_75
from backtest.kernels.terms import aligned

MOMENTS, MEAN, SCALE, FIXED, VARIANCE, FACTS = 0, 6, 8, 9, 10, 11
"""Columns of what is known of a past: n, sum x, sum lag, sum x^2, sum lag^2, sum x*lag of the days with a residual;
least-squares c and phi; the scale; the start-up variance where it does not move; the residual variance."""


class Pasts(NamedTuple):
    """Eight pasts and what a fit needs to know of them; reused from day to day."""

    x: np.ndarray  # (W, lanes) scaled losses
    facts: np.ndarray  # (lanes, FACTS)


def new_pasts(W: int) -> Pasts:
    """Return eight empty pasts of ``W`` days; no lane is left at zero, so that idle ones compute harmlessly."""
    pasts = Pasts(aligned(W, WIDTH), np.ones((WIDTH, FACTS)))
    pasts.x[:] = 1.0
    return pasts


@inner
def deviation(losses: np.ndarray, average: float) -> float:
    """Return the standard deviation of losses, zero where they do not vary enough to have one."""
    largest, spread = 0.0, 0.0
    for t in range(losses.size):
        largest = max(largest, abs(losses[t]))
    if not (largest > 0.0 and math.isfinite(largest)):
        return 0.0
    unit = 1.0 / largest
    for t in range(losses.size):
        gap = (losses[t] - average) * unit
        spread += gap * gap
    found = math.sqrt(spread / losses.size)
    return largest * found if found > 1e-9 else 0.0


@inner
def prepare(pasts: Pasts, lane: int, losses: np.ndarray, mean_kind: int, start: int, skip: int) -> bool:
    """Fill a lane from raw ``losses`` (W); return False where they do not vary enough to have a variance.

    Losses are divided by their own standard deviation: every later comparison, cap and ridge then sees the same numbers
    whatever the unit of the P&L (a power of two near it would leave the search path, and the tenth digit, to the unit).
    """
    average = 0.0
    for t in range(losses.size):
        average += losses[t]
    average /= losses.size
    scale = deviation(losses, average)
    if scale == 0.0:
        return False
    pasts.facts[lane, SCALE] = scale
    inverse = 1.0 / scale
    for t in range(losses.size):
        pasts.x[t, lane] = losses[t] * inverse
    _sums(pasts, lane, losses, inverse, skip)
    _least_squares(pasts, lane, mean_kind, losses[0] * inverse, skip)
    if start == EWMA_75:
        pasts.facts[lane, FIXED] = _weighted_start(pasts, lane, skip)
    else:
        centre = average * inverse
        pasts.facts[lane, FIXED] = 1.0 if mean_kind in (CONSTANT_MEAN, AR1) else 1.0 + centre * centre
    return True


@inner
def _sums(pasts: Pasts, lane: int, losses: np.ndarray, inverse: float, skip: int) -> None:
    sx = sl = sxx = sll = sxl = 0.0
    lag = losses[0] * inverse if skip else 0.0
    for t in range(skip, losses.size):
        now = losses[t] * inverse
        sx += now
        sl += lag
        sxx += now * now
        sll += lag * lag
        sxl += now * lag
        lag = now
    m = pasts.facts
    m[lane, 0] = losses.size - skip
    m[lane, 1], m[lane, 2], m[lane, 3], m[lane, 4], m[lane, 5] = sx, sl, sxx, sll, sxl


@inner
def _least_squares(pasts: Pasts, lane: int, mean_kind: int, first: float, skip: int) -> None:
    """Fill the starting mean: regression of x_t on its lag over the days that have one, from the sums."""
    m, c, phi = pasts.facts, 0.0, 0.0
    n, mx, ml, mxx, mll, mxl = m[lane, 0], m[lane, 1], m[lane, 2], m[lane, 3], m[lane, 4], m[lane, 5]
    pairs = n if skip else n - 1.0
    sx = mx if skip else mx - first
    if mean_kind == CONSTANT_MEAN:
        c = mx / n
    elif mean_kind == AR1:
        phi = (mxl - sx * ml / pairs) / (mll - ml * ml / pairs)
        c = (sx - phi * ml) / pairs
    elif mean_kind == AR1_NO_INTERCEPT:
        phi = mxl / mll
    phi = min(max(phi, -0.99), 0.99)
    pasts.facts[lane, MEAN], pasts.facts[lane, MEAN + 1] = c, phi
    found = (mxx + phi * phi * mll - 2 * phi * mxl - 2 * c * mx + 2 * c * phi * ml) / n + c * c
    pasts.facts[lane, VARIANCE] = max(found, 1e-12)


@inner
def _weighted_start(pasts: Pasts, lane: int, skip: int) -> float:
    """Return the weighted mean of the first 75 squared least-squares residuals, weights 0.94^i normalised."""
    x, c, phi = pasts.x, pasts.facts[lane, MEAN], pasts.facts[lane, MEAN + 1]
    lag = x[0, lane] if skip else 0.0
    total, weights, weight = 0.0, 0.0, 1.0
    for t in range(skip, min(skip + 75, x.shape[0])):
        e = x[t, lane] - c - phi * lag
        total += weight * e * e
        weights += weight
        weight *= 0.94
        lag = x[t, lane]
    return total / weights
