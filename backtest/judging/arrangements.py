"""Random arrangements of a number of exceptions: the law of statistics of independence given the count."""

from collections.abc import Iterator
from typing import Any

import numpy as np
import numpy.typing as npt

from backtest.judging.nulls import generator

Positions = npt.NDArray[np.signedinteger[Any]]

_AT_ONCE = 500_000


def placements(seed: int, days: int, count: int, simulations: int) -> Iterator[Positions]:
    """Yield, block by block, arrangements of ``count`` exceptions in ``days`` days, all equally likely.

    Each block is int[paths, count], 1 <= count < days: the days of the exceptions from 0, ascending in each path. All
    blocks together have ``simulations`` paths.
    """
    rng = generator(seed, f"placements of {count}", 0.0, days)
    few = min(count, days - count)
    step = max(1, _AT_ONCE // (count if few == count else days))
    for start in range(0, simulations, step):
        drawn = _distinct(rng, days, few, min(step, simulations - start))
        yield drawn if few == count else _others(drawn, days)


def _distinct(rng: np.random.Generator, days: int, count: int, paths: int) -> Positions:
    """Draw sets of distinct days: a day drawn again is drawn anew until all differ, so no set is preferred."""
    drawn = np.sort(rng.integers(days, size=(paths, count), dtype=np.int32), axis=1)
    while (again := drawn[:, 1:] == drawn[:, :-1]).any():
        rows = again.any(axis=1)
        part, twice = drawn[rows], again[rows]
        part[:, 1:][twice] = rng.integers(days, size=int(twice.sum()), dtype=np.int32)
        drawn[rows] = np.sort(part, axis=1)
    return drawn


def _others(drawn: Positions, days: int) -> Positions:
    left = np.ones((len(drawn), days), dtype=bool)
    np.put_along_axis(left, drawn, False, axis=1)
    return np.nonzero(left)[1].reshape(len(drawn), -1)
