"""The facts of the six sentences, drawn from a record once."""

import numpy as np
import pandas as pd

from backtest.reporting import wording as say
from backtest.reporting.book import BY_RULE, Book, Row, Span, given, text
from backtest.reporting.facts import (
    ZONES,
    Bridge,
    Count,
    Often,
    Rejection,
    RuleCount,
    Scope,
    Size,
    Step,
    Sufficient,
    When,
)

HYPOTHETICAL_ONLY = "count on hypothetical only; the rule takes the larger"


def scope_of(book: Book) -> Scope | None:
    """Say what the first page is about; None where the record holds no result to speak of."""
    firm = book.setting("review.firm")
    judged = [d for d in book.desks if book.spans(d, book.main_model)]
    if not judged:
        return None
    desk = firm if firm in judged else max(judged, key=lambda d: _excess(book, d))
    return scope_at(book, desk, book.main_model)


def scope_at(book: Book, desk: str, model: str) -> Scope | None:
    """Return the scope of one desk and model: its main span, the level of counts (99%) and of sizes (the lowest)."""
    span = book.main_span(desk, model)
    if span is None:
        return None
    levels = book.levels(desk, model)
    return Scope(
        desk=desk,
        is_firm=desk == book.setting("review.firm"),
        desks=len(book.desks),
        model=model,
        is_subject=model == book.subject,
        span=span,
        wanted_days=book.wanted_days,
        count_level=0.99 if 0.99 in levels else levels[-1],
        size_level=levels[0],
        kind=book.kinds(desk, model)[0],
        currency=book.currency,
        significance=book.significance,
    )


def _excess(book: Book, desk: str) -> float:
    """How far the count lies above its expectation, in standard deviations: picks the desk to speak of."""
    scope = scope_at(book, desk, book.main_model)
    row = scope and book.result("binomial", desk, scope.model, scope.span, scope.kind, scope.count_level)
    if not scope or not row or given(row["exceptions"]) is None or not row["days"]:
        return -np.inf
    share = 1 - scope.count_level
    return float((row["exceptions"] - row["days"] * share) / np.sqrt(row["days"] * share * (1 - share)))


def often(book: Book, scope: Scope) -> Often:
    """Draw the counts at the count level; without a reported model those of every challenger."""
    if scope.is_subject:
        counts = [_count(book, scope, scope.model, kind, kind) for kind in book.kinds(scope.desk, scope.model)]
    else:
        counts = [_count(book, scope, model, scope.kind, model) for model in book.models]
    return Often(scope, tuple(c for c in counts if c), rule_count(book, scope), _more_counts(book, scope))


def rejections(book: Book, scope: Scope, question: str) -> tuple[Rejection, ...]:
    """Draw every rejection to a question over the main span, whatever its level and P&L kind, in recorded order."""
    rows = book.results(scope.desk, scope.model, question=question, place=scope.span.place, decision="rejected")
    return tuple(
        Rejection(str(r["test"]), float(r["level"]), str(r["pnl_kind"]), float(r["p_value"]), text(r["phrase"]))
        for r in rows
    )


def _more_counts(book: Book, scope: Scope) -> tuple[Rejection, ...]:
    """Draw the rejections of counts that the counts at the count level do not show; a second test adds only news."""
    found = rejections(book, scope, "how often")
    exact = {(r.level, r.kind) for r in found if r.test == "binomial"}

    def is_news(r: Rejection) -> bool:
        if r.test == "binomial":
            return not scope.is_subject or r.level != scope.count_level
        return (r.level, r.kind) not in exact

    return tuple(r for r in found if is_news(r))


def _count(book: Book, scope: Scope, model: str, kind: str, name: str) -> Count | None:
    row = book.result("binomial", scope.desk, model, scope.span, kind, scope.count_level)
    if row is None or given(row["exceptions"]) is None:
        return None
    rejected = row["decision"] == "rejected"
    return Count(name, int(row["exceptions"]), int(row["days"]), given(row["p_value"]), rejected)


def rule_count(book: Book, scope: Scope) -> RuleCount | None:
    """Draw the rule's count of the reported firm-wide model, or why it has none; None where no rule was named."""
    rows = book.results(scope.desk, scope.model, question=BY_RULE) if scope.is_subject else []
    if not rows:
        named = text(book.setting("review.rules"))
        return RuleCount(named, None, "", None, _not_applied(book, scope)) if named else None
    row = rows[-1]
    count, zone = given(row["statistic"]), next((w for w in (row["decision"], row["direction"]) if w in ZONES), "")
    name = text(book.setting("review.rules")) or text(row["test"])
    note = _no_multiplier(row) if zone else text(row["phrase"]) or text(row["note"]) or "not tested"
    return RuleCount(name, None if count is None else int(count), zone, given(row["estimate"]), note)


def _not_applied(book: Book, scope: Scope) -> str:
    firm = text(book.setting("review.firm"))
    if not scope.is_subject:
        return "not applied, since no reported model was supplied"
    if not firm:
        return "not applied, since no desk is named as the firm-wide row"
    if scope.desk != firm:
        return f"not applied, since it counts the firm-wide row {say.name(firm)} alone"
    return "not applied: the record holds no count by rule"


def _no_multiplier(row: Row) -> str:
    """Say why a rule that gives a zone gives no multiplier; empty where it gives one or the record does not say."""
    if given(row["estimate"]) is not None:
        return ""
    return HYPOTHETICAL_ONLY if HYPOTHETICAL_ONLY in text(row["note"]) else ""


