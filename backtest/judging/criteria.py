"""The stated criteria asked of the results of the reported model: met, not met, or could not be judged.

Criteria act on sizes and their intervals and on raw results, never on the number of tests; the proposed outcome is
derived from them and is nobody's opinion.
"""

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, fields

import pandas as pd

from backtest.judging.across_desks import span_places
from backtest.judging.phrases import EVIDENCE
from backtest.records import CRITERIA_COLUMNS, Result

MET, NOT_MET, UNJUDGED = "met", "not met", "could not be judged"
OUTCOME = "proposed outcome"
_FOLLOW = (EVIDENCE["clustered"], EVIDENCE["with-var"])
"""What fails the criterion on when exceptions fall: exceptions too even, or a wrong rate alone, do not."""
ZONES = ("green", "amber", "red")
"""Zones of the dated rule from best to worst."""


@dataclass(frozen=True)
class Criteria:
    """What "fit" means: see the study file's [review.criteria]."""

    var_multiple_at_most: float
    es_multiple_at_most: float
    exceptions_zone: str
    clustering: str
    minimum_days: int


@dataclass(frozen=True)
class Judged:
    """One criterion asked of one row of results; numbers None where it has none."""

    desk: str
    criterion: str
    limit: str
    level: float | None
    pnl_kind: str
    first: str
    last: str
    days: int | None
    value: float | None
    low: float | None
    high: float | None
    answer: str
    note: str


Asked = Callable[[Sequence[Result], Criteria], Iterator[Judged]]


def criteria_table(
    results: Sequence[Result], criteria: Criteria, *, subject: str | None, place: int = 0
) -> pd.DataFrame:
    """Ask every criterion of every desk that reports the subject; the last row of a desk is its proposed outcome.

    ``place``: the span among those asked for that the criteria are about. Columns CRITERIA_COLUMNS; no rows without a
    subject. An outcome is "met" where every criterion is, "not met" where one is not, else "could not be judged".
    """
    own = [r for r, at in zip(results, span_places(results), strict=True) if at == place and r.model == subject]
    desks = sorted({r.desk for r in own}) if subject is not None else []
    rows = []
    for desk in desks:
        asked = [row for ask in ASKED for row in ask([r for r in own if r.desk == desk], criteria)]
        rows += [*asked, _outcome(desk, asked)]
    values = [tuple(getattr(row, f.name) for f in fields(Judged)) for row in rows]
    numbers = dict.fromkeys(("level", "days", "value", "low", "high"), "float64")
    return pd.DataFrame(values, columns=list(CRITERIA_COLUMNS)).astype(numbers)


def _outcome(desk: str, asked: Sequence[Judged]) -> Judged:
    answers = {row.answer for row in asked}
    answer = next((a for a in (NOT_MET, UNJUDGED) if a in answers), MET if answers else UNJUDGED)
    because = sorted({row.criterion for row in asked if row.answer == answer}) if answer != MET else []
    return Judged(desk, OUTCOME, "", None, "", "", "", None, None, None, None, answer, ", ".join(because))


def _row(r: Result, criterion: str, limit: str, answer: str, note: str = "") -> Judged:
    address = (r.level, r.pnl_kind, r.first, r.last, r.days)
    return Judged(r.desk, criterion, limit, *address, r.estimate, r.low, r.high, answer, note)


def _multiples(measure: str) -> Asked:
    name = f"{measure}_multiple_at_most"

    def ask(own: Sequence[Result], criteria: Criteria) -> Iterator[Judged]:
        limit = float(getattr(criteria, name))
        for r in own:
            if r.test != f"sufficient-{measure}-multiple":
                continue
            answer, note = _short(r, criteria)
            if not answer and r.low is None:
                answer, note = UNJUDGED, "the interval has no lower end at this length"
            answer = answer or (NOT_MET if r.low is not None and r.low > limit else MET)
            yield _row(r, name, f"{limit:g}", answer, note or "the lower end of the interval is compared")

    return ask


def _short(r: Result, criteria: Criteria) -> tuple[str, str]:
    if r.days >= criteria.minimum_days:
        return "", ""
    return UNJUDGED, f"{r.days} days, the criteria ask for {criteria.minimum_days}"


def _clustering(own: Sequence[Result], criteria: Criteria) -> Iterator[Judged]:
    if criteria.clustering == "any":
        return
    for r in own:
        if r.question != "when":
            continue
        answer, note = _short(r, criteria)
        if not answer and r.p_value is None:
            answer, note = UNJUDGED, r.phrase
        follows = r.decision == "rejected" and r.phrase in _FOLLOW
        yield _row(r, "clustering", criteria.clustering, answer or (NOT_MET if follows else MET), note or r.test)


def _zone(own: Sequence[Result], criteria: Criteria) -> Iterator[Judged]:
    for r in own:
        if r.test != "basel-zone":
            continue
        known = r.decision in ZONES
        worse = known and ZONES.index(r.decision) > ZONES.index(criteria.exceptions_zone)
        answer = (NOT_MET if worse else MET) if known else UNJUDGED
        address = (r.level, r.pnl_kind, r.first, r.last, r.days)
        count = None if r.exceptions is None else float(r.exceptions)
        yield Judged(r.desk, "exceptions_zone", criteria.exceptions_zone, *address, count, None, None, answer, r.phrase)


ASKED: tuple[Asked, ...] = (_zone, _multiples("var"), _multiples("es"), _clustering)
