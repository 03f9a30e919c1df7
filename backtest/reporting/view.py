"""The page as plain records of ready strings: the template below it computes nothing."""

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace

from backtest.records import Record
from backtest.reporting import figures
from backtest.reporting import wording as say
from backtest.reporting.book import Book, Row, given, text
from backtest.reporting.drawn import bridges, main_bridge, rule_count, scope_at, scope_of
from backtest.reporting.effects import estimate
from backtest.reporting.facts import Scope
from backtest.reporting.logs import exceptions_table, remarks_table
from backtest.reporting.open_points import flagged
from backtest.reporting.prose import answer, prose
from backtest.reporting.sentences import POSITIONS, Sentence, about, sentences
from backtest.reporting.tables import (
    Table,
    bridge_table,
    bridge_words,
    challenger_tables,
    exceptions_cell,
    result_tables,
    span_words,
    table,
    tests_used,
)

DRAFT = "Draft: no opinion given"
CAUTIONS = (
    "This is statistical evidence for a review: neither an approval nor advice; it does not say that a model is right.",
    "The applicable rules, the supervisor and licensed judgement decide; zone words are those of the rule named.",
    "A result that is not rejected shows only that these days do not contradict it. What is not tested stays open.",
    POSITIONS,
)


@dataclass(frozen=True)
class Fact:
    """A label and what stands beside it; ``zone`` is the rule's colour word where the text is a rule's zone."""

    label: str
    text: str
    zone: str = ""


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
    figure: FigureView | None
    results: tuple[Table, ...]
    challengers: tuple[Table, ...]
    bridges: tuple[Table, ...]
    bridge_notes: tuple[str, ...]
    exceptions: Table | None
    remarks: Table | None


@dataclass(frozen=True)
class Summary:
    """The whole page."""

    title: str
    run: str
    cut_off: str
    draft: str
    about: str
    facts: tuple[Fact, ...]
    sentences: tuple[Sentence, ...]
    cautions: tuple[str, ...]
    bridge: Table | None
    index: Table
    desks: tuple[DeskView, ...]
    models: tuple[Fact, ...]
    tests: tuple[Fact, ...]
    remarks: Table | None
    sources: Table
    settings: Table
    versions: Table


def summary_view(record: Record) -> Summary:
    """Return the page of a record."""
    book = Book(record)
    scope = scope_of(book)
    bridge = main_bridge(book, scope) if scope else None
    return Summary(
        title=text(book.setting("title")) or "Market-risk model review",
        run=text(record.manifest.get("run")) or say.DASH,
        cut_off=_cut_off(book),
        draft=DRAFT,
        about=about(scope) if scope else "nothing to judge",
        facts=_facts(book, scope),
        sentences=sentences(book),
        cautions=CAUTIONS,
        bridge=bridge_table(bridge) if bridge and bridge.steps else None,
        index=_index(book),
        desks=tuple(_desk(book, desk, f"desk-{i}") for i, desk in enumerate(book.desks, start=1)),
        models=_models(book),
        tests=tuple(Fact(*pair) for pair in tests_used(book)),
        remarks=remarks_table(record.remarks, f"Data remarks, {say.whole(len(record.remarks))} in all"),
        sources=_sources(record),
        settings=table("Settings of the study, defaults filled in", ("Key", "Value"), _flat(book.mapping("study"))),
        versions=table("Program, libraries, seeds", ("What", "Value"), _versions(book)),
    )


def _cut_off(book: Book) -> str:
    kept = text(book.record.manifest.get("as_of"))
    return kept or (say.date(book.business_days[-1]) if len(book.business_days) else say.DASH)


def _facts(book: Book, scope: Scope | None) -> tuple[Fact, ...]:
    facts = [Fact("Subject", book.subject or "none supplied: challengers only")]
    firm = text(book.setting("review.firm"))
    facts.append(Fact("Firm-wide row", firm or "not supplied"))
    facts.append(Fact("Cut-off", _cut_off(book)))
    if scope:
        facts.append(Fact("Days judged", span_words(scope.span)))
        facts += [_rule_fact(book, scope)]
    facts.append(Fact("Run", text(book.record.manifest.get("run")) or say.DASH))
    return tuple(facts)


def _rule_fact(book: Book, scope: Scope) -> Fact:
    rule = rule_count(book, scope)
    if rule is None:
        return Fact("Rule", "none applied")
    if rule.count is None or not rule.zone:
        return Fact(f"Rule {rule.name}", prose(rule.note))
    multiplier = f", no multiplier: {rule.note}" if rule.note else ""
    multiplier = multiplier if rule.multiplier is None else f", multiplier {say.multiple(rule.multiplier)}"
    return Fact(f"Rule {rule.name}", f"count {say.whole(rule.count)}: {rule.zone}{multiplier}", rule.zone)


def _index(book: Book) -> Table:
    levels = sorted({lv for d in book.desks for lv in book.levels(d, book.main_model)})
    header = ("Desk", "Days", *(f"Exceptions {say.level(lv)} (expected)" for lv in levels))
    header += (f"VaR multiple {say.level(levels[0]) if levels else ''} [95%]", "Answer to how often (level)")
    rows = [_index_row(book, desk, levels) for desk in book.desks]
    model = book.main_model
    asked = say.plural(book.wanted_days, "day") if book.wanted_days else "all days"
    caption = f"Desks: {say.name(model) or 'no model'}, {asked} asked for, hypothetical P&L"
    made = table(caption, header, rows, header[1:-2])
    return replace(made, links=tuple(f"desk-{i}" for i in range(1, len(rows) + 1)))


