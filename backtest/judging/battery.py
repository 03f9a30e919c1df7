"""The battery: which tests there are, and every test asked of every desk, model, P&L kind, level and span.

A new test is one family file (or a line in one) with a tuple ``TESTS``, named here in ``FAMILIES`` and nowhere else.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from backtest.errors import StudyError, near_miss
from backtest.judging import (
    calibration,
    comparisons,
    confidence_set,
    coverage,
    dependence,
    durations,
    es_regression,
    es_tests,
    es_zones,
    evidence,
    first_exception,
    independence,
    multinomial,
    ranking,
    severity,
    spectral,
    tail_shape,
    zones,
)
from backtest.judging.across_desks import span_places, with_decisions
from backtest.judging.answers import (
    Answer,
    Asked,
    Declared,
    PairTest,
    RuleTest,
    Ruling,
    SampleTest,
    SetTest,
    Settings,
    dress,
)
from backtest.judging.samples import Days, Desk, Sample, Span, check_spans, read_book
from backtest.judging.zones import resolve_rules
from backtest.records import Result
from backtest.values import fraction, listed, whole

FAMILIES: tuple[tuple[Declared, ...], ...] = (
    coverage.TESTS,
    first_exception.TESTS,
    independence.TESTS,
    dependence.TESTS,
    durations.TESTS,
    severity.TESTS,
    es_zones.TESTS,
    multinomial.TESTS,
    tail_shape.TESTS,
    spectral.TESTS,
    es_tests.TESTS,
    calibration.TESTS,
    es_regression.TESTS,
    ranking.TESTS,
    comparisons.TESTS,
    confidence_set.TESTS,
    zones.TESTS,
    evidence.TESTS,
)
TESTS: dict[str, Declared] = {test.key: test for family in FAMILIES for test in family}
_ALWAYS = ("binomial", "dynamic-quantile", "christoffersen-independence")
_WITH_PIT = ("es-zones", "berkowitz-tail")
_WITHOUT_PIT = ("acerbi-szekely-2", "mcneil-frey")
DEFAULT = (*_ALWAYS, *_WITH_PIT, *_WITHOUT_PIT, "diebold-mariano", "basel-zone")
"""The keys that "default" stands for, by question: how often, when, what shape and how deep, which is better, rule."""
BENCHMARK = "historical"
"""The model that others are compared with where no reported one is under review."""


@dataclass(frozen=True)
class Battery:
    """The tests asked: keys, each once; ``standard``: the default ones, which depend on what a sample knows."""

    keys: tuple[str, ...]
    standard: bool

    def of(self, sample: Sample, tests: Sequence[Asked]) -> list[Asked]:
        """Return the tests a sample is asked: by default es-zones needs a PIT, and others stand in without."""
        if not self.standard:
            return list(tests)
        left_out = _WITHOUT_PIT if np.any(~np.isnan(sample.pit)) else _WITH_PIT
        return [test for test in tests if test.key not in left_out]


def resolve(tests: str | Sequence[str] | Battery) -> Battery:
    """Return the tests asked for, in the order given; raises StudyError with the near miss."""
    if isinstance(tests, Battery):
        return tests
    if isinstance(tests, str):
        if tests == "default":
            return Battery(DEFAULT, True)
        tests = (tests,)
    keys = listed(tests, "judge.tests", '["binomial", "kupiec"]')
    for key in keys:
        if not isinstance(key, str) or key not in TESTS:
            raise StudyError("unknown test", value=key, place="judge.tests", remedy=near_miss(key, TESTS))
    return Battery(tuple(dict.fromkeys(keys)), False)


def judge_table(
    pnl: pd.DataFrame,
    forecasts: pd.DataFrame,
    *,
    tests: str | Sequence[str] | Battery = "default",
    spans: Sequence[Span] = ("all",),
    significance: float = 0.05,
    simulations: int = 9999,
    seed: int = 1,
    lagged_hits: int = 1,
    subject: str | None = None,
    firm: str | None = None,
    rules: str | None = None,
    calendar: Days | None = None,
    as_of: np.datetime64 | None = None,
    first_known: pd.DataFrame | None = None,
) -> list[Result]:
    """Ask every test of every desk x model x P&L kind x level x span: one Result each, in this order of nesting.

    pnl, forecasts, calendar, as_of: see samples.read_book; ``first_known`` is the P&L table as first known. Between
    models: each is compared with the subject, or with "historical" where a desk has no subject, on shared days; the
    reference itself gets no such row. By rule: exactly one row, for the firm. Spans count business days up to as_of.
    Raises StudyError for unknown tests, rules or spans, DataError for tables that cannot be used.
    """
    asked, profile, spans = resolve(tests), resolve_rules(rules), check_spans(spans)
    settings = Settings(
        fraction(significance, "significance", above=0.0, below=0.5),
        whole(simulations, "simulations", least=99),
        whole(seed, "seed", least=0, most=None),
        whole(lagged_hits, "lagged_hits", least=1, most=4),
    )
    book = read_book(pnl, forecasts, calendar=calendar, as_of=as_of)
    early = None if first_known is None else read_book(first_known, forecasts, calendar=calendar, as_of=book.as_of)
    chosen = [TESTS[key] for key in asked.keys]
    models = [t for t in chosen if not isinstance(t, RuleTest)]
    results = [r for desk in book.desks for r in _judge_desk(desk, models, spans, subject, settings, asked)]
    results = with_decisions(results, span_places(results), settings.significance)
    ruling = Ruling(subject, firm, profile, early)
    return results + [t.judge(book, ruling) for t in chosen if isinstance(t, RuleTest)]


def _judge_desk(
    desk: Desk, tests: Sequence[Asked], spans: Sequence[Span], subject: str | None,
    settings: Settings, asked: Battery,
) -> list[Result]:  # fmt: skip
    reference = next((name for name in (subject, BENCHMARK) if name in desk.models), None)
    samples = list(desk.samples(spans))
    sets = _judge_sets(samples, len(spans), [t for t in tests if isinstance(t, SetTest)], settings)
    # samples of one level and length share simulated laws: take them together, answer in the order they came
    together = sorted(range(len(samples)), key=lambda place: (samples[place].level, samples[place].days))
    answers = {
        at: sets[at] | _judge_sample(desk, samples[at], asked.of(samples[at], tests), reference, settings)
        for at in together
    }
    keys = [test.key for test in tests]
    return [answers[place][key] for place in range(len(samples)) for key in keys if key in answers[place]]


def _judge_sample(
    desk: Desk, sample: Sample, tests: Sequence[Asked], reference: str | None, settings: Settings
) -> dict[str, Result]:
    results = {}
    for test in tests:
        if isinstance(test, SampleTest):
            results[test.key] = dress(test.judge(sample, settings), sample, test, settings)
        elif isinstance(test, PairTest) and sample.model != reference:
            results[test.key] = _compare(desk, sample, reference, test, settings)
    return results


def _judge_sets(
    samples: Sequence[Sample], spans: int, tests: Sequence[SetTest], settings: Settings
) -> list[dict[str, Result]]:
    """Return, for each sample of a desk, the results of tests that take all models of a kind, level and span at once.

    Models without a single day are asked apart, so that they do not empty the shared days of the others.
    """
    groups: dict[tuple[str, float, int, bool], list[int]] = {}
    for place, sample in enumerate(samples):  # the span is the innermost order of samples
        groups.setdefault((sample.kind, sample.level, place % spans, sample.days > 0), []).append(place)
    found: list[dict[str, Result]] = [{} for _ in samples]
    for test in tests:
        for places in groups.values():
            shared = ranking.shared_days(*(samples[place] for place in places))
            for place, sample, answer in zip(places, shared, test.judge(shared, settings), strict=True):
                found[place][test.key] = dress(answer, sample, test, settings)
    return found


def _compare(desk: Desk, ours: Sample, reference: str | None, test: PairTest, settings: Settings) -> Result:
    if reference is None:
        missing = f"needs a model to compare with: the reported one under review, or {BENCHMARK!r}"
        return dress(Answer(missing=missing), ours, test, settings)
    if (reference, ours.level) not in desk.forecasts:
        return dress(Answer(missing=f"needs {reference} at {ours.level:g}"), ours, test, settings, reference)
    theirs = desk.sample(reference, ours.kind, ours.level, "all")
    ours, theirs = ranking.shared_days(ours, theirs)
    return dress(test.judge(ours, theirs, settings), ours, test, settings, reference)
