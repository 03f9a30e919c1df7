"""Laws of the standardised residual, as the terms that a likelihood pass needs, one lane or eight.

Student t with unit variance: log f(z) = K - M log(1 + kappa z^2), kappa = eta / (1 - 2 eta), M = (1 + eta) / (2 eta).
Hansen's skewed t (1994, International Economic Review 35): the same in y = A z + B, A = b / (1 -+ lambda),
B = a / (1 -+ lambda), on either side of z = -a / b, with K = log c + log b.
"""

import math
from typing import Any

import numpy as np

from backtest.kernels.compiled import inner
from backtest.kernels.student import log_constant

KAPPA, M, K = 0, 3, 6  # each with its first and second derivative by eta
K_L, K_LL, K_LE, TURN = 9, 10, 11, 12
SIDE = (13, 25)  # left and right of the turn: A and B, each with derivatives by lambda, eta, ll, le, ee
LOG_B = 37  # with the same derivatives
CONSTANTS = 43

_STEP = 1e-4


@inner
def log_scale(eta: float) -> tuple[float, float, float]:
    """Return log c of the unit-variance t law, nu = 1 / eta, and its first two derivatives by eta."""
    value, slope, bend = log_constant(eta)
    spare = 1.0 / (1.0 - 2.0 * eta)
    return value + 0.5 * math.log(spare), slope + spare, bend + 2.0 * spare * spare


@inner
def skew_shape(eta: float, lam: float) -> tuple[float, float]:
    """Return Hansen's a and b."""
    nu = 1.0 / eta
    a = 4.0 * lam * math.exp(log_scale(eta)[0]) * (nu - 2.0) / (nu - 1.0)
    return a, math.sqrt(1.0 + 3.0 * lam * lam - a * a)


@inner
def set_constants(out: np.ndarray, row: int, lane: int, eta: float, lam: float, skew: Any) -> None:
    """Fill column ``lane`` of ``out`` (rows, lanes), from ``row`` on, with the law's constants at eta and lambda."""
    spare = 1.0 / (1.0 - 2.0 * eta)
    out[row + KAPPA, lane], out[row + KAPPA + 1, lane], out[row + KAPPA + 2, lane] = (
        eta * spare,
        spare**2,
        4.0 * spare**3,
    )
    out[row + M, lane], out[row + M + 1, lane], out[row + M + 2, lane] = (
        0.5 * (1.0 + 1.0 / eta),
        -0.5 / eta**2,
        1.0 / eta**3,
    )
    out[row + K, lane], out[row + K + 1, lane], out[row + K + 2, lane] = log_scale(eta)
    if skew is not None:
        _set_skew(out, row, lane, eta, lam)


@inner
def _set_skew(out: np.ndarray, row: int, lane: int, eta: float, lam: float) -> None:
    """Add to ``out`` what depends on lambda: A, B and log b on a grid of nine points, differenced with a step of 1e-4.

    Exact enough to reach the optimum, which the value alone decides.
    """
    for k in range(SIDE[0], CONSTANTS):
        out[row + k, lane] = 0.0
    for i in range(-1, 2):
        for j in range(-1, 2):
            s = lam + j * _STEP
            a, b = skew_shape(eta + i * _STEP, s)
            _add_point(out, row + SIDE[0], lane, i, j, b / (1.0 - s))
            _add_point(out, row + SIDE[0] + 6, lane, i, j, a / (1.0 - s))
            _add_point(out, row + SIDE[1], lane, i, j, b / (1.0 + s))
            _add_point(out, row + SIDE[1] + 6, lane, i, j, a / (1.0 + s))
            _add_point(out, row + LOG_B, lane, i, j, math.log(b))
    for k in range(SIDE[0], CONSTANTS, 6):
        for n in range(1, 6):
            out[row + k + n, lane] /= (2.0 * _STEP) if n < 3 else (_STEP * _STEP * (4.0 if n == 4 else 1.0))
    at = row + LOG_B
    out[row + K, lane] += out[at, lane]
    out[row + K + 1, lane] += out[at + 2, lane]
    out[row + K + 2, lane] += out[at + 5, lane]
    out[row + K_L, lane], out[row + K_LL, lane], out[row + K_LE, lane] = (
        out[at + 1, lane],
        out[at + 3, lane],
        out[at + 4, lane],
    )
    a, b = skew_shape(eta, lam)
    out[row + TURN, lane] = -a / b


@inner
def _add_point(out: np.ndarray, row: int, lane: int, i: int, j: int, value: float) -> None:
    """Add a point of a 3 x 3 grid (eta: i, lambda: j) to value and differences by lambda, eta, twice: ll, le, ee."""
    if i == 0:
        out[row, lane] += value if j == 0 else 0.0
        out[row + 1, lane] += j * value
        out[row + 3, lane] += (3 * j * j - 2) * value
    if j == 0:
        out[row + 2, lane] += i * value
        out[row + 5, lane] += (3 * i * i - 2) * value
    out[row + 4, lane] += i * j * value