def when(book: Book, scope: Scope) -> When:
    """Draw the shortest span of business days that holds at least three quarters of the exceptions."""
    row = book.result("christoffersen-independence", scope.desk, scope.model, scope.span, scope.kind, scope.size_level)
    daily = _within(book.daily(scope.desk, scope.model, scope.size_level, scope.kind), scope.span)
    hits = daily.loc[daily["loss"] > daily["var"], "date"].to_numpy().astype("datetime64[D]")
    inside, first, last = _densest(np.searchsorted(book.business_days, hits))
    days = int(daily["loss"].notna().sum())
    return When(
        scope=scope,
        exceptions=len(hits),
        days=days,
        inside=inside,
        width=int(last - first + 1) if inside else 0,
        even=(inside - 1) * days / len(hits) + 1 if inside else 0.0,
        first=str(book.business_days[first]) if inside else "",
        last=str(book.business_days[last]) if inside else "",
        p=given(row["p_value"]) if row else None,
        rejected=row is not None and row["decision"] == "rejected",
        note=text(row["phrase"]) if row else "not tested: the test was not asked for",
        more=_more_clusters(book, scope),
    )


def _more_clusters(book: Book, scope: Scope) -> tuple[Rejection, ...]:
    """Draw the rejections on when exceptions fall, but for the one that the sentence itself is about."""
    shown = ("christoffersen-independence", scope.size_level, scope.kind)
    return tuple(r for r in rejections(book, scope, "when") if (r.test, r.level, r.kind) != shown)


def _densest(places: np.ndarray) -> tuple[int, int, int]:
    """Return how many hits make three quarters, and the first and last place of the shortest run with that many."""
    k = len(places)
    if k == 0:
        return 0, 0, 0
    m = -(-3 * k // 4)
    start = int(np.argmin(places[m - 1 :] - places[: k - m + 1]))
    return m, int(places[start]), int(places[start + m - 1])


def _within(daily: pd.DataFrame, span: Span) -> pd.DataFrame:
    return daily[(daily["date"] >= pd.Timestamp(span.first)) & (daily["date"] <= pd.Timestamp(span.last))]


def size(book: Book, scope: Scope) -> Size:
    """Draw the multiples that would have sufficed, at the level of sizes."""
    daily = _within(book.daily(scope.desk, scope.model, scope.size_level, scope.kind), scope.span)
    daily = daily[daily["loss"].notna()]
    var = _sufficient(book, scope, "VaR", "sufficient-var-multiple", daily["var"])
    es = _sufficient(book, scope, "ES", "sufficient-es-multiple", daily["es"])
    more = rejections(book, scope, "how deep") + rejections(book, scope, "what shape")
    return Size(scope, var, es if es.estimate is not None else None, more)


def _sufficient(book: Book, scope: Scope, measure: str, test: str, values: "pd.Series[float]") -> Sufficient:
    row: Row | None = book.result(test, scope.desk, scope.model, scope.span, scope.kind, scope.size_level)
    average = given(values[values > 0].mean())
    if row is None:
        return Sufficient(measure, None, None, None, average, 0, "not tested: the multiple was not asked for")
    value, low, high = (given(row[c]) for c in ("estimate", "low", "high"))
    return Sufficient(measure, value, low, high, average, int(row["days"]), text(row["phrase"]) or text(row["note"]))


def bridges(book: Book, desk: str) -> list[Bridge]:
    """Draw the bridges of a desk, one a level and P&L kind, in recorded order."""
    groups: dict[tuple[float | None, str], list[Row]] = {}
    for row in book.bridge(desk):
        groups.setdefault((given(row["level"]), text(row["pnl_kind"])), []).append(row)
    return [_bridge(book, desk, level, kind, rows) for (level, kind), rows in groups.items()]


def other_bridges(book: Book, scope: Scope) -> list[Bridge]:
    """Draw the bridges of the main one's desk and P&L kind at its other levels."""
    main = main_bridge(book, scope)
    return [b for b in bridges(book, scope.desk) if main and b.steps and b.kind == main.kind and b.level != main.level]


def main_bridge(book: Book, scope: Scope) -> Bridge | None:
    """Draw the bridge at the level of counts, on the first P&L kind; None where there is none."""
    found = bridges(book, scope.desk)
    wanted = [b for b in found if b.level == scope.count_level and b.kind == scope.kind]
    return next(iter(wanted or found), None)


def _bridge(book: Book, desk: str, level: float | None, kind: str, rows: list[Row]) -> Bridge:
    widest = max(rows, key=lambda r: given(r["days"]) or 0)
    steps = tuple(_step(r) for r in rows if text(r["step"]))
    notes = dict.fromkeys(text(r["note"]) for r in rows if text(r["note"]))
    days = int(given(widest["days"]) or 0)
    return Bridge(
        desk, level, kind, text(widest["from"]), text(widest["to"]), days, book.currency, steps, "; ".join(notes)
    )


def _step(row: Row) -> Step:
    window, exceptions = given(row["window"]), given(row["exceptions"])
    return Step(
        name=text(row["step"]),
        model=text(row["model"]),
        window=None if window is None else int(window),
        exceptions=None if exceptions is None else int(exceptions),
        average_var=given(row["average_var"]),
        average_change=given(row["average_change"]),
        score_name=text(row["score_name"]),
        score_change=given(row["score_change"]),
        low=given(row["low"]),
        high=given(row["high"]),
        note=text(row["note"]),
    )
