"""The truth: mean, sigma, VaR and ES of each day's hypothetical P&L given the evening before, in closed form.

Given the class of the day and whether the power-and-gas spike happens, every desk and every sum of desks is normal
(see world.py). The conditional law of a desk, and of the firm, is therefore a finite mixture of normals: its quantile
is found by bisection on the exact distribution function, its ES is exact. Nothing here is simulated.
"""

import numpy as np
from scipy.special import ndtr
from world import BOOKS, CLASS_SHARE, CLASS_VARIANCE, DRIFT, SKEW, SPIKE, SPIKE_SD, UNIT

LEVELS = (0.975, 0.99)
SPIKE_SHARE = max(book.spikes for book in BOOKS)
SHARE = np.outer([1 - SPIKE_SHARE, SPIKE_SHARE], CLASS_SHARE).ravel()
"""Probability of each of the normals: without and with a spike, by class of day."""


def components(scale: np.ndarray, reach: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return mean and standard deviation of the loss in each normal, shapes [days, normals].

    ``scale`` and ``reach`` (EUR, [days, books]) are zero for books that are not part of the sum.
    """
    b, h, calm, spikes = (np.array([getattr(d, k) for d in BOOKS]) for k in ("common", "skew", "calm", "spikes"))
    tilt = (CLASS_VARIANCE - 1)[:, None]
    ordinary = -calm * (b * SKEW / UNIT + h) * tilt + spikes * SPIKE
    together = (reach @ (calm * b)) ** 2 + (reach * calm) ** 2 @ (1 - b**2)
    variance = np.outer(together, CLASS_VARIANCE) / UNIT**2
    spiked = reach @ (spikes > 0)
    mean = -(scale.sum(axis=1) * DRIFT)[:, None] - reach @ ordinary.T
    means = np.hstack([mean, mean + SPIKE * spiked[:, None]])
    variances = np.hstack([variance, variance + (SPIKE_SD * spiked[:, None]) ** 2])
    return means, np.sqrt(variances)


def value_at_risk(means: np.ndarray, sds: np.ndarray, level: float) -> np.ndarray:
    """Return the level-quantile of the loss of each day."""
    low, high = (means - 12 * sds).min(axis=1), (means + 12 * sds).max(axis=1)
    for _ in range(60):
        middle = (low + high) / 2
        below = ndtr((middle[:, None] - means) / sds) @ SHARE < level
        low, high = np.where(below, middle, low), np.where(below, high, middle)
    return (low + high) / 2


def expected_shortfall(means: np.ndarray, sds: np.ndarray, level: float, var: np.ndarray) -> np.ndarray:
    """Return the mean loss beyond the level-quantile ``var`` of each day."""
    z = (means - var[:, None]) / sds
    beyond = means * ndtr(z) + sds * np.exp(-(z**2) / 2) / np.sqrt(2 * np.pi)
    return beyond @ SHARE / (1 - level)


def truth(scale: np.ndarray, reach: np.ndarray) -> dict[str, np.ndarray]:
    """Return mean and sigma of the P&L (profit positive) and VaR and ES (loss positive) of each day, in EUR."""
    means, sds = components(scale, reach)
    loss = means @ SHARE
    columns = {"mean": -loss, "sigma": np.sqrt((sds**2 + (means - loss[:, None]) ** 2) @ SHARE)}
    for level in LEVELS:
        name = f"{level:g}"[2:]
        var = value_at_risk(means, sds, level)
        columns[f"var_{name}"], columns[f"es_{name}"] = var, expected_shortfall(means, sds, level, var)
    return columns
