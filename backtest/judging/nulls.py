"""Random numbers behind simulated laws, and p-values from them.

Streams are spawned from (seed, purpose, level, length) and nothing else, so that all desks, models and statistics of
one level and length share them and neither order nor number of workers changes an answer.

Where no distribution is known but VaR and ES are, losses are simulated only beyond VaR: an exception with probability
1 - level, its excess GPD with a shape xi < 1 and scale (ES - VaR)(1 - xi), which reproduces VaR and ES for every xi.
"""

import zlib
from collections.abc import Iterator
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np
import numpy.typing as npt
from scipy.sparse import csr_array

Floats = npt.NDArray[np.float64]
Positions = npt.NDArray[np.signedinteger[Any]]

ASSUMED_SHAPE = 0.1
"""GPD shape of excesses where the forecast has none: a stated assumption."""
OTHER_SHAPES = (0.0, 0.3)
"""Shapes whose p-values stand beside the assumed one."""

_TIES = 1e-9
_BLOCK = 64


def generator(seed: int, purpose: str, level: float, length: int) -> np.random.Generator:
    """Return the generator of one purpose at one level (a confidence) and length (days or exceptions)."""
    words = [seed, zlib.crc32(purpose.encode()), round(level * 1e12), length]
    return np.random.default_rng(np.random.SeedSequence(words))


@dataclass(frozen=True)
class Exceedances:
    """Simulated exceptions of N paths of one length, as a list in order of path and day.

    Exceptions ``starts[i]:starts[i + 1]`` are those of path i (int[N + 1]); ``days`` int[K] says on which day each
    stands; ``exponentials`` float64[K] are standard exponential draws, from which excesses of any shape are made.
    """

    length: int
    starts: Positions
    days: Positions
    exponentials: Floats

    def sums(self, weights: Floats, by_day: Floats) -> Floats:
        """Return, for each path, the sum over its exceptions of weights float64[K] times by_day[day]: float64[N]."""
        matrix = csr_array((weights, self.days, self.starts), shape=(len(self.starts) - 1, self.length))
        return np.asarray(matrix @ by_day)


@lru_cache(maxsize=4)
def exceedances(seed: int, level: float, length: int, simulations: int) -> Exceedances:
    """Simulate exceptions with probability 1 - level on every day of ``simulations`` paths of ``length`` days."""
    rng = generator(seed, "exceedances", level, length)
    total, rate = simulations * length, 1.0 - level
    # gaps between exceptions of one long Bernoulli sequence, cut into paths: only exceptions are drawn
    batch = int(total * rate + 6.0 * np.sqrt(total * rate) + 10)
    places = np.cumsum(rng.geometric(rate, batch)) - 1
    while places[-1] < total:
        places = np.concatenate([places, places[-1] + np.cumsum(rng.geometric(rate, batch))])
    places = places[places < total]
    starts = np.searchsorted(places, np.arange(simulations + 1) * length).astype(np.int32)
    return Exceedances(length, starts, (places % length).astype(np.int32), rng.standard_exponential(len(places)))


@lru_cache(maxsize=12)
def excesses_of_shape(seed: int, level: float, length: int, simulations: int, shape: float) -> Floats:
    """Return excesses of mean one for every simulated exception, one shape for all days: float64[K]."""
    return excess_of_mean_one(exceedances(seed, level, length, simulations).exponentials, np.float64(shape))


def excess_of_mean_one(exponentials: Floats, shape: Floats | np.float64) -> Floats:
    """Turn standard exponential draws into GPD draws with shape < 1 and mean one: (1 - xi)(exp(xi e) - 1)/xi."""
    flat = np.abs(shape) < 1e-8
    safe = np.where(flat, 1.0, shape)
    return np.asarray(np.where(flat, exponentials, (1.0 - safe) / safe * np.expm1(safe * exponentials)))


@lru_cache(maxsize=4)
def _exponential_block(seed: int, level: float, length: int, simulations: int, block: int) -> Floats:
    rng = generator(seed, f"excesses of exceptions, block {block}", level, length)
    return rng.standard_exponential((_BLOCK, simulations))


@lru_cache(maxsize=12)
def _block_of_shape(seed: int, level: float, length: int, simulations: int, block: int, shape: float) -> Floats:
    return excess_of_mean_one(_exponential_block(seed, level, length, simulations, block), np.float64(shape))


def excess_blocks(
    seed: int, level: float, length: int, simulations: int, shapes: Floats
) -> Iterator[tuple[slice, Floats]]:
    """Yield, block by block, excesses of mean one for n exceptions with given shapes float64[n] in N paths.

    Each item: which exceptions, and their excesses float64[at most 64, N].
    """
    where, same = (seed, level, length, simulations), bool(np.all(shapes == shapes[0]))
    for block, start in enumerate(range(0, len(shapes), _BLOCK)):
        part = slice(start, min(start + _BLOCK, len(shapes)))
        size = part.stop - start
        if same:
            yield part, _block_of_shape(*where, block, float(shapes[0]))[:size]
        else:
            yield part, excess_of_mean_one(_exponential_block(*where, block)[:size], shapes[part, None])


def p_lower(null: Floats, observed: float) -> float:
    """Return (1 + #{null <= observed})/(N + 1); ties within a relative 1e-9 count as extreme."""
    return (1 + int(np.count_nonzero(null <= observed + _TIES * abs(observed)))) / (len(null) + 1)


def p_upper(null: Floats, observed: float) -> float:
    """Return (1 + #{null >= observed})/(N + 1); ties within a relative 1e-9 count as extreme."""
    return (1 + int(np.count_nonzero(null >= observed - _TIES * abs(observed)))) / (len(null) + 1)


def p_doubled(null: Floats, observed: float) -> float:
    """Return twice the smaller of the two one-sided p-values, capped at 1."""
    return min(1.0, 2.0 * min(p_lower(null, observed), p_upper(null, observed)))
