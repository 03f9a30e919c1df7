"""The battery: which tests there are, and every test asked of every desk, model, P&L kind, level and span.

A new test is one family file (or a line in one) with a tuple ``TESTS``, named here in ``FAMILIES`` and nowhere else.
"""

from collections.abc import Sequence

import numpy as np
import pandas as pd

from backtest.errors import StudyError, near_miss
from backtest.judging import coverage, independence, ranking, severity, zones
from backtest.judging.answers import Answer, Declared, PairTest, RuleTest, Ruling, SampleTest, Settings, dress
from backtest.judging.samples import Days, Desk, Sample, Span, check_spans, read_book
from backtest.judging.zones import resolve_rules
from backtest.records import Result
from backtest.values import fraction, listed, whole

FAMILIES: tuple[tuple[Declared, ...], ...] = (
    coverage.TESTS,
    independence.TESTS,
    severity.TESTS,
    ranking.TESTS,
    zones.TESTS,
)
TESTS: dict[str, Declared] = {test.key: test for family in FAMILIES for test in family}
DEFAULT = tuple(TESTS)
"""The keys that "default" stands for."""
BENCHMARK = "historical"
"""The model that others are compared with where no reported one is under review."""


def resolve(tests: str | Sequence[str]) -> tuple[str, ...]:
    """Return the keys asked for, each once, in the order given; raises StudyError with the near miss."""
    if isinstance(tests, str):
        tests = DEFAULT if tests == "default" else (tests,)
    keys = listed(tests, "judge.tests", '["binomial", "kupiec"]')
    for key in keys:
        if not isinstance(key, str) or key not in TESTS:
            raise StudyError("unknown test", value=key, place="judge.tests", remedy=near_miss(key, TESTS))
    return tuple(dict.fromkeys(keys))


def judge_table(
    pnl: pd.DataFrame,
    forecasts: pd.DataFrame,
    *,
    tests: str | Sequence[str] = "default",
    spans: Sequence[Span] = ("all",),
    significance: float = 0.05,
    simulations: int = 9999,
    seed: int = 1,
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
    keys, profile, spans = resolve(tests), resolve_rules(rules), check_spans(spans)
    settings = Settings(
        fraction(significance, "significance", above=0.0, below=0.5),
        whole(simulations, "simulations", least=99),
        whole(seed, "seed", least=0, most=None),
    )
    book = read_book(pnl, forecasts, calendar=calendar, as_of=as_of)
    early = None if first_known is None else read_book(first_known, forecasts, calendar=calendar, as_of=book.as_of)
    chosen = [TESTS[key] for key in keys]
    models = [t for t in chosen if not isinstance(t, RuleTest)]
    results = [r for desk in book.desks for r in _judge_desk(desk, models, spans, subject, settings)]
    ruling = Ruling(subject, firm, profile, early)
    return results + [t.judge(book, ruling) for t in chosen if isinstance(t, RuleTest)]


def _judge_desk(
    desk: Desk, tests: Sequence[SampleTest | PairTest], spans: Sequence[Span], subject: str | None, settings: Settings
) -> list[Result]:
    reference = next((name for name in (subject, BENCHMARK) if name in desk.models), None)
    samples = list(desk.samples(spans))
    # samples of one level and length share simulated laws: take them together, answer in the order they came
    together = sorted(range(len(samples)), key=lambda place: (samples[place].level, samples[place].days))
    answers = {place: _judge_sample(desk, samples[place], tests, reference, settings) for place in together}
    return [result for place in range(len(samples)) for result in answers[place]]


def _judge_sample(
    desk: Desk, sample: Sample, tests: Sequence[SampleTest | PairTest], reference: str | None, settings: Settings
) -> list[Result]:
    results = []
    for test in tests:
        if isinstance(test, SampleTest):
            results.append(dress(test.judge(sample, settings), sample, test, settings))
        elif sample.model != reference:
            results.append(_compare(desk, sample, reference, test, settings))
    return results


def _compare(desk: Desk, ours: Sample, reference: str | None, test: PairTest, settings: Settings) -> Result:
    if reference is None:
        missing = f"needs a model to compare with: the reported one under review, or {BENCHMARK!r}"
        return dress(Answer(missing=missing), ours, test, settings)
    if (reference, ours.level) not in desk.forecasts:
        return dress(Answer(missing=f"needs {reference} at {ours.level:g}"), ours, test, settings, reference)
    theirs = desk.sample(reference, ours.kind, ours.level, "all")
    ours, theirs = ranking.shared_days(ours, theirs)
    return dress(test.judge(ours, theirs, settings), ours, test, settings, reference)
