"""When: the days between exceptions.

A correct model has no memory: durations are geometric. Complete durations run from one exception to the next; the days
before the first exception and after the last are censored.
"""

from dataclasses import replace
from functools import lru_cache
from typing import Any, NamedTuple

import numpy as np
import numpy.typing as npt

from backtest.judging.answers import Answer, SampleTest, Settings
from backtest.judging.arrangements import placements
from backtest.judging.independence import of_clustering
from backtest.judging.nulls import exceedances, p_upper
from backtest.judging.samples import Sample

Floats = npt.NDArray[np.float64]
Positions = npt.NDArray[np.signedinteger[Any]]

ORDER = 3
"""Moment conditions of duration-gmm."""
SHAPE_RANGE = (0.02, 20.0)
"""Where the Weibull shape b is sought; where the likelihood rises without end, b stands at an end of it."""
FEWEST = 2
_STEPS = 200
_CLOSE = 1e-9


class Weibull(NamedTuple):
    """The fit of N paths, each float64[N]: shape b, rate, and twice the gain of log likelihood over two nulls.

    ``independence``: over b = 1; ``coverage``: over b = 1 and rate = 1 - level.
    """

    shape: Floats
    rate: Floats
    independence: Floats
    coverage: Floats


def weibull(positions: Positions, days: int, level: float) -> Weibull:
    """Fit a Weibull law to durations by maximum likelihood, censored first and last durations included.

    positions: int[N, n], n >= 2, ascending days from 0 of the exceptions of N paths. An exception on the first day
    opens no duration before it, one on the last day none after it. Density r^b b D^(b-1) exp(-(r D)^b).
    Source: Christoffersen and Pelletier (2004), Journal of Financial Econometrics 2, 84-108.
    """
    first, last = positions[:, :1] + 1, days - 1 - positions[:, -1:]
    spells = np.concatenate([np.diff(positions, axis=1), first, last], axis=1).astype(np.float64)
    counts = np.ones(spells.shape)
    counts[:, -2], counts[:, -1] = first[:, 0] > 1, last[:, 0] > 0
    longest = spells.max(axis=1, keepdims=True)
    logs = np.log(np.maximum(spells, 1.0) / longest)
    complete = positions.shape[1] - 1
    shape, powers = _weibull_shape(logs, counts, complete)
    mean_log = logs[:, :complete].sum(axis=1) / complete
    plain = np.sum(counts * np.exp(logs), axis=1)
    gain = np.log(plain / powers) + np.log(shape) + (shape - 1.0) * mean_log
    rate = (complete / powers) ** (1.0 / shape) / longest[:, 0]
    mean, nominal = plain * longest[:, 0] / complete, 1.0 - level
    over_rate = nominal * mean - 1.0 - np.log(nominal * mean)
    independence = np.maximum(2.0 * complete * gain, 0.0)
    return Weibull(shape, rate, independence, independence + 2.0 * complete * over_rate)


def _weibull_shape(logs: Floats, counts: Floats, complete: int) -> tuple[Floats, Floats]:
    """Return b within SHAPE_RANGE and the sum of D^b: Newton steps on the falling score, halving where one leaves.

    The profile score 1/b + mean log of complete durations - weighted mean log of all, weights D^b, falls in b.
    """
    low, high = np.zeros(len(logs)), np.full(len(logs), np.inf)
    shape, wanted = np.ones(len(logs)), logs[:, :complete].sum(axis=1) / complete
    for _ in range(_STEPS):
        weights = counts * np.exp(shape[:, None] * logs)
        powers = weights.sum(axis=1)
        weighted = weights * logs
        mean = weighted.sum(axis=1) / powers
        score = 1.0 / shape + wanted - mean
        spread = np.einsum("ij,ij->i", weighted, logs) / powers - mean**2
        low, high = np.where(score > 0.0, shape, low), np.where(score > 0.0, high, shape)
        step = shape + score / (1.0 / shape**2 + np.maximum(spread, 0.0))
        step = np.clip(step, *SHAPE_RANGE)
        close = np.abs(step - shape) <= _CLOSE * shape
        if close.all():
            break
        middle = np.clip(np.sqrt(low * np.minimum(high, 1e9)), *SHAPE_RANGE)
        shape = np.where(close | ((step > low) & (step < high)), step, middle)
    return shape, powers


@lru_cache(maxsize=512)
def _weibull_law(seed: int, days: int, count: int, simulations: int) -> Floats:
    blocks = placements(seed, days, count, simulations)
    return np.concatenate([weibull(block, days, 0.99).independence for block in blocks])  # b = 1 has no level in it


def weibull_null(days: int, count: int, settings: Settings) -> Floats:
    """Simulate LR of b = 1 given the count, all arrangements alike: float64[simulations]; 2 <= count < days."""
    return _weibull_law(settings.seed, days, count, settings.simulations)


