"""What shape: the counts in four cells of the tail, against equal shares of it."""

from functools import lru_cache

import numpy as np
import numpy.typing as npt

from backtest.judging.answers import Answer, SampleTest, Settings
from backtest.judging.nulls import p_upper
from backtest.judging.pits import Pits, read_pits, simulated_tails
from backtest.judging.samples import Sample

Floats = npt.NDArray[np.float64]

CELLS = 4


def nass(days: int, level: float, cells: int = CELLS) -> tuple[float, float]:
    """Return (c, nu) of Nass's correction: c S is close to chi-square with nu degrees of freedom.

    S is Pearson's statistic of the cell below the level and ``cells`` equal ones above it; c and nu match its exact
    mean N and variance V = 2N - (N^2 + 4N + 1)/T + (sum of 1/p)/T: c = 2N/V, nu = cN.
    Source: Nass (1959), as used by Kratz, Lok and McNeil (2018), Journal of Banking and Finance 88, 393-407.
    """
    inverse = 1.0 / level + cells**2 / (1.0 - level)
    variance = 2.0 * cells - (cells**2 + 4.0 * cells + 1.0) / days + inverse / days
    c = 2.0 * cells / variance
    return c, c * cells


def pearson(counts: npt.ArrayLike, days: int, level: float) -> Floats:
    """Return Pearson's S from counts in the equal cells above the level, [..., cells]; the cell below has the rest."""
    found = np.asarray(counts, dtype=np.float64)
    share = days * (1.0 - level) / found.shape[-1]
    below = days - found.sum(axis=-1) - days * level
    return np.asarray(below**2 / (days * level) + np.sum((found - share) ** 2, axis=-1) / share)


def cell_counts(depths: Floats, cells: int = CELLS) -> npt.NDArray[np.intp]:
    """Return how many depths in (0, 1] lie in each of ``cells`` equal cells: int[cells]."""
    return np.bincount(_cells(depths, cells), minlength=cells)


def _cells(depths: Floats, cells: int) -> npt.NDArray[np.intp]:
    return np.minimum((depths * cells).astype(np.intp), cells - 1)


@lru_cache(maxsize=32)
def nass_null(seed: int, level: float, length: int, simulations: int, cells: int = CELLS) -> Floats:
    """Simulate c S of independent uniform PITs: float64[simulations]."""
    tails = simulated_tails(seed, level, length, simulations)
    counts = np.bincount(tails.paths * cells + _cells(tails.depths, cells), minlength=simulations * cells)
    return nass(length, level, cells)[0] * pearson(counts.reshape(simulations, cells), length, level)


def _multinomial(sample: Sample, settings: Settings) -> Answer:
    pits = read_pits(sample)
    if pits.missing:
        return Answer(missing=pits.missing)
    used = pits.used
    counts = cell_counts(pits.depths)
    statistic = float(nass(used.days, used.level)[0] * pearson(counts, used.days, used.level))
    null = nass_null(settings.seed, used.level, used.days, settings.simulations)
    share = used.days * used.nominal / CELLS
    deeper = float(np.arange(1, CELLS + 1) @ (counts - share))
    notes = (
        f"counts in {CELLS} equal cells of the tail, from the level up: {', '.join(map(str, counts))}; "
        f"{share:.3g} expected in each",
        "no size: cells have no single one; the counts say where",
        *_resolution(pits),
        *pits.notes,
    )
    return Answer(
        used=used, statistic=statistic, p_value=p_upper(null, statistic), law="simulated",
        evidence="tail-thin" if deeper > 0.0 else "tail-heavy", notes=notes,
    )  # fmt: skip


def _resolution(pits: Pits) -> tuple[str, ...]:
    """Say where a PIT by rank cannot resolve the levels: the cells do not hold equal numbers of its steps."""
    if pits.steps is None:
        return ()
    ranks = (np.arange(pits.steps) + 0.5) / pits.steps
    above = ranks[ranks > pits.used.level + 1e-12]
    held = cell_counts((above - pits.used.level) / pits.used.nominal)
    meant = pits.steps * pits.used.nominal / CELLS
    if np.all(np.abs(held - meant) <= 0.05 * meant):
        return ()
    words = f"cells hold {', '.join(map(str, held))} steps of this rank PIT where {meant:.3g} are meant"
    return (f"ranks cannot resolve these levels: {words}, so that a rejection may come from the steps alone",)


TESTS = (
    SampleTest(
        "multinomial-nass", "what shape", "Kratz, Lok and McNeil (2018), Nass statistic, N = 4; simulated law",
        _multinomial,
    ),
)  # fmt: skip
