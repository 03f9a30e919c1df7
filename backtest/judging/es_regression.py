"""How deep: Bayer and Dimitriadis' regression tests of ES, with simulated laws.

Both look at days below VaR too, so they need the PIT: losses are simulated along the path of forecasts from the
distribution rebuilt in ``relative_tail``. Their asymptotic laws fail at the lengths in use and are not used.

Source: Bayer and Dimitriadis (2022), Journal of Financial Econometrics 20, 437-471 (from memory).
"""

from collections.abc import Iterator
from dataclasses import replace

import numpy as np
import numpy.typing as npt

from backtest.judging.answers import Answer, SampleTest, Settings
from backtest.judging.es_line import es_line, wald
from backtest.judging.es_samples import of_size, simulated_answer, usable_with_pit
from backtest.judging.nulls import generator, p_upper
from backtest.judging.relative_tail import FEWEST_PAIRS, RelativeTail, pairs_below, relative_tail
from backtest.judging.samples import Sample

Floats = npt.NDArray[np.float64]

MOST_REGRESSIONS = 499
"""Simulated regressions; fewer than the setting, since each is a fit of all its days."""
FEWEST_BEYOND = 2
_DRAWS_AT_ONCE = 1_000_000
_ROUNDING = 1e-9


def deepest_count(days: int, level: float) -> int:
    """Return ceil(T (1 - level)), the number of largest L - ES that the intercept averages."""
    return int(np.ceil(days * (1.0 - level) - _ROUNDING))


def intercept(deepest: Floats, days: int, level: float) -> Floats:
    """Return t = e/se of the intercept from the k + 1 largest L - ES, descending: float64[n, k + 1] to float64[n].

    e is the mean of the k largest, q the next: se^2 = [Var(k largest)/a + (1 - a)(e - q)^2/a]/T, a = 1 - level. A joint
    regression of VaR and ES on a constant has these solutions. Without spread t is 0.
    """
    a, largest, following = 1.0 - level, deepest[:, :-1], deepest[:, -1]
    e = largest.mean(axis=1)
    squares = (largest.var(axis=1) + (1.0 - a) * (e - following) ** 2) / (a * days)
    spread = squares > 1e-24 * (e * e + following**2)
    return np.asarray(np.where(spread, e / np.sqrt(np.where(spread, squares, 1.0)), 0.0))


def deepest(losses: Floats, es: Floats, level: float) -> Floats:
    """Return the k + 1 largest L - ES, descending: float64[1, k + 1]."""
    return np.sort(losses - es)[::-1][None, : deepest_count(len(losses), level) + 1]


def intercept_null(sample: Sample, shapes: Floats | float, settings: Settings) -> Floats:
    """Simulate the t of the intercept along the path of forecasts: float64[simulations].

    Of each path only days whose PIT can put them among the k + 1 largest are turned into losses.
    """
    tail, gap = relative_tail(sample, shapes), sample.es - sample.var
    k = deepest_count(sample.days, sample.level)
    lowest = _passed_by(tail, gap, k + 1.0 + 10.0 * np.sqrt(k + 1.0) + 10.0)
    least = 1.0 - tail.chance_beyond(1.0 + lowest / gap)
    found = []
    for pits in _uniform_blocks("losses along the path", sample, settings.seed, settings.simulations):
        rows, days = np.divmod(np.flatnonzero(pits >= least), sample.days)
        values = gap[days] * (tail.quantile(pits[rows, days], days) - 1.0)
        found.append(intercept(_largest(rows, values, len(pits), k + 1, lowest), sample.days, sample.level))
    return np.concatenate(found)


