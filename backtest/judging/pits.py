"""What tests of the PIT share: the days that have one, the part above the level, and its simulated counterpart.

The PIT is that of the loss: a large loss stands near 1. Above the level, ``depth`` = (PIT - level)/(1 - level) says
which fraction of the forecast's tail the loss went through, and ``score`` is the normal quantile of the PIT. If the
forecast is right, PITs are independent and uniform, whatever the model: every law here depends on level and length
only, and is simulated once for both.
"""

from dataclasses import dataclass, replace
from functools import lru_cache
from typing import NamedTuple

import numpy as np
import numpy.typing as npt
from scipy.special import ndtri

from backtest.judging.coverage import NO_DAYS
from backtest.judging.nulls import Exceedances, exceedances
from backtest.judging.samples import Mask, Sample

Floats = npt.NDArray[np.float64]

NEAREST = 1e-12
"""PITs are kept this far from 0 and 1, so that their normal scores are finite."""
_ROUNDING = 1e-12
_MOST_STEPS = 6000
_LOOKED_AT = 25


@dataclass(frozen=True)
class Pits:
    """The days of a sample that have a PIT, clipped; ``steps`` n + 1 where it is a rank among n values, else None.

    ``missing`` says why there is nothing to test; ``notes`` what was left out or clipped.
    """

    used: Sample
    missing: str
    notes: tuple[str, ...]
    steps: int | None = None

    @property
    def values(self) -> Floats:
        """PITs float64[T]."""
        return self.used.pit

    @property
    def beyond(self) -> Mask:
        """Days whose PIT is above the level, bool[T]."""
        return self.used.pit > self.used.level + _ROUNDING

    @property
    def depths(self) -> Floats:
        """Depths of the PITs above the level, in (0, 1]: float64[n]."""
        return np.minimum((self.values[self.beyond] - self.used.level) / self.used.nominal, 1.0)

    @property
    def scores(self) -> Floats:
        """Normal scores of the PITs above the level: float64[n]."""
        return np.asarray(ndtri(self.values[self.beyond]))


def read_pits(sample: Sample) -> Pits:
    """Return the days with a PIT, what is missing where there are none, and the notes that belong beside a result."""
    if sample.days == 0:
        return Pits(sample, NO_DAYS.missing, ())
    used = sample.on(~np.isnan(sample.pit))
    if used.days == 0:
        return Pits(sample, "needs pit", ())
    inside, clipped = kept_inside(used.pit)
    steps = rank_steps(used.pit, tail_is_law=bool(np.any(~np.isnan(used.shape))))
    found = Pits(replace(used, pit=inside), "", (), steps)
    return replace(found, notes=tuple(_notes(sample, found, clipped)))


def kept_inside(pits: Floats) -> tuple[Floats, int]:
    """Return PITs moved off 0 and 1, and how many were moved."""
    inside = np.clip(pits, NEAREST, 1.0 - NEAREST)
    return inside, int(np.count_nonzero(inside != pits))


def _notes(sample: Sample, found: Pits, clipped: int) -> list[str]:
    notes, used = [], found.used
    if used.days < sample.days:
        notes.append(f"days without a PIT, left out: {sample.days - used.days}")
    if clipped:
        notes.append(f"days with a PIT of 0 or 1, moved inside by {NEAREST:g}: {clipped}")
    apart = int(np.count_nonzero(found.beyond != used.hits))
    if apart:
        notes.append(f"days on which a PIT above the level and an exception do not agree: {apart}")
    if found.steps is not None:
        notes.append(f"PIT is a rank, in steps of 1/{found.steps}: its law is only nearly the one used here")
    return notes


def rank_steps(pits: Floats, *, tail_is_law: bool) -> int | None:
    """Return n + 1 where every PIT looked at is (k + 0.5)/(n + 1) for one n < 6000, else None.

    pits: float64[T]. Only the largest 25 are looked at, since the tail is what is tested. Fewer than 3 different
    values give no answer; nor does a model with a fitted tail (``tail_is_law``), whose ranks lie below the threshold.
    A forecast whose n changes from day to day is not recognised.
    """
    looked = np.unique(pits)[-_LOOKED_AT:]
    if tail_is_law or len(looked) < 3:
        return None
    steps = np.arange(3, _MOST_STEPS + 1)
    ranks = looked[:, None] * steps - 0.5
    fits = np.all(np.abs(ranks - np.round(ranks)) < 1e-7, axis=0)
    return int(steps[fits][0]) if np.any(fits) else None


class SimulatedTails(NamedTuple):
    """PITs above the level of N simulated right forecasts: where they stand, their depths and scores float64[K]."""

    drawn: Exceedances
    depths: Floats
    scores: Floats

    @property
    def paths(self) -> npt.NDArray[np.intp]:
        """Which path each belongs to: int[K], ascending."""
        return np.repeat(np.arange(len(self.drawn.starts) - 1), np.diff(self.drawn.starts))

    @property
    def counts(self) -> Floats:
        """Number above the level in each path: float64[N]."""
        return np.diff(self.drawn.starts).astype(np.float64)

    def sums(self, weights: Floats) -> Floats:
        """Return the sum of weights float64[K] in each path: float64[N]."""
        return np.asarray(np.bincount(self.paths, weights, len(self.drawn.starts) - 1), dtype=np.float64)


@lru_cache(maxsize=4)
def simulated_tails(seed: int, level: float, length: int, simulations: int) -> SimulatedTails:
    """Simulate the PITs above the level of forecasts that are right, from the exceptions that tests of ES use too."""
    drawn = exceedances(seed, level, length, simulations)
    above = np.exp(-drawn.exponentials)
    return SimulatedTails(drawn, 1.0 - above, -ndtri((1.0 - level) * above))
