"""A forecast's whole distribution, rebuilt from what is on record, for tests that look below VaR too.

In units (L - VaR)/(ES - VaR) the law of the loss does not depend on mean and sigma. Beyond VaR it is GPD with mean one
and the forecast's shape, or an assumed one; below, it is read off the forecast's own pairs of loss and PIT, all days
together, which is exact where the standardised law stays the same and an approximation where it moves.
"""

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from backtest.judging.nulls import excess_of_mean_one
from backtest.judging.samples import Sample

Floats = npt.NDArray[np.float64]

FEWEST_PAIRS = 50
"""Days below VaR with a PIT that a distribution is rebuilt from."""


def pairs_below(sample: Sample) -> int:
    """Return how many days below VaR there are to read the distribution off."""
    return int(np.count_nonzero(_below(sample)))


def _below(sample: Sample) -> npt.NDArray[np.bool_]:
    return ~sample.hits & (sample.pit < sample.level)


@dataclass(frozen=True)
class RelativeTail:
    """Quantiles of (L - VaR)/(ES - VaR): knots below the level, float64[m] ascending; GPD shapes float64[T] beyond."""

    level: float
    shapes: Floats
    pits: Floats
    values: Floats

    def quantile(self, pit: Floats, days: npt.NDArray[np.intp] | slice) -> Floats:
        """Return the relative loss at a PIT; ``days`` picks the shape of each."""
        shapes = np.broadcast_to(self.shapes[days], pit.shape)
        relative, beyond = np.interp(pit, self.pits, self.values), pit > self.level
        exponentials = -np.log((1.0 - pit[beyond]) / (1.0 - self.level))
        relative[beyond] = excess_of_mean_one(exponentials, shapes[beyond])
        return relative

    def chance_beyond(self, relative: Floats) -> Floats:
        """Return, for each day, the chance of a relative loss above float64[T]."""
        excess = np.maximum(relative, 0.0)
        flat = np.abs(self.shapes) < 1e-8
        safe = np.where(flat, 1.0, self.shapes)
        inside = np.maximum(1.0 + safe * excess / np.where(flat, 1.0, 1.0 - safe), 0.0)
        with np.errstate(divide="ignore"):
            logs = np.where(flat, -excess, -np.log(inside) / safe)
        below = 1.0 - np.interp(relative, self.values, self.pits, left=0.0)
        return np.where(relative > 0.0, (1.0 - self.level) * np.exp(logs), below)


def relative_tail(sample: Sample, shapes: Floats | float) -> RelativeTail:
    """Rebuild the distribution; every day needs PIT and ES > VaR, and FEWEST_PAIRS days must lie below VaR.

    Where the pairs are not in order, values are sorted (rearrangement: Chernozhukov, Fernandez-Val and Galichon 2010).
    """
    below = sample.on(_below(sample))
    pits = np.append(np.sort(below.pit), sample.level)
    values = np.append(np.sort((below.losses - below.var) / (below.es - below.var)), 0.0)
    return RelativeTail(sample.level, np.broadcast_to(shapes, sample.var.shape), pits, values)
