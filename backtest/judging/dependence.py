"""When: linear dependence of exceptions on earlier exceptions and on VaR.

Statistics are computed from the days of exceptions alone, for the sample and for many simulated paths by one function.
"""

from dataclasses import replace
from functools import lru_cache
from typing import Any, NamedTuple

import numpy as np
import numpy.typing as npt
from scipy.sparse import csr_array

from backtest.judging.answers import Answer, SampleTest, Settings
from backtest.judging.arrangements import placements
from backtest.judging.independence import of_clustering
from backtest.judging.nulls import Exceedances, exceedances, p_upper
from backtest.judging.samples import Sample

Floats = npt.NDArray[np.float64]
Positions = npt.NDArray[np.signedinteger[Any]]

LAGS = 5
"""Lags of ljung-box."""
_SINGULAR = 1e-9


class Moments(NamedTuple):
    """What does not depend on VaR, for N paths of T days and K lagged exceptions, on the rows t = K+1..T.

    ``hits`` is the N x T matrix of exceptions (sparse); ``sums`` float64[N, K + 1] the number of exceptions lagged by
    0..K, ``products`` float64[N, K + 1, K + 1] the sums of products of two such columns.
    """

    hits: csr_array
    sums: Floats
    products: Floats


def moments(paths: Exceedances, lags: int) -> Moments:
    """Return the moments of the lagged exceptions of every path."""
    count, last = len(paths.starts) - 1, paths.length - 1
    path = np.repeat(np.arange(count), np.diff(paths.starts))
    key = path * (paths.length + lags) + paths.days
    products = np.zeros((count, lags + 1, lags + 1))
    for apart in range(lags + 1):
        place = np.minimum(np.searchsorted(key, key + apart), max(len(key) - 1, 0))
        both = key[place] == key + apart
        for late in range(apart, lags + 1):  # exceptions on days t - late and t - late + apart
            used = both & (paths.days >= lags - late) & (paths.days <= last - late)
            found = np.bincount(path[used], minlength=count)
            products[:, late, late - apart] = products[:, late - apart, late] = found
    hits = csr_array((np.ones(len(key)), paths.days, paths.starts), shape=(count, paths.length))
    return Moments(hits, np.diagonal(products, axis1=1, axis2=2).copy(), products)


@lru_cache(maxsize=4)
def _simulated_moments(seed: int, level: float, length: int, simulations: int, lags: int) -> Moments:
    return moments(exceedances(seed, level, length, simulations), lags)


def dynamic_quantile(found: Moments, var: Floats, level: float) -> Floats:
    """Return the three parts of DQ = H'X (X'X)^+ X'H / (a (1 - a)) of every path: float64[N, 3].

    H = hit - a; X holds a constant, VaR (float64[T]) and the lagged exceptions. Parts, in this order: constant; VaR
    given the constant; lagged exceptions given both. DQ is their sum. Columns that depend on others add nothing
    (pseudo-inverse): a constant VaR, and lagged exceptions that are all alike.
    Source: Engle and Manganelli (2004), Journal of Business and Economic Statistics 22, 367-381.
    """
    lags, rate = found.sums.shape[1] - 1, 1.0 - level
    standard = standardised(var[lags:])
    rows = len(standard)
    by_day = np.zeros((len(var), lags + 1))
    for shift in range(lags + 1):
        by_day[lags - shift : len(var) - shift, shift] = standard
    with_var: Floats = np.asarray(found.hits @ by_day)
    rest = found.products - _squares(found.sums) / rows - _squares(with_var) / rows
    parts = (
        (found.sums[:, 0] - rate * rows) ** 2 / rows,
        with_var[:, 0] ** 2 / rows,
        _explained(rest[:, 1:, 1:], rest[:, 1:, 0]),
    )
    return np.stack(parts, axis=1) / (rate * level)


def standardised(values: Floats) -> Floats:
    """Return values less their mean, divided by their standard deviation (ddof 0); zeros where they do not vary."""
    centred = values - values.mean()
    spread = float(np.sqrt(np.mean(centred**2)))
    varies = spread > _SINGULAR * float(np.max(np.abs(values)))
    return np.asarray(centred / spread) if varies else np.zeros(len(values))


def _squares(columns: Floats) -> Floats:
    return np.asarray(columns[:, :, None] * columns[:, None, :])


def _explained(squares: Floats, products: Floats) -> Floats:
    """Return b' S^+ b of many S float64[N, K, K] and b float64[N, K], by elimination of one column after the other."""
    left, rest = squares, products
    found: Floats = np.zeros(len(squares))
    for place in range(squares.shape[1]):
        pivot, column = left[:, place, place], left[:, :, place]
        varies = pivot > _SINGULAR  # in exceptions squared: one exception on its own has about 1
        share = np.where(varies, 1.0, 0.0) / np.where(varies, pivot, 1.0)
        found += rest[:, place] ** 2 * share
        rest = rest - column * (rest[:, place] * share)[:, None]
        left = left - _squares(column) * share[:, None, None]
    return found


def observed_moments(sample: Sample, lags: int) -> Moments:
    """Return the moments of the sample's own exceptions: one path."""
    days = np.flatnonzero(sample.hits).astype(np.int32)
    starts = np.array([0, len(days)], dtype=np.int32)
    return moments(Exceedances(sample.days, starts, days, np.zeros(len(days))), lags)


