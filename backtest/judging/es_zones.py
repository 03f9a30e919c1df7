"""Graded exceptions: how far into the forecast's tail losses went, in all and one day after another.

The grade of a day is its depth: 0 without a PIT above the level, else (PIT - level)/(1 - level), uniform if the
forecast is right. Their sum is the ES counterpart of the number of exceptions: T (1 - level)/2 is expected.
"""

from dataclasses import replace
from functools import lru_cache

import numpy as np
import numpy.typing as npt

from backtest.judging.answers import Answer, SampleTest, Settings
from backtest.judging.es_samples import of_size
from backtest.judging.graded import tails, upper_point
from backtest.judging.independence import clustering, transitions
from backtest.judging.nulls import p_upper
from backtest.judging.phrases import p_text
from backtest.judging.pits import Pits, SimulatedTails, read_pits, simulated_tails
from backtest.judging.samples import Sample

Floats = npt.NDArray[np.float64]

YELLOW, RED = 0.95, 0.9999
"""Cumulative probabilities from which a sum is yellow and red: the rule of the Basel count applied to this sum."""
LAGS = 5


def zone(total: float, days: int, rate: float) -> str:
    """Return "green", "yellow" or "red": where P(sum >= total) is above 5%, at most 5%, at most 0.01%."""
    upper = tails(total, days, rate)[1]
    return "green" if upper > 1.0 - YELLOW else "yellow" if upper > 1.0 - RED else "red"


def _es_zones(sample: Sample, settings: Settings) -> Answer:
    pits = read_pits(sample)
    if pits.missing:
        return Answer(missing=pits.missing)
    used = pits.used
    total, days, rate = float(pits.depths.sum()), used.days, used.nominal
    lower, upper = tails(total, days, rate)
    marks = (upper_point(days, rate, probability) for probability in (YELLOW, RED))
    size = _of_es(used, settings)
    notes = (
        f"sum of depths {total:.4g} in {days} days, {days * rate / 2:.4g} expected",
        f"zone {zone(total, days, rate)}: " + "yellow from {:.4g}, red from {:.4g}".format(*marks)
        + " (cumulative 95% and 99.99%; informational, not a rule)",
        f"p is twice the smaller tail; one-sided p for too low {p_text(upper)}",
        "joint test of VaR and ES",
        *size.notes,
        *pits.notes,
    )  # fmt: skip
    side = "risk-low" if upper <= lower else "risk-high"
    p_value = min(1.0, 2.0 * min(lower, upper))
    return replace(size, used=used, statistic=total, p_value=p_value, law="exact", evidence=side, notes=notes)


def _of_es(used: Sample, settings: Settings) -> Answer:
    if np.all(np.isnan(used.es)):
        return Answer(notes=("no size: ES itself is not known",))
    return of_size(used, settings)


def clustered_depths(grades: Floats, rate: float) -> tuple[float, float]:
    """Return C(5) = T sum of squared autocorrelations of grades float64[T], T > 5, and the sum of these (its side).

    The mean is the known a/2; autocovariances g_j = sum of products / (T - j). Source: Du and Escanciano (2017),
    Management Science 63, 940-958 (form from memory).
    """
    days, centred = len(grades), grades - rate / 2.0
    lagged = [centred[j:] @ centred[: days - j] / (days - j) for j in range(1, LAGS + 1)]
    ratios = np.array(lagged) / (centred @ centred / days)
    return float(days * np.sum(ratios**2)), float(ratios.sum())


@lru_cache(maxsize=32)
def clustered_depths_null(seed: int, level: float, length: int, simulations: int) -> Floats:
    """Simulate C(5) of independent uniform PITs: float64[simulations]; 0 where no PIT is above the level."""
    tails, mean = simulated_tails(seed, level, length, simulations), (1.0 - level) / 2.0
    days, depths, sums = tails.drawn.days, tails.depths, tails.sums(tails.depths)
    variance = (tails.sums(depths**2) - 2.0 * mean * sums) / length + mean**2
    total = np.zeros(simulations)
    for lag, products in enumerate(_products(tails), start=1):
        ends = tails.sums(depths * ((days < lag) * 1.0 + (days >= length - lag)))
        covariance = (products - mean * (2.0 * sums - ends)) / (length - lag) + mean**2
        total += (covariance / variance) ** 2
    return np.where(tails.counts > 0, length * total, 0.0)


def _products(tails: SimulatedTails) -> list[Floats]:
    """Return, for each lag, the sum of products of depths that far apart in one path: float64[N] each."""
    days, depths, paths, simulations = tails.drawn.days, tails.depths, tails.paths, len(tails.counts)
    found = [np.zeros(simulations) for _ in range(LAGS)]
    for neighbour in range(1, LAGS + 1):  # days up to 5 apart are at most 5 places apart in the list
        gap = days[neighbour:] - days[:-neighbour]
        close = np.flatnonzero((paths[neighbour:] == paths[:-neighbour]) & (gap <= LAGS))
        products = depths[close] * depths[close + neighbour]
        for lag in range(neighbour, LAGS + 1):
            of_lag = gap[close] == lag
            found[lag - 1] += np.bincount(paths[close[of_lag]], products[of_lag], simulations)
    return found


def _conditional(sample: Sample, settings: Settings) -> Answer:
    pits = read_pits(sample)
    if pits.missing:
        return Answer(missing=pits.missing)
    used = pits.used
    if used.days <= LAGS:
        return Answer(used=used, missing=f"needs {LAGS + 1} days with a PIT, has {used.days}", notes=pits.notes)
    grades = np.zeros(used.days)
    grades[pits.beyond] = pits.depths
    statistic, side = clustered_depths(grades, used.nominal)
    size, known = clustering(*transitions(used.hits)), "autocorrelation of depths at lags 1 to 5 about the known mean"
    answer = Answer(
        used=used, evidence="clustered" if side > 0 else "spread",
        notes=(known, "size: pi11 - pi01 in percentage points" if size else "pi11 - pi01 not defined", *pits.notes),
    )  # fmt: skip
    if size:
        closer = "more" if size[0] > 0 else "less"
        direction = f"an exception is {closer} likely after an exception"
        answer = replace(answer, estimate=size[0], low=size[1], high=size[2], direction=direction)
    if not pits.beyond.any():
        return replace(answer, statistic=0.0, missing=_none_above(pits))
    null = clustered_depths_null(settings.seed, used.level, used.days, settings.simulations)
    return replace(answer, statistic=statistic, p_value=p_upper(null, statistic), law="simulated")


def _none_above(pits: Pits) -> str:
    return "0 PITs above the level, needs 1" if pits.used.exceptions else "0 exceptions, needs 1"


_UNCONDITIONAL = "Du and Escanciano (2017) = Costanzino and Curran (2015); exact law"

TESTS = (
    SampleTest("es-zones", "how deep", _UNCONDITIONAL, _es_zones),
    SampleTest("du-escanciano-conditional", "when", "Du and Escanciano (2017), conditional test", _conditional),
)