def _index_row(book: Book, desk: str, levels: list[float]) -> tuple[str, ...]:
    model = book.main_model
    scope = scope_at(book, desk, model)
    if scope is None:
        return (desk, "0", *([say.DASH] * (len(levels) + 1)), "not tested: no day with both a forecast and a P&L")
    counts = {lv: book.result("binomial", desk, model, scope.span, scope.kind, lv) for lv in levels}
    size = book.result("sufficient-var-multiple", desk, model, scope.span, scope.kind, levels[0])
    count = counts.get(scope.count_level)
    judged = scope.span.days if count is None else int(count["days"])
    asked = scope.wanted_days
    days = say.whole(judged) + (f" of {say.whole(asked)}" if asked and judged < asked else "")
    return (
        desk,
        days,
        *(exceptions_cell(counts[lv]) for lv in levels),
        estimate(size, book.currency) if size else say.DASH,
        _how_often(book, counts, count),
    )


def _how_often(book: Book, counts: Mapping[float, Row | None], count: Row | None) -> str:
    """Return the answers of the levels that reject, else that of the level of counts."""
    said: dict[str, list[str]] = {}
    for level, row in counts.items():
        if row is not None and row["decision"] == "rejected":
            said.setdefault(text(row["phrase"]), []).append(say.level(level))
    found = "; ".join(f"{phrase} ({say.listed(levels)})" for phrase, levels in said.items())
    return found or (answer(count, book) if count else "not tested")


def _desk(book: Book, desk: str, anchor: str) -> DeskView:
    scope = scope_at(book, desk, book.main_model)
    remarks, found = book.record.remarks, bridges(book, desk)
    return DeskView(
        anchor=anchor,
        name=desk,
        facts=_desk_facts(book, desk, scope),
        figure=_figure(book, desk, scope.count_level if scope else 0.99, anchor),
        results=result_tables(book, desk, book.subject) if book.subject else (),
        challengers=challenger_tables(book, desk),
        bridges=tuple(bridge_table(b) for b in found if b.steps),
        bridge_notes=tuple(bridge_words(b) for b in found if not b.steps),
        exceptions=exceptions_table(book.record.exceptions, desk, book.main_model),
        remarks=remarks_table(remarks[remarks["desk"] == desk], "Data remarks on this desk") if len(remarks) else None,
    )


def _desk_facts(book: Book, desk: str, scope: Scope | None) -> tuple[Fact, ...]:
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
    facts.append(
        Fact("Judged", span_words(scope.span) if scope else "not tested: no day with both a forecast and a P&L")
    )
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


def _models(book: Book) -> tuple[Fact, ...]:
    listed = book.record.manifest.get("models")
    rows = listed if isinstance(listed, list) else []
    models = tuple(
        Fact(str(m["name"]), ". ".join(p for p in (text(m.get("line")), text(m.get("source"))) if p)) for m in rows
    )
    every = int(book.mapping("fallbacks").get("forecasts", 0))
    return models + tuple(Fact(f"Status: {status}", _status(n, every)) for status, n in flagged(book))


def _status(n: int, every: int) -> str:
    share = f" ({say.percent(n / every)})" if every else ""
    return f"{say.whole(n)} of {say.plural(every, 'desk x day x model forecast')}{share}, kept as made"


def _sources(record: Record) -> Table:
    listed = record.manifest.get("inputs")
    rows = listed if isinstance(listed, list) else []
    cells = [(str(s["role"]), str(s["name"]), say.whole(s["rows"]), str(s["sha256"])) for s in rows]
    return table("Input files as read", ("Role", "File", "Rows", "SHA-256"), cells, ["Rows"])


def _flat(value: object, key: str = "") -> Iterable[tuple[str, str]]:
    if isinstance(value, Mapping) and value:
        for name, inner in sorted(value.items()):
            yield from _flat(inner, f"{key}.{name}" if key else str(name))
    elif isinstance(value, list) and any(isinstance(v, Mapping) for v in value):
        for i, inner in enumerate(value, start=1):
            yield from _flat(inner, f"{key}[{i}]")
    else:
        yield key, _setting(value)


def _setting(value: object) -> str:
    if isinstance(value, list):
        return ", ".join(_setting(v) for v in value) or "none"
    number = None if isinstance(value, str | bool) else given(value)
    return say.cell(value) if number is None else f"{value}"


def _versions(book: Book) -> list[tuple[str, str]]:
    manifest = book.record.manifest
    rows = [("tailmark", text(manifest.get("version")) or say.DASH)]
    rows += [(str(k), str(v)) for k, v in sorted(book.mapping("versions").items())]
    rows += [(f"seed {k}", str(v)) for k, v in sorted(book.mapping("seeds").items())]
    rows += [(k, str(manifest[k])) for k in ("platform", "started", "finished") if k in manifest]
    return rows
