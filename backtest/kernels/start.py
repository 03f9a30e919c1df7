"""The variance of the first day and its derivatives, by the start-up rules."""

import numpy as np

from backtest.kernels.compiled import inner
from backtest.kernels.parameters import ALPHA, BETA, GAMMA, MEAN_SQUARE, OMEGA, PHI, UNCONDITIONAL, C
from backtest.kernels.terms import THETA, D

HALF = 0.5
"""Weight of gamma in the persistence, and of the start-up variance in the term of gamma."""


@inner
def weight(i: int) -> float:
    """Return the weight of a parameter in the persistence alpha + gamma / 2 + beta."""
    if i in (ALPHA, BETA):
        return 1.0
    return HALF if i == GAMMA else 0.0


@inner
def persistence_of(p: np.ndarray, lane: int) -> float:
    """Return alpha + gamma / 2 + beta."""
    return p[THETA + ALPHA, lane] + HALF * p[THETA + GAMMA, lane] + p[THETA + BETA, lane]


@inner
def start_variance(p: np.ndarray, lane: int, start: int, fixed: float, moments: np.ndarray) -> float:
    """Return b, the variance and squared residual before the first day."""
    omega, persistence = p[THETA + OMEGA, lane], persistence_of(p, lane)
    if start == UNCONDITIONAL:
        return float(omega / (1.0 - persistence))
    if start == MEAN_SQUARE:
        c, phi = p[THETA + C, lane], p[THETA + PHI, lane]
        n, sx, sl = moments[lane, 0], moments[lane, 1], moments[lane, 2]
        sxx, sll, sxl = moments[lane, 3], moments[lane, 4], moments[lane, 5]
        return float((sxx + phi * phi * sll - 2 * phi * sxl - 2 * c * sx + 2 * c * phi * sl) / n + c * c)
    return float(fixed)


@inner
def first_variance(p: np.ndarray, lane: int, start: int, fixed: float, moments: np.ndarray) -> float:
    """Return h of the first day, omega + persistence b, and fill the lane's first derivatives."""
    omega, persistence = p[THETA + OMEGA, lane], persistence_of(p, lane)
    b = start_variance(p, lane, start, fixed, moments)
    p[D + C, lane] = p[D + PHI, lane] = 0.0
    if start == UNCONDITIONAL:
        r = 1.0 / (1.0 - persistence)
        p[D + OMEGA, lane] = r
        for i in range(ALPHA, BETA + 1):
            p[D + i, lane] = weight(i) * omega * r * r
        return b
    if start == MEAN_SQUARE:
        c, phi, n = p[THETA + C, lane], p[THETA + PHI, lane], moments[lane, 0]
        p[D + C, lane] = persistence * 2 * (c + (phi * moments[lane, 2] - moments[lane, 1]) / n)
        p[D + PHI, lane] = persistence * 2 * (phi * moments[lane, 4] - moments[lane, 5] + c * moments[lane, 2]) / n
    p[D + OMEGA, lane] = 1.0
    for i in range(ALPHA, BETA + 1):
        p[D + i, lane] = weight(i) * b
    return omega + persistence * b


@inner
def first_curvature(i: int, j: int, p: np.ndarray, lane: int, start: int, moments: np.ndarray) -> float:
    """Return the second derivative of the first day's h by parameters i <= j, after ``first_variance``."""
    persistence = persistence_of(p, lane)
    if start == UNCONDITIONAL and i > PHI:
        r = 1.0 / (1.0 - persistence)
        if i == OMEGA:
            return weight(j) * r * r
        return weight(i) * weight(j) * 2.0 * p[THETA + OMEGA, lane] * r * r * r
    if start != MEAN_SQUARE or i > PHI:
        return 0.0
    if j > PHI:
        return weight(j) * p[D + i, lane] / persistence if persistence > 0.0 else 0.0
    n = moments[lane, 0]
    entry = 1.0 if i == j == C else (moments[lane, 2] / n if i != j else moments[lane, 4] / n)
    return persistence * 2.0 * entry
