"""Exponentially weighted variance, h_t = decay h_{t-1} + (1 - decay) x_{t-1}^2, started at the past's mean square."""

import math

import numpy as np

from backtest.kernels.compiled import compiled


@compiled
def filter_ewma(x: np.ndarray, decay: float, residuals: np.ndarray) -> float:
    """Fill ``residuals`` (x_t / sqrt(h_t), same length as x); return the next day's standard deviation.

    A past of zeros has zero residuals and a zero standard deviation.
    """
    h = 0.0
    for t in range(x.size):
        h += x[t] * x[t]
    h /= x.size
    if not h > 0.0:
        residuals[:] = 0.0
        return 0.0
    for t in range(x.size):
        residuals[t] = x[t] / math.sqrt(h)
        h = decay * h + (1.0 - decay) * x[t] * x[t]
        h = max(h, 1e-300)
    return math.sqrt(h)


@compiled
def roll_ewma(pasts: np.ndarray, decay: float) -> tuple[np.ndarray, np.ndarray]:
    """Filter each row of ``pasts`` (n, W); return sigma (n) and residuals (n, W)."""
    n, W = pasts.shape
    sigma, residuals = np.empty(n), np.empty((n, W))
    for i in range(n):
        sigma[i] = filter_ewma(pasts[i].copy(), decay, residuals[i])
    return sigma, residuals