def _duration_weibull(sample: Sample, settings: Settings) -> Answer:
    days, count = sample.days, sample.exceptions
    if count < FEWEST:
        return Answer(missing=f"{count} exceptions, needs {FEWEST}")
    size, fit = of_clustering(sample), weibull(np.flatnonzero(sample.hits)[None, :], days, sample.level)
    statistic, shape = float(fit.independence[0]), float(fit.shape[0])
    if count == days:
        return replace(size, missing="every day is an exception, needs a day without")
    ends = f"b stands at an end of its range {SHAPE_RANGE[0]:g} to {SHAPE_RANGE[1]:g}"
    at_end = min(shape / SHAPE_RANGE[0], SHAPE_RANGE[1] / shape) < 1.0 + 1e-6
    notes = (
        f"independence only: shape b = {shape:.3g} against 1, below 1 is clustering; law given the count",
        *((ends,) * at_end),
    )
    return replace(
        size, statistic=statistic, p_value=p_upper(weibull_null(days, count, settings), statistic), law="permutation",
        evidence="clustered" if shape < 1.0 else "spread", notes=size.notes + notes,
    )  # fmt: skip


def orthonormal(durations: npt.ArrayLike, rate: float, order: int) -> Floats:
    """Return M_1..M_order at durations (any shape): float64[order, ...], orthonormal under the geometric law.

    Source: Candelon, Colletaz, Hurlin and Tokpavi (2011), Journal of Financial Econometrics 9, 314-343.
    """
    d = np.asarray(durations, dtype=np.float64)
    before, now = np.zeros(d.shape), np.ones(d.shape)
    found, root = [], np.sqrt(1.0 - rate)
    for j in range(order):
        slope = ((1.0 - rate) * (2 * j + 1) + rate * (j - d + 1)) / ((j + 1) * root)
        before, now = now, slope * now - j / (j + 1) * before
        found.append(now)
    return np.stack(found)


def moment_conditions(gaps: Positions, path: Positions, paths: int, rate: float, order: int) -> Floats:
    """Return N^(-1/2) sum of M_j over the N complete durations of each path: float64[order, paths].

    gaps: int[K] complete durations of all paths, ``path`` int[K] the path of each; J(order) is the sum of squares over
    the first axis. A path without a complete duration has zeros.
    """
    counts = np.maximum(np.bincount(path, minlength=paths), 1)
    values = orthonormal(np.arange(int(gaps.max(initial=1)) + 1), rate, order)
    sums = [np.bincount(path, weights=row[gaps], minlength=paths) for row in values]
    return np.asarray(np.stack(sums) / np.sqrt(counts))


@lru_cache(maxsize=16)
def _gmm_law(seed: int, level: float, days: int, simulations: int) -> Floats:
    drawn = exceedances(seed, level, days, simulations)
    path = np.repeat(np.arange(simulations), np.diff(drawn.starts))
    same = path[1:] == path[:-1]
    found = moment_conditions(np.diff(drawn.days)[same], path[1:][same], simulations, 1.0 - level, ORDER)
    return np.asarray((found**2).sum(axis=0))


def gmm_null(level: float, days: int, settings: Settings) -> Floats:
    """Simulate J(3) from independent exceptions at rate 1 - level, 0 below two exceptions: float64[simulations]."""
    return _gmm_law(settings.seed, level, days, settings.simulations)


def _duration_gmm(sample: Sample, settings: Settings) -> Answer:
    count = sample.exceptions
    if count < FEWEST:
        return Answer(missing=f"{count} exceptions, needs {FEWEST}")
    gaps, size = np.diff(np.flatnonzero(sample.hits)), of_clustering(sample)
    conditions = moment_conditions(gaps, np.zeros_like(gaps), 1, sample.nominal, ORDER)[:, 0]
    statistic = float(np.sum(conditions**2))
    parts = ", ".join(f"{value**2:.4g}" for value in conditions)
    notes = (
        f"J({ORDER}) on {len(gaps)} complete durations; first and last left out",
        f"joint test: rate part, then clustering parts {parts}; the largest names the side",
    )
    return replace(
        size, statistic=statistic, p_value=p_upper(gmm_null(sample.level, sample.days, settings), statistic),
        law="simulated", evidence=_gmm_side(conditions), notes=size.notes + notes,
    )  # fmt: skip


def _gmm_side(conditions: Floats) -> str:
    """Name the side of the largest condition: M_1 falls in the mean of durations, M_2 rises with their dispersion."""
    if np.argmax(conditions**2) == 0:
        return "var-low" if conditions[0] > 0.0 else "var-high"
    return "clustered" if conditions[1] > 0.0 else "spread"


_PELLETIER = "Christoffersen and Pelletier (2004), Journal of Financial Econometrics 2, 84-108"
_CANDELON = "Candelon, Colletaz, Hurlin and Tokpavi (2011), Journal of Financial Econometrics 9, 314-343"

TESTS = (
    SampleTest("duration-weibull", "when", _PELLETIER, _duration_weibull),
    SampleTest("duration-gmm", "when", _CANDELON, _duration_gmm),
)