def dynamic_quantile_null(sample: Sample, settings: Settings) -> Floats:
    """Simulate DQ from independent exceptions along the sample's VaR, held fixed: float64[simulations]."""
    where = (settings.seed, sample.level, sample.days, settings.simulations, settings.lagged_hits)
    return np.asarray(dynamic_quantile(_simulated_moments(*where), sample.var, sample.level).sum(axis=1))


def _dynamic_quantile(sample: Sample, settings: Settings) -> Answer:
    lags = settings.lagged_hits
    if sample.days < lags + 2:
        return Answer(missing=f"needs {lags + 2} days, has {sample.days}")
    found, size = observed_moments(sample, lags), of_clustering(sample)
    often, with_var, after = dynamic_quantile(found, sample.var, sample.level)[0]
    statistic = float(often + with_var + after)
    notes = (
        f"constant, {lags} lagged exception{'s' * (lags > 1)}, VaR; VaR path held fixed",
        f"joint test: rate part {often:.4g}, VaR part {with_var:.4g}, lag part {after:.4g}; the largest names the side",
        *_left_out(sample, found),
    )
    side = "var-low" if found.sums[0, 0] > sample.nominal * (sample.days - lags) else "var-high"
    sides = ((often, side), (with_var, "with-var"), (after, _after(found, sample.days - lags)))
    p_value = p_upper(dynamic_quantile_null(sample, settings), statistic)
    return replace(
        size, statistic=statistic, p_value=p_value, law="simulated", evidence=max(sides)[1], notes=size.notes + notes
    )


def _after(found: Moments, rows: int) -> str:
    """Say whether exceptions follow exceptions at these lags more or less often than their numbers imply."""
    together = found.products[0, 0, 1:] - found.sums[0, 0] * found.sums[0, 1:] / rows
    return "clustered" if together.sum() > 0.0 else "spread"


def _left_out(sample: Sample, found: Moments) -> tuple[str, ...]:
    lags = found.sums.shape[1] - 1
    constant = not standardised(sample.var[lags:]).any()
    alike = not np.all((found.sums[0, 1:] > 0) & (found.sums[0, 1:] < sample.days - lags))
    return ("VaR does not vary and is left out",) * constant + ("lagged exceptions all alike are left out",) * alike


def ljung_box(positions: Positions, days: int) -> tuple[Floats, Floats]:
    """Return Q(5) = T (T + 2) sum of r_k^2/(T - k), and r_1..r_5, of exceptions on given days, sample mean.

    positions: int[N, n], 1 <= n < T, ascending days from 0 of N paths. Returns float64[N] and float64[N, 5]; T > 5.
    Source: Ljung and Box (1978), Biometrika 65; for exceptions Berkowitz, Christoffersen and Pelletier (2011).
    """
    count = positions.shape[1]
    pairs = np.zeros((len(positions), LAGS))
    for shift in range(1, min(LAGS, count - 1) + 1):
        apart = positions[:, shift:] - positions[:, :-shift]
        for lag in range(shift, LAGS + 1):
            pairs[:, lag - 1] += np.count_nonzero(apart == lag, axis=1)
    mean, lags = count / days, np.arange(1, LAGS + 1)
    early = [np.count_nonzero(positions < lag, axis=1) for lag in range(1, LAGS + 1)]
    late = [np.count_nonzero(positions >= days - lag, axis=1) for lag in range(1, LAGS + 1)]
    inside = 2 * count - np.stack(early, axis=1) - np.stack(late, axis=1)
    correlations = (pairs - mean * inside + (days - lags) * mean**2) / (count * (1.0 - mean))
    return days * (days + 2) * np.sum(correlations**2 / (days - lags), axis=1), correlations


@lru_cache(maxsize=512)
def _ljung_box_law(seed: int, days: int, few: int, simulations: int) -> Floats:
    return np.concatenate([ljung_box(block, days)[0] for block in placements(seed, days, few, simulations)])


def ljung_box_null(days: int, count: int, settings: Settings) -> Floats:
    """Simulate Q(5) given the count, all arrangements equally likely: float64[simulations]; 1 <= count < days.

    Exceptions and their complement have the same correlations: the smaller of the two is placed.
    """
    return _ljung_box_law(settings.seed, days, min(count, days - count), settings.simulations)


def _ljung_box(sample: Sample, settings: Settings) -> Answer:
    days, count = sample.days, sample.exceptions
    if days <= LAGS:
        return Answer(missing=f"needs {LAGS + 1} days, has {days}")
    size = of_clustering(sample)
    if count in (0, days):
        lacking = "0 exceptions, needs 1" if count == 0 else "every day is an exception, needs a day without"
        return replace(size, statistic=0.0, missing=lacking)
    statistics, correlations = ljung_box(np.flatnonzero(sample.hits)[None, :], days)
    return replace(
        size, statistic=float(statistics[0]), p_value=p_upper(ljung_box_null(days, count, settings), statistics[0]),
        law="permutation", evidence="clustered" if correlations[0].sum() > 0.0 else "spread",
        notes=(*size.notes, f"{LAGS} lags, sample mean; law given the number of exceptions"),
    )  # fmt: skip


_ENGLE = "Engle and Manganelli (2004), Journal of Business and Economic Statistics 22, 367-381"
_BOX = "Ljung and Box (1978); Berkowitz, Christoffersen and Pelletier (2011)"

TESTS = (
    SampleTest("dynamic-quantile", "when", _ENGLE, _dynamic_quantile),
    SampleTest("ljung-box", "when", _BOX, _ljung_box),
)
