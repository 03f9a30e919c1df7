"""When: tests of exceptions that follow exceptions.

Consecutive means neighbouring days of the sample; a day without P&L or VaR leaves its neighbours adjacent.
"""

from dataclasses import replace
from functools import lru_cache

import numpy as np
import numpy.typing as npt
from scipy.special import ndtri, xlogy

from backtest.judging.answers import Answer, SampleTest, Settings
from backtest.judging.counts import log_choose, pmf
from backtest.judging.coverage import NO_DAYS, likelihood_ratio
from backtest.judging.samples import Sample

Floats = npt.NDArray[np.float64]
Law = tuple[Floats, Floats]
"""Values of a statistic in ascending order, and the probability of each value or a larger one."""

_TIES = 1e-9
_NEGLIGIBLE = 1e-18


def transitions(hits: npt.NDArray[np.bool_]) -> tuple[int, int, int, int]:
    """Return the counts (n00, n01, n10, n11) of transitions between consecutive days, from hits bool[T]."""
    before, after = hits[:-1], hits[1:]
    n11, n10 = int(np.sum(before & after)), int(np.sum(before & ~after))
    n01 = int(np.sum(~before & after))
    return len(before) - n01 - n10 - n11, n01, n10, n11


def independence_ratio(n00: npt.ArrayLike, n01: npt.ArrayLike, n10: npt.ArrayLike, n11: npt.ArrayLike) -> Floats:
    """Return LR_ind = 2 [ln L(pi01, pi11) - ln L(pi)] from transition counts, elementwise; an empty row adds nothing.

    Source: Christoffersen (1998); equations 12 to 15 of his "Backtesting", Encyclopedia of Quantitative Finance.
    """
    a, b, c, d = (np.asarray(n, dtype=np.float64) for n in (n00, n01, n10, n11))
    apart = _log_likelihood(a, b) + _log_likelihood(c, d)
    return np.asarray(np.maximum(2.0 * (apart - _log_likelihood(a + c, b + d)), 0.0))


def _log_likelihood(misses: Floats, hits: Floats) -> Floats:
    total = np.maximum(misses + hits, 1.0)
    return np.asarray(xlogy(misses, misses / total) + xlogy(hits, hits / total))


def _arrangements(days: int, count: int) -> tuple[Floats, Floats]:
    """LR_ind and ln(number of sequences) for every (runs, first, last) of ``count`` ones in ``days`` places.

    Counted in closed form: C(n1 - 1, r - 1) C(n0 - 1, g - 1) sequences have r runs of ones and g = r + 1 - f - l of
    zeros, where f and l say whether the first and last day are ones.
    """
    zeros = days - count
    if count == 0 or zeros == 0:
        return np.zeros(1), np.zeros(1)
    r, f, last = np.meshgrid(np.arange(1, count + 1), (0, 1), (0, 1), indexing="ij")
    g = r + 1 - f - last
    fits = (g >= 1) & (g <= zeros)
    r, f, last, g = r[fits], f[fits], last[fits], g[fits]
    n01, n10, n11 = r - f, r - last, count - r
    ways = log_choose(count - 1, r - 1) + log_choose(zeros - 1, g - 1)
    return independence_ratio(days - 1 - n01 - n10 - n11, n01, n10, n11), ways


@lru_cache(maxsize=512)
def independence_law(days: int, count: int) -> Law:
    """Return the exact law of LR_ind given the count: all arrangements of the exceptions are equally likely."""
    ratios, ways = _arrangements(days, count)
    return _sorted_law(ratios, np.exp(ways - log_choose(days, count)))


@lru_cache(maxsize=64)
def coverage_law(days: int, rate: float) -> Law:
    """Return the exact law of LR_uc + LR_ind for independent exceptions with probability ``rate``.

    Counts with probability below 1e-18 are not laid out; their probability (below 1e-14) is added to every p.
    """
    weights = pmf(days, rate)
    counts = np.flatnonzero(weights > _NEGLIGIBLE)
    uncond = likelihood_ratio(counts, days, rate)
    parts = [_arrangements(days, int(n)) for n in counts]
    ratios = [u + ratio for u, (ratio, _) in zip(uncond, parts, strict=True)]
    chances = [weights[n] * np.exp(ways - log_choose(days, n)) for n, (_, ways) in zip(counts, parts, strict=True)]
    rest = float(weights[weights <= _NEGLIGIBLE].sum())
    return _sorted_law(np.concatenate([*ratios, [np.inf]]), np.concatenate([*chances, [rest]]))


