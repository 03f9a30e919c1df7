"""One desk's section of the page, as ready strings."""

from collections.abc import Mapping
from dataclasses import dataclass

from backtest.reporting import figures
from backtest.reporting import wording as say
from backtest.reporting.book import Book
from backtest.reporting.criteria import criteria_table
from backtest.reporting.drawn import bridges, scope_at
from backtest.reporting.facts import Scope
from backtest.reporting.index import NOTHING
from backtest.reporting.logs import exceptions_table, remarks_table
from backtest.reporting.parts import parts_tables, parts_words
from backtest.reporting.refitted import refitted_table
from backtest.reporting.scoreboard import scoreboard_table
from backtest.reporting.tables import (
    Fact,
    Table,
    bridge_table,
    bridge_words,
    challenger_tables,
    result_tables,
    span_words,
)


@dataclass(frozen=True)
class FigureView:
    """A figure as SVG text made here, and its caption."""

    svg: str
    caption: str


@dataclass(frozen=True)
class DeskView:
    """One desk's section."""

    anchor: str
    name: str
    facts: tuple[Fact, ...]
    criteria: Table | None
    figure: FigureView | None
    results: tuple[Table, ...]
    challengers: tuple[Table, ...]
    scoreboard: Table | None
    parts_words: tuple[str, ...]
    parts: tuple[Table, ...]
    refitted: Table | None
    bridges: tuple[Table, ...]
    bridge_notes: tuple[str, ...]
    exceptions: Table | None
    remarks: Table | None


def desk_view(book: Book, desk: str, anchor: str) -> DeskView:
    """Return the section of one desk."""
    scope = scope_at(book, desk, book.main_model)
    kind = scope.kind if scope else "hypothetical"
    remarks, found = book.record.remarks, bridges(book, desk)
    return DeskView(
        anchor=anchor,
        name=desk,
        facts=_facts(book, desk, scope),
        criteria=criteria_table(book, desk),
        figure=_figure(book, desk, scope.count_level if scope else 0.99, anchor),
        results=result_tables(book, desk, book.subject) if book.subject else (),
        challengers=challenger_tables(book, desk),
        scoreboard=scoreboard_table(book, desk, kind),
        parts_words=parts_words(book, desk, kind),
        parts=parts_tables(book, desk, kind),
        refitted=refitted_table(book, desk, kind),
        bridges=tuple(bridge_table(b) for b in found if b.steps),
        bridge_notes=tuple(bridge_words(b) for b in found if not b.steps),
        exceptions=exceptions_table(book.record.exceptions, desk, book.main_model),
        remarks=remarks_table(remarks[remarks["desk"] == desk], "Data remarks on this desk") if len(remarks) else None,
    )


def _facts(book: Book, desk: str, scope: Scope | None) -> tuple[Fact, ...]:
    pnl = book.pnl(desk)
    kinds = [c for c in ("hypothetical", "actual", "risk_theoretical") if c in pnl and pnl[c].notna().any()]
    known = pnl["date"] if len(pnl) else None
    days = (
        "none"
        if known is None
        else f"{say.plural(len(pnl), 'row')}, {say.date(known.min())} to {say.date(known.max())}"
    )
    supplied = [f"{k.replace('_', '-')} ({say.whole(pnl[k].notna().sum())} days)" for k in kinds]
    made = [m for m in book.models if (book.forecasts(desk)["model"] == m).any()]
    facts = [Fact("P&L", f"{days}; {say.listed(supplied) or 'none known'}; {book.currency}")]
    facts.append(Fact("Judged", span_words(scope.span) if scope else NOTHING))
    facts.append(Fact("Challengers", say.listed(made, 8) if made else "none: not forecast on this desk"))
    return (*facts, *_past_fact(book, desk))


def _past_fact(book: Book, desk: str) -> tuple[Fact, ...]:
    """Return which past the challengers of a desk learnt from, where the record says so."""
    kept = book.mapping("desks").get(desk)
    if not isinstance(kept, Mapping) or not kept.get("learn_from"):
        return ()
    if "vectors" not in kept:
        return (Fact("Challengers learn from", f"past {kept['learn_from']} P&L, as the positions were then"),)
    days, (least, most) = int(kept["vectors"]), kept["scenarios"]
    if not days:
        return (Fact("Challengers learn from", "P&L vectors, of which this desk has none"),)
    each = say.whole(most) if least == most else f"{say.whole(least)} to {say.whole(most)}"
    words = f"P&L vectors: each day's positions under {each} past market moves, on {say.plural(days, 'day')}"
    return (Fact("Challengers learn from", words),)


def _figure(book: Book, desk: str, level: float, anchor: str) -> FigureView | None:
    data = figures.losses_against_var(book, desk, level)
    return FigureView(figures.draw(data, anchor), figures.caption(data, desk)) if data else None