def _uniform_blocks(purpose: str, sample: Sample, seed: int, simulations: int) -> Iterator[Floats]:
    """Yield uniforms of ``simulations`` paths, a few paths at once: float64[paths, T]."""
    rng, step = generator(seed, purpose, sample.level, sample.days), max(1, _DRAWS_AT_ONCE // sample.days)
    for start in range(0, simulations, step):
        yield rng.random((min(step, simulations - start), sample.days))


def _passed_by(tail: RelativeTail, gap: Floats, expected: float) -> float:
    """Return a value of L - ES that ``expected`` days of a path pass on average (or all days, if there are fewer)."""
    low, high = float(np.min(gap * (tail.values[0] - 1.0))) - float(gap.max()), 0.0
    if expected >= len(gap):
        return low
    for _ in range(40):
        middle = (low + high) / 2.0
        enough = float(np.sum(tail.chance_beyond(1.0 + middle / gap))) >= expected
        low, high = (middle, high) if enough else (low, middle)
    return low


def _largest(rows: npt.NDArray[np.intp], values: Floats, paths: int, count: int, lowest: float) -> Floats:
    """Return the ``count`` largest values of each path, descending; ``lowest`` stands where one has fewer."""
    starts = np.searchsorted(rows, np.arange(paths + 1))
    width = max(count, int(np.diff(starts).max(initial=0)))
    table = np.full((paths, width), lowest)
    table[rows, np.arange(len(rows)) - starts[rows]] = values
    return np.sort(np.partition(table, width - count, axis=1)[:, width - count :], axis=1)[:, ::-1]


def auxiliary(losses: Floats, var: Floats, es: Floats, level: float) -> Floats:
    """Return the Wald statistic of ES = 0 + 1 x forecast, robust covariance: losses float64[n, T] to float64[n].

    The VaR equation is on (1, VaR forecast), the ES equation on (1, ES forecast); see es_line. Weak against ES too low:
    samples that lack deep losses have small standard errors, which lengthens the law's tail on the other side.
    """
    return wald(*es_line(losses, var, es, level), np.array([0.0, 1.0]))


def auxiliary_null(sample: Sample, shapes: Floats | float, settings: Settings) -> Floats:
    """Simulate the Wald statistic along the path of forecasts: float64[at most 499]."""
    tail, gap, found = relative_tail(sample, shapes), sample.es - sample.var, []
    simulations = min(settings.simulations, MOST_REGRESSIONS)
    for pits in _uniform_blocks("regressions along the path", sample, settings.seed, simulations):
        losses = sample.var + gap * tail.quantile(pits, slice(None))
        found.append(auxiliary(losses, sample.var, sample.es, sample.level))
    return np.concatenate(found)


def _askable(sample: Sample) -> tuple[Sample, str, tuple[str, ...]]:
    used, missing, notes = usable_with_pit(sample)
    if not missing and pairs_below(used) < FEWEST_PAIRS:
        missing = f"needs pit on {FEWEST_PAIRS} days below VaR, has {pairs_below(used)}"
    said = "losses simulated from VaR, ES and shape, below VaR from the forecast's pairs of loss and PIT"
    return used, missing, (said, *notes)


def _intercept(sample: Sample, settings: Settings) -> Answer:
    used, missing, notes = _askable(sample)
    if missing:
        return Answer(missing=missing)
    found = deepest(used.losses, used.es, used.level)
    if np.ptp(found) <= 1e-12 * np.max(np.abs(found)):
        return replace(of_size(used, settings), missing="needs L - ES that differ from one another")
    observed = float(intercept(found, used.days, used.level)[0])

    def null(shapes: Floats | float) -> Floats:
        return intercept_null(used, shapes, settings)

    said = ("one-sided: large means ES understated", *notes)
    return replace(simulated_answer(used, settings, observed, null, p_upper, said), evidence="es-low")


def _auxiliary(sample: Sample, settings: Settings) -> Answer:
    used, missing, notes = _askable(sample)
    if missing:
        return Answer(missing=missing)
    needs = int(np.ceil(FEWEST_BEYOND / used.nominal - _ROUNDING))
    if used.days < needs:
        return Answer(missing=f"needs {needs} days, has {used.days}")
    if any(float(np.std(path)) <= 1e-6 * float(np.max(np.abs(path))) for path in (used.var, used.es)):
        return Answer(missing="needs VaR and ES that vary from day to day")
    line, covariance = es_line(used.losses[None], used.var, used.es, used.level)
    observed = float(wald(line, covariance, np.array([0.0, 1.0]))[0])

    def null(shapes: Floats | float) -> Floats:
        return auxiliary_null(used, shapes, settings)

    constant, slope = (float(c) for c in line[0])
    deep = constant + (slope - 1.0) * float(np.mean(used.es)) > 0.0
    count = min(settings.simulations, MOST_REGRESSIONS)
    said = (
        f"ES regressed on its forecast: slope {slope:.3g}, expected 1",
        f"{count} simulations",
        "weak against ES too low",
        *notes,
    )
    answer = simulated_answer(used, settings, observed, null, p_upper, said)
    return replace(answer, evidence="es-low" if deep else "es-high")


_SOURCE = "Bayer and Dimitriadis (2022), Journal of Financial Econometrics 20"

TESTS = (
    SampleTest("bayer-dimitriadis-intercept", "how deep", _SOURCE + ", intercept", _intercept),
    SampleTest("bayer-dimitriadis-auxiliary", "how deep", _SOURCE + ", auxiliary", _auxiliary),
)