def _sorted_law(ratios: Floats, chances: Floats) -> Law:
    order = np.argsort(ratios)
    return ratios[order], np.cumsum(chances[order][::-1])[::-1]


def tail(law: Law, observed: float) -> float:
    """Return the probability of a value at least as large as observed; ties within a relative 1e-9 are included."""
    values, tails = law
    place = int(np.searchsorted(values, observed * (1.0 - _TIES) - 1e-12))
    return float(min(1.0, tails[place])) if place < len(tails) else 0.0


def clustering(n00: int, n01: int, n10: int, n11: int) -> tuple[float, float, float] | None:
    """Return pi11 - pi01 in percentage points with its 95% interval; None where a row of transitions is empty.

    Interval: hybrid of the two Wilson score intervals (Newcombe, 1998, Statistics in Medicine 17, method 10; from
    memory).
    """
    if n10 + n11 == 0 or n00 + n01 == 0:
        return None
    p1, l1, u1 = _wilson(n11, n10 + n11)
    p0, l0, u0 = _wilson(n01, n00 + n01)
    down, up = np.hypot(p1 - l1, u0 - p0), np.hypot(u1 - p1, p0 - l0)
    return 100.0 * (p1 - p0), 100.0 * (p1 - p0 - float(down)), 100.0 * (p1 - p0 + float(up))


def _wilson(hits: int, total: int) -> tuple[float, float, float]:
    z2, share = float(ndtri(0.975)) ** 2, hits / total
    middle = (share + z2 / (2 * total)) / (1 + z2 / total)
    half = np.sqrt(z2) / (1 + z2 / total) * np.sqrt(share * (1 - share) / total + z2 / (4 * total**2))
    return share, max(0.0, float(middle - half)), min(1.0, float(middle + half))


def of_clustering(sample: Sample) -> Answer:
    """Return the effect size tests of "when" share: pi11 - pi01 in percentage points, its interval and side."""
    size = clustering(*transitions(sample.hits)) if sample.days else None
    if size is None:
        return Answer(evidence="clustered", notes=("pi11 - pi01 not defined: no day after an exception, or only such",))
    closer = size[0] > 0
    direction = f"an exception is {'more' if closer else 'less'} likely after an exception"
    return Answer(
        estimate=size[0], low=size[1], high=size[2], direction=direction, evidence="clustered" if closer else "spread",
        notes=("size: pi11 - pi01 in percentage points",),
    )  # fmt: skip


def _independence(sample: Sample, _: Settings) -> Answer:
    days, count = sample.days, sample.exceptions
    size, missing = of_clustering(sample), _lacking(days, count)
    if days < 2:
        return Answer(missing=missing)
    statistic = float(independence_ratio(*transitions(sample.hits)))
    if missing:
        return replace(size, statistic=statistic, missing=missing)
    p_value = tail(independence_law(days, count), statistic)
    notes = (*size.notes, "law given the number of exceptions")
    return replace(size, statistic=statistic, p_value=p_value, law="exact", notes=notes)


def _lacking(days: int, count: int) -> str:
    if days < 2:
        return f"needs 2 days, has {days}"
    if count == 0:
        return "0 exceptions, needs 1"
    return "every day is an exception, needs a day without" if count == days else ""


def _coverage(sample: Sample, _: Settings) -> Answer:
    days, count, rate = sample.days, sample.exceptions, sample.nominal
    if days == 0:
        return NO_DAYS
    size = of_clustering(sample)
    often = float(likelihood_ratio(count, days, rate))
    when = float(independence_ratio(*transitions(sample.hits)))
    side = "var-low" if count > days * rate else "var-high"
    parts = f"joint test: rate part {often:.4g}, independence part {when:.4g}; the larger names the side"
    return replace(
        size, statistic=often + when, p_value=tail(coverage_law(days, rate), often + when), law="exact",
        evidence=size.evidence if when > often else side, notes=(*size.notes, parts),
    )  # fmt: skip


_SOURCE = 'Christoffersen (1998); "Backtesting", Encyclopedia of Quantitative Finance, eqs. 12-15'

TESTS = (
    SampleTest("christoffersen-independence", "when", _SOURCE, _independence),
    SampleTest("christoffersen-coverage", "when", _SOURCE, _coverage),
)
