"""The list of desks: its order, by what is rejected across desks, and its table."""

from collections.abc import Mapping
from dataclasses import replace

from backtest.reporting import wording as say
from backtest.reporting.book import Book, Row, text
from backtest.reporting.drawn import scope_at
from backtest.reporting.effects import estimate
from backtest.reporting.facts import DeskCounts
from backtest.reporting.prose import prose
from backtest.reporting.tables import Table, exceptions_cell, table

NOTHING = "not tested: no day with both a forecast and a P&L"


def anchors(book: Book, counts: DeskCounts | None) -> dict[str, str]:
    """Return the desks in the order of the list with their anchors: the firm, then as rejected across desks."""
    firm = text(book.setting("review.firm"))
    ordered = sorted(book.desks, key=lambda desk: (desk != firm, _rank(desk, counts)))
    return {desk: f"desk-{i}" for i, desk in enumerate(ordered, start=1)}


def _rank(desk: str, counts: DeskCounts | None) -> int:
    if counts is None:
        return 0
    return next((i for i, group in enumerate((counts.holm, counts.step_up, counts.rejected)) if desk in group), 3)


def index_table(book: Book, counts: DeskCounts | None, places: dict[str, str]) -> Table:
    """Return the list of desks, in the order of ``places`` (anchors), with counts, multiple and answer to how often."""
    levels = sorted({lv for d in book.desks for lv in book.levels(d, book.main_model)})
    header = ("Desk", "Days", *(f"Exceptions {say.level(lv)} (expected)" for lv in levels))
    header += (f"VaR multiple {say.level(levels[0]) if levels else ''} [95%]",)
    header += (f"Across desks, {say.level(counts.level)}",) if counts else ()
    header += ("Answer to how often (level)",)
    rows = [_row(book, desk, levels, counts) for desk in places]
    asked = say.plural(book.wanted_days, "day") if book.wanted_days else "all days"
    caption = f"Desks: {say.name(book.main_model) or 'no model'}, {asked} asked for, hypothetical P&L"
    made = table(caption, header, rows, header[1 : len(levels) + 3], _order_words(counts) if counts else "")
    return replace(made, links=tuple(places.values()))


def _order_words(counts: DeskCounts) -> str:
    """Say how the list is ordered, how many rejections there are, and how many chance alone gives."""
    return (
        f"{say.level(counts.level)} count rejected alone: {say.whole(len(counts.rejected))} of "
        f"{say.plural(counts.desks, 'desk')}, by chance at most {say.number(counts.by_chance, 2)}; across desks: "
        f"{say.whole(len(counts.step_up))} by Benjamini-Hochberg, {say.whole(len(counts.holm))} by Holm. "
        "It orders the list below the firm, no more."
    )


def _row(book: Book, desk: str, levels: list[float], across: DeskCounts | None) -> tuple[str, ...]:
    scope = scope_at(book, desk, book.main_model)
    mark = (_mark(desk, across),) if across else ()
    if scope is None:
        return (desk, "0", *([say.DASH] * (len(levels) + 1)), *mark, NOTHING)
    counts = {lv: book.result("binomial", desk, scope.model, scope.span, scope.kind, lv) for lv in levels}
    size = book.result("sufficient-var-multiple", desk, scope.model, scope.span, scope.kind, levels[0])
    count = counts.get(scope.count_level)
    judged = scope.span.days if count is None else int(count["days"])
    asked = scope.wanted_days
    days = say.whole(judged) + (f" of {say.whole(asked)}" if asked and judged < asked else "")
    return (
        desk,
        days,
        *(exceptions_cell(counts[lv]) for lv in levels),
        estimate(size, book.currency) if size else say.DASH,
        *mark,
        _how_often(counts, count),
    )


def _mark(desk: str, across: DeskCounts) -> str:
    groups = ((across.holm, "Holm"), (across.step_up, "Benjamini-Hochberg"), (across.rejected, "alone only"))
    return next((word for group, word in groups if desk in group), say.DASH)


def _how_often(counts: Mapping[float, Row | None], count: Row | None) -> str:
    """Return the answers of the levels that reject, else that of the level of counts."""
    said: dict[str, list[str]] = {}
    for level, row in counts.items():
        if row is not None and row["decision"] == "rejected":
            said.setdefault(text(row["phrase"]), []).append(say.level(level))
    found = "; ".join(f"{phrase} ({say.listed(levels)})" for phrase, levels in said.items())
    return found or (prose(text(count["phrase"])) if count else "not tested")
