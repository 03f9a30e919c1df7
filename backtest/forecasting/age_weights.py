"""Losses weighted by their age (Boudoukh, Richardson & Whitelaw 1998, Risk 11(5):64-67): the weights and the rank."""

import numpy as np


def age_weights(n: int, decay: float) -> np.ndarray:
    """Return the weights (n) of a past, oldest first: decay^(i-1) (1 - decay)/(1 - decay^n) for the i-th newest."""
    return decay ** np.arange(n - 1.0, -1.0, -1.0) * (1.0 - decay) / (1.0 - decay**n)


def weighted_rank(samples: np.ndarray, weights: np.ndarray, values: np.ndarray) -> np.ndarray:
    """Return (weight strictly below each value + half an average weight) / (1 + an average weight); NaN stays NaN.

    With equal weights this is the rank (number below + 0.5)/(m + 1).
    """
    average = 1.0 / samples.shape[1]
    # A sum by row, not a product with a matrix, whose last bit depends on how many rows there are.
    below = np.where(samples < values[:, None], weights, 0.0).sum(axis=1)
    return np.where(np.isnan(values), np.nan, (below + 0.5 * average) / (1.0 + average))
