"""The daily scores of a Gaussian likelihood, eight pasts at once: their outer product and the information expected.

With e the residual, h its variance and q = e^2 / h, the day's score by a parameter is
  s_i = (q - 1) / (2 h) dh_i - (e / h) de_i;
summed over the days are s_i s_j and, for what Gaussian likelihood expects of it given the day before,
  dh_i dh_j / (2 h^2) + de_i de_j / h
(Fiorentini, Calzolari & Panattoni 1996, J. Applied Econometrics 11). Sums stand in rows of the pass, in loops over the
parameters estimated: one short kernel serves every mean, start-up and variance, and is run once a window.
Derivatives of h as in ``write_passes.py``: dh_i <- beta dh_i + f_i.
"""

from typing import Any

import numpy as np

from backtest.kernels.compiled import inner
from backtest.kernels.lanes import WIDTH, load, spread, store, where_positive
from backtest.kernels.parameters import ALPHA, BETA, COUNT, GAMMA, OMEGA, PHI, C
from backtest.kernels.terms import AFTER, ROWS, THETA, D, aligned

OUTER = ROWS
EXPECTED = OUTER + COUNT * COUNT
_SLOPE = EXPECTED + COUNT * COUNT
_MEAN = _SLOPE + COUNT
_FEED = _MEAN + COUNT
_KEPT = _FEED + COUNT
_DAYS = 32
_END = _KEPT + _DAYS * COUNT
"""Rows behind those of a pass: the two sums (upper triangles); dh_i; -de_i; f_i; the s_i of the latest days, which
are multiplied out _DAYS at a time, so that each sum stays in a register over them."""


def new_scored_pass() -> np.ndarray:
    """Return the array of a pass with room for the sums of its scores."""
    return aligned(_END, WIDTH)


@inner
def add_outer(p: np.ndarray, days: int, free: np.ndarray) -> None:
    """Add the outer products of the scores kept of the latest ``days`` to their sum."""
    for a in range(free.size):
        for b in range(a, free.size):
            i, j = free[a], free[b]
            total = load(p, OUTER + i * COUNT + j)
            for d in range(days):
                total = total + load(p, _KEPT + d * COUNT + i) * load(p, _KEPT + d * COUNT + j)
            store(p, OUTER + i * COUNT + j, total)


@inner
def add_expected(p: np.ndarray, r: Any, free: np.ndarray) -> None:
    """Add a day's expected information to its sum; ``r``: 1 / h."""
    half = 0.5 * r * r
    for a in range(free.size):
        i = free[a]
        slope, mean = half * load(p, _SLOPE + i), r * load(p, _MEAN + i)
        for b in range(a, free.size):
            j, at = free[b], i * COUNT + free[b]
            both = slope * load(p, _SLOPE + j) + mean * load(p, _MEAN + j)
            store(p, EXPECTED + at, load(p, EXPECTED + at) + both)


@inner
def add_scores(p: np.ndarray, x: np.ndarray, skip: int, free: np.ndarray, expected: Any) -> None:
    """Fill both sums over the days of ``x`` (W, lanes), after ``begin`` for every lane; ``free`` in ascending order.

    ``expected``: True, or None to leave out the expected information, which the rolling pass has no use for.
    """
    zero, one, h = spread(0.0), spread(1.0), load(p, AFTER)
    c, phi, omega = load(p, THETA + C), load(p, THETA + PHI), load(p, THETA + OMEGA)
    alpha, gamma, beta = load(p, THETA + ALPHA), load(p, THETA + GAMMA), load(p, THETA + BETA)
    for i in range(OUTER, _END):
        store(p, i, zero)
    for i in free:
        store(p, _SLOPE + i, load(p, D + i))
    store(p, _MEAN + C, one)
    store(p, _FEED + OMEGA, one)
    lag, days = load(x, 0) if skip else zero, 0
    for t in range(skip, x.shape[0]):
        now = load(x, t)
        e, r = now - c - phi * lag, 1.0 / h
        square = e * e
        up = where_positive(e, square, zero)
        store(p, _MEAN + PHI, lag)
        by_h, by_e = 0.5 * (square * r - 1.0) * r, e * r
        for i in free:
            store(p, _KEPT + days * COUNT + i, by_h * load(p, _SLOPE + i) + by_e * load(p, _MEAN + i))
        if expected is not None:
            add_expected(p, r, free)
        steep = -2.0 * e * where_positive(e, alpha + gamma, alpha)
        store(p, _FEED + C, steep)
        store(p, _FEED + PHI, steep * lag)
        store(p, _FEED + ALPHA, square)
        store(p, _FEED + GAMMA, up)
        store(p, _FEED + BETA, h)
        for i in free:
            store(p, _SLOPE + i, beta * load(p, _SLOPE + i) + load(p, _FEED + i))
        h = omega + alpha * square + gamma * up + beta * h
        lag = now
        days += 1
        if days == _DAYS:
            add_outer(p, days, free)
            days = 0
    add_outer(p, days, free)
