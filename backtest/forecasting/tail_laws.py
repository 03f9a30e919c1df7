"""Quantile, shortfall and probability of the normal, Student t and skewed t laws, many laws at once.

A law is a row (mode, scale, nu, lambda), see kernels/student.py: Student's t stretched by 1 + lambda above the mode and
by 1 - lambda below it; nu infinite is the normal law. In location and scale it is the skewed t of Hansen (1994,
International Economic Review 35), of the loss: lambda > 0 lengthens the tail of large losses.
"""

import numpy as np
from scipy.special import gammaln, ndtr, ndtri, stdtr, stdtrit


def read_laws(laws: np.ndarray, levels: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return quantile and shortfall (n, L) of ``laws`` (n, 4) at ``levels`` (L).

    With w the t quantile and D(w) = f(w) (nu + w^2)/(nu - 1) the part of its mean beyond w: above the mode the quantile
    is m + tau (1 + lambda) w and the shortfall m + tau (1 + lambda)^2 D(w)/(1 - q); below it, from the law's mean.
    """
    mode, tau, nu, skew = (column[:, None] for column in laws.T)
    deep = 1.0 - levels
    above = deep <= 0.5 * (1.0 + skew)
    side = np.where(above, 1.0 + skew, 1.0 - skew)
    p = np.where(above, deep, levels) / side
    w = _quantile_below(nu, p)
    beyond = side * side * _mean_beyond(nu, w)
    centre = np.where(above, 0.0, 4.0 * skew * _mean_beyond(nu, 0.0))
    return mode + tau * side * np.where(above, -w, w), mode + tau * (centre + beyond) / deep


def law_pit(laws: np.ndarray, values: np.ndarray) -> np.ndarray:
    """Return each law's probability of losing less than its value (n); a law without spread puts all on its mode."""
    mode, tau, nu, skew = laws.T
    above = values >= mode
    side = np.where(above, 1.0 + skew, 1.0 - skew)
    below = side * _probability_below(nu, -np.abs(standardise(values, mode, tau * side)))
    return np.where(np.isnan(values), np.nan, np.where(above, 1.0 - below, below))


def standardise(loss: np.ndarray, mean: np.ndarray, sigma: np.ndarray) -> np.ndarray:
    """Return (loss - mean) / sigma; where sigma is zero, an infinity of the difference's sign, or zero."""
    gap = loss - mean
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.where(gap == 0.0, 0.0, gap / sigma)


def _quantile_below(nu: np.ndarray, p: np.ndarray) -> np.ndarray:
    with np.errstate(invalid="ignore"):
        return np.where(np.isinf(nu), ndtri(p), stdtrit(np.where(np.isinf(nu), 1.0, nu), p))


def _probability_below(nu: np.ndarray, w: np.ndarray) -> np.ndarray:
    finite = np.where(np.isinf(nu), 1.0, nu)
    return np.where(np.isinf(nu), ndtr(w), np.where(np.isinf(w), 0.0, stdtr(finite, w)))


def _mean_beyond(nu: np.ndarray, w: np.ndarray | float) -> np.ndarray:
    """Return the integral of x f(x) above |w|: f(w) (nu + w^2)/(nu - 1), for the normal law f(w)."""
    finite = np.where(np.isinf(nu), 5.0, nu)
    constant = gammaln(0.5 * finite + 0.5) - gammaln(0.5 * finite) - 0.5 * np.log(np.pi * finite)
    ratio = np.square(w) / finite
    student = np.exp(constant - 0.5 * (finite - 1.0) * np.log1p(ratio)) * finite / (finite - 1.0)
    return np.where(np.isinf(nu), np.exp(-0.5 * np.square(w)) / np.sqrt(2 * np.pi), student)
