"""Where random numbers of forecasts come from: (seed, purpose, date), so that desks and models share them.

Neither the order of desks nor the number of workers nor a day more or less in the data changes a draw.
"""

import zlib

import numpy as np


def generator(seed: int, purpose: str, day: np.datetime64) -> np.random.Generator:
    """Return the generator of one purpose and target day (datetime64[D])."""
    words = [seed, zlib.crc32(purpose.encode()), int(day.astype("datetime64[D]").astype(np.int64)) + 2**31]
    return np.random.default_rng(np.random.SeedSequence(words))


def key(seed: int, purpose: str, day: np.datetime64) -> np.uint64:
    """Return the key that compiled code draws from, of one purpose and target day."""
    return np.uint64(generator(seed, purpose, day).integers(0, 2**64, dtype=np.uint64))
