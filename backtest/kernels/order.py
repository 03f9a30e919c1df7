"""Order statistics of a sample: the few largest, the rank of a value, quantile and shortfall, weighted or not."""

import numpy as np

from backtest.kernels.compiled import compiled, in_place


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


@in_place
def kth_largest(values: np.ndarray, k: int) -> float:
    """Return the ``k``-th largest of ``values``, which it reorders (Hoare 1961, Communications of the ACM 4:321)."""
    left, right, at = 0, values.size - 1, k - 1
    while left < right:
        pivot = values[(left + right) >> 1]
        i, j = left, right
        while i <= j:
            while values[i] > pivot:
                i += 1
            while values[j] < pivot:
                j -= 1
            if i <= j:
                values[i], values[j] = values[j], values[i]
                i += 1
                j -= 1
        if at <= j:
            right = j
        elif at >= i:
            left = i
        else:
            break
    return float(values[at])


@in_place
def sort_ascending(values: np.ndarray) -> None:
    """Sort ``values`` in place, by Shell's method with the gaps of Ciura (2001)."""
    for gap in (701, 301, 132, 57, 23, 10, 4, 1):
        for i in range(gap, values.size):
            value, j = values[i], i
            while j >= gap and values[j - gap] > value:
                values[j] = values[j - gap]
                j -= gap
            values[j] = value


@in_place
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


@in_place
def heaviest(sample: np.ndarray, weights: np.ndarray, share: float, bound: float, work: np.ndarray) -> int:
    """Write the largest values, in decreasing order and with their weights, up to the one that exceeds ``share``.

    ``work`` (4, m): values and weights in rows 0 and 1, rows 2 and 3 scratch. ``bound`` is a guess below the last value
    looked for: it saves time and changes nothing. Returns how many were written; equal values in order of the sample.
    """
    top, top_weight, kept, kept_weight = work[0], work[1], work[2], work[3]
    count, total = 0, 0.0
    for i in range(sample.size):
        kept[count], kept_weight[count] = sample[i], weights[i]
        if sample[i] > bound:
            total += weights[i]
            count += 1
    if not total > share:
        count = sample.size
        for i in range(count):
            kept[i], kept_weight[i] = sample[i], weights[i]
    total = 0.0
    for n in range(count):
        at = 0
        for i in range(1, count):
            at = i if kept[i] > kept[at] else at
        top[n], top_weight[n] = kept[at], kept_weight[at]
        total += kept_weight[at]
        kept[at] = -np.inf
        if total > share:
            return n + 1
    return count


@compiled
def weighted_rows(samples: np.ndarray, weights: np.ndarray, levels: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return quantile and shortfall (n, L) of each row of ``samples`` (n, m), weighted, at each level.

    Quantile: the smallest value whose weight, with all below it, is at least q; equal weights give the ceil(m q)-th
    smallest. Shortfall: the exact integral of that step function beyond q.
    """
    n, m = samples.shape
    quantile, shortfall, work = np.empty((n, levels.size)), np.empty((n, levels.size)), np.empty((4, m))
    widest, bound, spare = 0.0, -np.inf, 1e-9 / m
    for level in levels:
        widest = max(widest, 1.0 - level)
    for i in range(n):
        count = heaviest(samples[i], weights, widest + spare, bound, work)
        bound = work[0, count - 1] - 0.05 * (work[0, 0] - work[0, count - 1])
        for j in range(levels.size):
            deep, above, total, k = 1.0 - levels[j], 0.0, 0.0, 0
            while k < count - 1 and above + work[1, k] <= deep + spare:
                above += work[1, k]
                total += work[1, k] * work[0, k]
                k += 1
            quantile[i, j] = work[0, k]
            shortfall[i, j] = (total + (deep - above) * work[0, k]) / deep
    return quantile, shortfall
