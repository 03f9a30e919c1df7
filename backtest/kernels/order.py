"""Order statistics of a sample: the few largest, the rank of a value."""

import numpy as np

from backtest.kernels.compiled import compiled


@compiled
def largest(sample: np.ndarray, k: int) -> np.ndarray:
    """Return the ``k`` largest values of ``sample``, in decreasing order."""
    top = np.empty(k)
    filled = 0
    for i in range(sample.size):
        value = sample[i]
        if filled == k and not value > top[k - 1]:
            continue
        j = filled if filled < k else k - 1
        filled = min(filled + 1, k)
        while j > 0 and top[j - 1] < value:
            top[j] = top[j - 1]
            j -= 1
        top[j] = value
    return top


@compiled
def share_below(sample: np.ndarray, value: float) -> float:
    """Return (number of sample values strictly below ``value`` + 0.5) / (n + 1): the rank as a probability."""
    count = 0
    for i in range(sample.size):
        count += sample[i] < value
    return (count + 0.5) / (sample.size + 1)


@compiled
def rank_rows(samples: np.ndarray, values: np.ndarray) -> np.ndarray:
    """Return ``share_below`` of each value in its row of ``samples`` (n, m); NaN values stay NaN."""
    out = np.full(values.size, np.nan)
    for i in range(values.size):
        if not np.isnan(values[i]):
            out[i] = share_below(samples[i], values[i])
    return out


@compiled
def empirical_rows(samples: np.ndarray, levels: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return quantile and shortfall (n, L) of each row of ``samples`` (n, m) at each level.

    Quantile: the ceil(m q)-th smallest. Shortfall: the exact integral of that step function beyond q,
    [sum of the values above it + (k - m q) x_(k)] / (m (1 - q)).
    """
    n, m = samples.shape
    quantile, shortfall = np.empty((n, levels.size)), np.empty((n, levels.size))
    deepest = m
    for level in levels:
        deepest = min(deepest, int(np.ceil(m * level - 1e-9)))
    for i in range(n):
        top = largest(samples[i], m - deepest + 1)
        for j in range(levels.size):
            k = int(np.ceil(m * levels[j] - 1e-9))
            total = (k - m * levels[j]) * top[m - k]
            for r in range(m - k):
                total += top[r]
            quantile[i, j], shortfall[i, j] = top[m - k], total / (m * (1.0 - levels[j]))
    return quantile, shortfall
