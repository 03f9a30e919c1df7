"""The exact law of a sum of T independent daily grades, each 0, 1, or uniform between: a count of partial exceptions.

Given m days of grade 1 and n graded ones the sum is m + Irwin-Hall(n). Its density is built by the recursion
f_n(x) = [x f_(n-1)(x) + (n - x) f_(n-1)(x - 1)]/(n - 1), all of whose terms are positive, and summed with
F_n(x) = sum over k >= 0 of f_(n+1)(x - k): small tails keep their digits, where the usual alternating sum loses all of
them beyond n = 20.
"""

from functools import lru_cache

import numpy as np
import numpy.typing as npt
from scipy.special import xlog1py, xlogy

from backtest.judging.counts import at_least, log_choose, pmf

Floats = npt.NDArray[np.float64]

_NEGLIGIBLE = 1e-18
_WHOLE = 1e-9


def irwin_hall_densities(most: int, part: float) -> Floats:
    """Return f_n(i + part) for n = 1..most (rows) and i = 0..most-1, 0 <= part < 1: float64[most, most]."""
    rows = np.zeros((most, most))
    rows[0, 0] = 1.0
    places = np.arange(most) + part
    for n in range(2, most + 1):
        before = rows[n - 2]
        row = places * before
        row[1:] += (n - places[1:]) * before[:-1]
        rows[n - 1] = np.maximum(row, 0.0) / (n - 1)
    return rows


@lru_cache(maxsize=16)
def _weights(days: int, graded: float, full: float) -> tuple[Floats, float]:
    """Return P(n graded days, m full days), float64[n, m], without negligible corners, and a bound for these."""
    counts = pmf(days, graded)
    most = int(np.flatnonzero(counts > _NEGLIGIBLE)[-1])
    rest = at_least(most + 1, days, graded)
    if full == 0.0:
        return counts[: most + 1, None], rest
    wide = int(np.flatnonzero(pmf(days, full) > _NEGLIGIBLE)[-1])
    m, left = np.arange(wide + 1), days - np.arange(most + 1)[:, None]  # of the days left, m are full
    share, fits = full / (1.0 - graded), m <= left
    zeros = np.where(fits, left - m, 0)
    given = np.exp(log_choose(zeros + m, m) + xlogy(m, share) + xlog1py(zeros, -share))
    return counts[: most + 1, None] * np.where(fits, given, 0.0), rest + at_least(wide + 1, days, full)


def tails(total: float, days: int, graded: float, full: float = 0.0) -> tuple[float, float]:
    """Return (P(X <= total), P(X >= total)) for the sum X of ``days`` grades.

    A day's grade is uniform on (0, 1) with probability ``graded``, 1 with probability ``full``, else 0. Corners with
    probability below 1e-18 are not laid out; their probability is added to both tails.
    """
    table, rest = _weights(days, graded, full)
    near = round(total)
    whole = abs(total - near) <= _WHOLE
    step, part = (near, 0.0) if whole else (int(np.floor(total)), total - np.floor(total))
    m = np.arange(table.shape[1])
    below, above = table[0, m <= step].sum(), table[0, m >= (step if whole else step + 1)].sum()
    if len(table) > 1:
        densities = irwin_hall_densities(len(table), part)[1:]  # f_2.. of n + 1 for n = 1..
        up = np.cumsum(densities, axis=1)
        down = np.cumsum(densities[:, ::-1], axis=1)[:, ::-1]
        place = step - m  # X <= total with m full days: Irwin-Hall(n) <= place + part
        low = _at(up, place, before=0.0, after=1.0)
        high = _at(down, place + 1, before=1.0, after=0.0)
        below, above = below + np.sum(table[1:] * low), above + np.sum(table[1:] * high)
    tiny = float(np.finfo(np.float64).tiny)  # the largest total may be too unlikely for a float: never 0
    return min(1.0, max(tiny, float(below) + rest)), min(1.0, max(tiny, float(above) + rest))


def _at(rows: Floats, columns: npt.NDArray[np.intp], *, before: float, after: float) -> Floats:
    """Return rows[:, columns], with stated values for columns that lie before the first or after the last."""
    inside = np.clip(columns, 0, rows.shape[1] - 1)
    return np.where(columns < 0, before, np.where(columns >= rows.shape[1], after, rows[:, inside]))


@lru_cache(maxsize=64)
def upper_point(days: int, graded: float, probability: float) -> float:
    """Return the smallest x with P(X >= x) <= 1 - probability, to 1e-7, for grades without full days."""
    target = np.log(1.0 - probability)
    low, high = 0.0, float(days)
    above, below = -target, np.log(tails(high, days, graded)[1]) - target  # ln P - ln target at both ends
    while high - low > 1e-7:
        # a chord of ln P, which is nearly straight, but never so near an end that the bracket would not shrink
        share = min(max(above / (above - below), 0.02), 0.98) if above > below else 0.5
        x = low + share * (high - low)
        excess = np.log(tails(x, days, graded)[1]) - target
        if excess <= 0.0:
            high, below, above = x, excess, above / 2.0
        else:
            low, above, below = x, excess, below / 2.0
    return float(high)
