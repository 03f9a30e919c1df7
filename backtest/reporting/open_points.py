"""What needs a person: drawn from a record, and said. The opinion itself is never given here."""

import pandas as pd

from backtest.records import FALLBACK, REPORTED_STATUS
from backtest.reporting import wording as say
from backtest.reporting.book import Book, given, text
from backtest.reporting.drawn import scope_at
from backtest.reporting.facts import DeskCounts, Person, Scope

HOLM, STEP_UP = "rejected by Holm", "rejected by Benjamini-Hochberg"
"""Words of ``decision_across_desks``; what Holm rejects, Benjamini-Hochberg rejects too."""
NAMED = 5
"""Desks named in a sentence before it only counts them."""


def person(book: Book, scope: Scope) -> Person:
    """Draw what a person has to look at: fallbacks, remarks, exceptions to explain, desks without a full answer."""
    fell = book.mapping("fallbacks")
    log = book.record.exceptions
    recent = 0 if log.empty else int((log["date"] >= pd.Timestamp(scope.span.first)).sum())
    with_challengers = [d for d in book.desks if book.forecasts(d)["model"].isin(book.models).any()]
    without = tuple(d for d in book.desks if d not in with_challengers)
    return Person(
        scope=scope,
        forecasts=int(fell.get("forecasts", 0)),
        fallbacks=int(fell.get("fallbacks", 0)),
        remarks=len(book.record.remarks),
        exceptions=recent,
        since=scope.span.first,
        unforecast=without,
        short=tuple((d, n) for d, n in _short(book) if scope.is_subject or d not in without),
        flagged=flagged(book),
        counts=desk_counts(book, scope),
    )


def flagged(book: Book) -> tuple[tuple[str, int], ...]:
    """Draw the parts of statuses that mark a forecast kept as made, with how many forecasts, most first."""
    by_status, found = book.mapping("fallbacks").get("by_status"), dict[str, int]()
    for status, n in (by_status or {}).items():
        for part in str(status).split("; "):
            if part not in ("ok", REPORTED_STATUS) and not part.startswith(FALLBACK):
                found[part] = found.get(part, 0) + int(n)
    return tuple(sorted(found.items(), key=lambda item: (-item[1], item[0])))


def desk_counts(book: Book, scope: Scope) -> DeskCounts | None:
    """Draw on which desks the count is rejected; None where there are not several desks to choose from."""
    rows = {}
    for desk in book.desks:
        own = scope_at(book, desk, scope.model)
        row = own and book.result("binomial", desk, own.model, own.span, own.kind, scope.count_level)
        if row and given(row["p_value"]) is not None:
            rows[desk] = row
    if len(rows) < 2:
        return None
    rejected = tuple(d for d, r in rows.items() if r["decision"] == "rejected")
    high = tuple(d for d in rejected if "too high" in text(rows[d]["phrase"]))
    across = {d: text(r["decision_across_desks"]) for d, r in rows.items()}
    holm, step_up = (tuple(d for d, words in across.items() if words == wanted) for wanted in (HOLM, STEP_UP))
    return DeskCounts(
        scope.count_level, rejected, high, len(rows), scope.significance * len(rows), holm, (*holm, *step_up)
    )


def _short(book: Book) -> tuple[tuple[str, int], ...]:
    """Desks with fewer forecast days than the span asked for; a day without P&L keeps its forecast and counts."""
    if book.wanted_days is None:
        return ()
    days = {
        d: int((book.forecasts(d)["model"] == book.main_model).groupby(book.forecasts(d)["date"]).any().sum())
        for d in book.desks
    }
    return tuple((d, n) for d, n in days.items() if n < book.wanted_days)


def needs_person(facts: Person) -> str:
    """Say what a person has to look at, decide or explain."""
    log = f"{say.plural(facts.exceptions, 'desk-day')} with an exception (any level or P&L kind)"
    parts = [
        _fallbacks(facts),
        _flags(facts),
        f"{say.plural(facts.remarks, 'data remark')} to read",
        f"{log} since {facts.since} to explain",
        _counts(facts),
    ]
    if facts.unforecast and facts.forecasts:
        parts.append(f"without any challenger: {say.listed([say.name(d) for d in facts.unforecast])}")
    if facts.short:
        short = [
            f"{say.name(name)} ({say.whole(n)} of {say.plural(facts.scope.wanted_days or 0, 'day')})"
            for name, n in facts.short
        ]
        parts.append(f"judged on less than was asked for: {say.listed(short)}")
    return "; ".join(p for p in parts if p) + ". The opinion is a person's to give."


def _fallbacks(facts: Person) -> str:
    if not facts.forecasts:
        return "No challenger was forecast"
    some = say.whole(facts.fallbacks) if facts.fallbacks else "None"
    return f"{some} of {say.plural(facts.forecasts, 'desk x day x model forecast')} fell back on a stated substitute"


def _flags(facts: Person) -> str:
    """Say how many forecasts were kept with a remark in their status; one may carry several."""
    if not facts.flagged:
        return ""
    return f"kept but flagged: {say.listed([f'{status} {say.whole(n)}' for status, n in facts.flagged])}"


def _counts(facts: Person) -> str:
    counts = facts.counts
    if counts is None:
        return ""
    named = [f"{say.name(d)} (VaR too high)" if d in counts.too_high else say.name(d) for d in counts.rejected]
    some = say.whole(len(named)) if named else "none"
    beyond = f" and {say.whole(len(named) - NAMED)} more" if len(named) > NAMED else ""
    which = f" ({', '.join(named[:NAMED])}{beyond})" if named else ""
    chance = f"chance alone gives at most {say.number(counts.by_chance, 2)}"
    return f"the {say.level(counts.level)} count is rejected on {some} of {counts.desks} desks{which}, where {chance}"
