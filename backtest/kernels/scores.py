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
_SCORE = _FEED + COUNT
_END = _SCORE + COUNT
"""Rows behind those of a pass: the two sums (upper triangles); dh_i; -de_i; f_i; s_i."""


def new_scored_pass() -> np.ndarray:
    """Return the array of a pass with room for the sums of its scores."""
    return aligned(_END, WIDTH)


@inner
def add_day(p: np.ndarray, r: Any, by_h: Any, by_e: Any, free: np.ndarray) -> None:
    """Add a day to both sums; ``r``: 1 / h, ``by_h`` and ``by_e``: slopes of its log-likelihood by h and by -e."""
    for i in free:
        store(p, _SCORE + i, by_h * load(p, _SLOPE + i) + by_e * load(p, _MEAN + i))
    half = 0.5 * r * r
    for a in range(free.size):
        i = free[a]
        score, slope, mean = load(p, _SCORE + i), half * load(p, _SLOPE + i), r * load(p, _MEAN + i)
        for b in range(a, free.size):
            j, at = free[b], i * COUNT + free[b]
            store(p, OUTER + at, load(p, OUTER + at) + score * load(p, _SCORE + j))
            both = slope * load(p, _SLOPE + j) + mean * load(p, _MEAN + j)
            store(p, EXPECTED + at, load(p, EXPECTED + at) + both)


@inner
def add_scores(p: np.ndarray, x: np.ndarray, skip: int, free: np.ndarray) -> None:
    """Fill both sums over the days of ``x`` (W, lanes), after ``begin`` for every lane; ``free`` in ascending order."""
    zero, one, h = spread(0.0), spread(1.0), load(p, AFTER)
    c, phi, omega = load(p, THETA + C), load(p, THETA + PHI), load(p, THETA + OMEGA)
    alpha, gamma, beta = load(p, THETA + ALPHA), load(p, THETA + GAMMA), load(p, THETA + BETA)
    for i in range(OUTER, _END):
        store(p, i, zero)
    for i in free:
        store(p, _SLOPE + i, load(p, D + i))
    store(p, _MEAN + C, one)
    store(p, _FEED + OMEGA, one)
    lag = load(x, 0) if skip else zero
    for t in range(skip, x.shape[0]):
        now = load(x, t)
        e, r = now - c - phi * lag, 1.0 / h
        square = e * e
        up = where_positive(e, square, zero)
        store(p, _MEAN + PHI, lag)
        add_day(p, r, 0.5 * (square * r - 1.0) * r, e * r, free)
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
