"""Laws of the standardised residual, as the terms that a likelihood pass needs, one lane or eight.

Student t with unit variance: log f(z) = K - M log(1 + kappa z^2), kappa = eta / (1 - 2 eta), M = (1 + eta) / (2 eta).
Hansen's skewed t (1994, International Economic Review 35): the same in y = A z + B, A = b / (1 -+ lambda),
B = a / (1 -+ lambda), on either side of z = -a / b, with K = log c + log b.
"""

import math

import numpy as np

from backtest.kernels.compiled import inner
from backtest.kernels.student import log_constant

KAPPA, M, K = 0, 3, 6  # each with its first and second derivative by eta
K_L, K_LL, K_LE, TURN = 9, 10, 11, 12
SIDE = (13, 25)  # left and right of the turn: A and B, each with derivatives by lambda, eta, ll, le, ee
CONSTANTS = 37

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
def set_constants(out: np.ndarray, row: int, lane: int, eta: float, lam: float, skew: bool) -> None:
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
    if skew:
        _set_skew(out, row, lane, eta, lam)


@inner
def _set_skew(out: np.ndarray, row: int, lane: int, eta: float, lam: float) -> None:
    """Add to ``out`` what depends on lambda: A, B and log b on a grid of nine points, differenced with a step of 1e-4.

    Exact enough to reach the optimum, which the value alone decides.
    """
    d = _STEP
    grid = np.empty((5, 3, 3))
    for i in range(3):
        for j in range(3):
            e, s = eta + (i - 1) * d, lam + (j - 1) * d
            a, b = skew_shape(e, s)
            grid[0, i, j], grid[1, i, j], grid[2, i, j] = b / (1.0 - s), a / (1.0 - s), b / (1.0 + s)
            grid[3, i, j], grid[4, i, j] = a / (1.0 + s), math.log(b)
    for n in range(4):
        _differences(grid[n], d, row + SIDE[n // 2] + 6 * (n % 2), lane, out)
    at = grid[4]
    out[row + K, lane] += at[1, 1]
    out[row + K + 1, lane] += (at[2, 1] - at[0, 1]) / (2 * d)
    out[row + K + 2, lane] += (at[2, 1] - 2 * at[1, 1] + at[0, 1]) / (d * d)
    out[row + K_L, lane] = (at[1, 2] - at[1, 0]) / (2 * d)
    out[row + K_LL, lane] = (at[1, 2] - 2 * at[1, 1] + at[1, 0]) / (d * d)
    out[row + K_LE, lane] = (at[2, 2] - at[2, 0] - at[0, 2] + at[0, 0]) / (4 * d * d)
    a, b = skew_shape(eta, lam)
    out[row + TURN, lane] = -a / b


@inner
def _differences(at: np.ndarray, d: float, row: int, lane: int, out: np.ndarray) -> None:
    """Write value, derivatives by lambda, eta, and second derivatives ll, le, ee, from a 3 x 3 grid (eta, lambda)."""
    out[row, lane] = at[1, 1]
    out[row + 1, lane] = (at[1, 2] - at[1, 0]) / (2 * d)
    out[row + 2, lane] = (at[2, 1] - at[0, 1]) / (2 * d)
    out[row + 3, lane] = (at[1, 2] - 2 * at[1, 1] + at[1, 0]) / (d * d)
    out[row + 4, lane] = (at[2, 2] - at[2, 0] - at[0, 2] + at[0, 0]) / (4 * d * d)
    out[row + 5, lane] = (at[2, 1] - 2 * at[1, 1] + at[0, 1]) / (d * d)
