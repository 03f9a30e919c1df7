"""What a test answers, how tests are declared, and how an answer becomes a Result.

Every family file ends with a tuple ``TESTS`` of the declarations below; ``battery`` collects them.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass

from backtest.judging.phrases import decision, phrase
from backtest.judging.power_table import could_see
from backtest.judging.rules.profiles import Profile
from backtest.judging.samples import Book, Days, Sample
from backtest.records import Result


@dataclass(frozen=True)
class Answer:
    """A test's answer before it is dressed; every part that does not apply stays empty.

    ``used`` is the sample the statistic is computed on, where it differs from the one handed over. ``evidence`` is the
    key of the phrase that holds if the null is rejected (see phrases.EVIDENCE). ``missing`` says what a p-value needs
    and lacks. ``notes`` become one text.
    """

    used: Sample | None = None
    statistic: float | None = None
    p_value: float | None = None
    law: str | None = None
    estimate: float | None = None
    low: float | None = None
    high: float | None = None
    direction: str = ""
    evidence: str = ""
    could_see: float | None = None
    missing: str = ""
    notes: tuple[str, ...] = ()


@dataclass(frozen=True)
class Settings:
    """Significance of decisions, number of simulated replicates, and the seed all random numbers are spawned from.

    ``lagged_hits``: how many lags of exceptions the dynamic quantile test regresses on.
    """

    significance: float
    simulations: int
    seed: int
    lagged_hits: int = 1


@dataclass(frozen=True)
class SampleTest:
    """A test of one model's forecasts."""

    key: str
    question: str
    source: str
    judge: Callable[[Sample, Settings], Answer]


@dataclass(frozen=True)
class PairTest:
    """A test of one model's forecasts against another's; ``judge`` gets both samples on their shared days."""

    key: str
    question: str
    source: str
    judge: Callable[[Sample, Sample, Settings], Answer]


@dataclass(frozen=True)
class SetTest:
    """A test of all models of a desk at once; ``judge`` gets their samples on shared days and answers for each."""

    key: str
    question: str
    source: str
    judge: Callable[[Sequence[Sample], Settings], Sequence[Answer]]


@dataclass(frozen=True)
class Ruling:
    """What a dated rule is applied to: the reported firm-wide model, under a profile.

    ``first_known`` is a book with P&L as it was first known, where restatements are on record.
    """

    subject: str | None
    firm: str | None
    profile: Profile | None
    first_known: Book | None = None


@dataclass(frozen=True)
class RuleTest:
    """A dated rule; it gives exactly one row for the firm."""

    key: str
    question: str
    source: str
    judge: Callable[[Book, Ruling], Result]


Asked = SampleTest | PairTest | SetTest
Declared = Asked | RuleTest


def ends(dates: Days) -> tuple[str, str]:
    """Return the first and last of sorted dates as ISO text, empty where there is none."""
    return (str(dates[0]), str(dates[-1])) if len(dates) else ("", "")


def dress(answer: Answer, sample: Sample, test: Asked, settings: Settings, against: str = "") -> Result:
    """Return the answer as a Result: the sample's address, the decision, what the test could see, the phrase.

    ``could_see`` comes from the shipped table where the answer has a p-value and does not bring its own.
    """
    used = answer.used if answer.used is not None else sample
    first, last = ends(used.dates)
    power, of_power = answer.could_see, ""
    if power is None and answer.p_value is not None:
        shipped = test.key != "dynamic-quantile" or settings.lagged_hits == 1  # the variant in the table
        power, of_power = could_see(test.key, test.question, sample.level, used.days, settings.significance, shipped)
    return Result(
        desk=sample.desk, model=sample.model, against=against, pnl_kind=sample.kind, level=sample.level,
        first=first, last=last, days=used.days, exceptions=used.exceptions, question=test.question, test=test.key,
        statistic=answer.statistic, p_value=answer.p_value, law=answer.law, estimate=answer.estimate, low=answer.low,
        high=answer.high, direction=answer.direction, could_see=power,
        decision=decision(answer.p_value, settings.significance), decision_across_desks="",
        phrase=phrase(answer.p_value, settings.significance, answer.evidence, power, answer.missing),
        note="; ".join((*answer.notes, of_power) if of_power else answer.notes), source=test.source,
    )  # fmt: skip
