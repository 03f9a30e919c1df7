"""The variance of the first day and its derivatives, by the start-up rules."""

import numpy as np

from backtest.kernels.compiled import compiled
from backtest.kernels.parameters import ALPHA, BETA, GAMMA, MEAN_SQUARE, OMEGA, PHI, UNCONDITIONAL, C

HALF = 0.5
"""Weight of gamma in the persistence, and of the start-up variance in the term of gamma."""


@compiled
def weight(i: int) -> float:
    """Return the weight of a parameter in the persistence alpha + gamma / 2 + beta."""
    if i in (ALPHA, BETA):
        return 1.0
    return HALF if i == GAMMA else 0.0


@compiled
def start_variance(theta: np.ndarray, lane: int, start: int, fixed: float, moments: np.ndarray) -> float:
    """Return b, the variance and squared residual before the first day."""
    omega, persistence = theta[OMEGA, lane], theta[ALPHA, lane] + HALF * theta[GAMMA, lane] + theta[BETA, lane]
    if start == UNCONDITIONAL:
        return float(omega / (1.0 - persistence))
    if start == MEAN_SQUARE:
        c, phi = theta[C, lane], theta[PHI, lane]
        n, sx, sl, sxx, sll, sxl = moments[0], moments[1], moments[2], moments[3], moments[4], moments[5]
        return float((sxx + phi * phi * sll - 2 * phi * sxl - 2 * c * sx + 2 * c * phi * sl) / n + c * c)
    return float(fixed)


@compiled
def first_variance(theta: np.ndarray, lane: int, start: int, fixed: float, moments: np.ndarray, d: np.ndarray) -> float:
    """Return h of the first day, omega + persistence b, and fill column ``lane`` of ``d`` with its derivatives."""
    omega, persistence = theta[OMEGA, lane], theta[ALPHA, lane] + HALF * theta[GAMMA, lane] + theta[BETA, lane]
    b = start_variance(theta, lane, start, fixed, moments)
    d[C, lane] = d[PHI, lane] = 0.0
    if start == UNCONDITIONAL:
        r = 1.0 / (1.0 - persistence)
        d[OMEGA, lane] = r
        for i in range(ALPHA, BETA + 1):
            d[i, lane] = weight(i) * omega * r * r
        return b
    if start == MEAN_SQUARE:
        c, phi, n = theta[C, lane], theta[PHI, lane], moments[0]
        d[C, lane] = persistence * 2 * (c + (phi * moments[2] - moments[1]) / n)
        d[PHI, lane] = persistence * 2 * (phi * moments[4] - moments[5] + c * moments[2]) / n
    d[OMEGA, lane] = 1.0
    for i in range(ALPHA, BETA + 1):
        d[i, lane] = weight(i) * b
    return omega + persistence * b


@compiled
def first_curvature(
    i: int, j: int, theta: np.ndarray, lane: int, start: int, moments: np.ndarray, d: np.ndarray
) -> float:
    """Return the second derivative of the first day's h by parameters i <= j, after ``first_variance`` filled ``d``."""
    persistence = theta[ALPHA, lane] + HALF * theta[GAMMA, lane] + theta[BETA, lane]
    if start == UNCONDITIONAL and i > PHI:
        r = 1.0 / (1.0 - persistence)
        if i == OMEGA:
            return weight(j) * r * r
        return weight(i) * weight(j) * 2.0 * theta[OMEGA, lane] * r * r * r
    if start != MEAN_SQUARE or i > PHI:
        return 0.0
    if j > PHI:
        return weight(j) * d[i, lane] / persistence if persistence > 0.0 else 0.0
    n = moments[0]
    entry = 1.0 if i == j == C else (moments[2] / n if i != j else moments[4] / n)
    return persistence * 2.0 * entry
