"""The page as plain records of ready strings: the template below it computes nothing."""

from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from backtest.records import Record
from backtest.reporting import wording as say
from backtest.reporting.book import Book, given, text
from backtest.reporting.criteria import outcome, whose
from backtest.reporting.desk import DeskView, desk_view
from backtest.reporting.drawn import main_bridge, rule_count, scope_of
from backtest.reporting.facts import Scope
from backtest.reporting.index import anchors, index_table
from backtest.reporting.logs import remarks_table
from backtest.reporting.open_points import desk_counts, flagged
from backtest.reporting.prose import prose
from backtest.reporting.sentences import POSITIONS, Sentence, about, sentences
from backtest.reporting.tables import Fact, Table, bridge_table, span_words, table, tests_used
from backtest.reporting.terms import terms_fact, terms_lines

DRAFT = "Draft: no opinion given"
CAUTIONS = (
    "This is statistical evidence for a review: neither an approval nor advice; it does not say that a model is right.",
    "The applicable rules, the supervisor and licensed judgement decide; zone words are those of the rule named.",
    "A result that is not rejected shows only that these days do not contradict it. What is not tested stays open.",
    POSITIONS,
)


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
    terms: tuple[Fact, ...]
    settings: Table
    versions: Table


def summary_view(record: Record) -> Summary:
    """Return the page of a record."""
    book = Book(record)
    scope = scope_of(book)
    bridge = main_bridge(book, scope) if scope else None
    counts = desk_counts(book, scope) if scope else None
    places = anchors(book, counts)
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
        index=index_table(book, counts, places),
        desks=tuple(desk_view(book, desk, anchor) for desk, anchor in places.items()),
        models=_models(book),
        tests=tuple(Fact(*pair) for pair in tests_used(book)),
        remarks=remarks_table(record.remarks, f"Data remarks, {say.whole(len(record.remarks))} in all"),
        sources=_sources(record),
        terms=terms_lines(book),
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
        facts += [_rule_fact(book, scope), *_outcome_fact(book, scope)]
    facts += terms_fact(book)
    facts.append(Fact("Run", text(book.record.manifest.get("run")) or say.DASH))
    return tuple(facts)


def _outcome_fact(book: Book, scope: Scope) -> tuple[Fact, ...]:
    found = outcome(book, scope.desk)
    return (Fact(f"Proposed outcome under the criteria ({whose(book)})", found),) if found else ()


def _rule_fact(book: Book, scope: Scope) -> Fact:
    rule = rule_count(book, scope)
    if rule is None:
        return Fact("Rule", "none applied")
    if rule.count is None or not rule.zone:
        return Fact(f"Rule {rule.name}", prose(rule.note))
    multiplier = f", no multiplier: {rule.note}" if rule.note else ""
    multiplier = multiplier if rule.multiplier is None else f", multiplier {say.multiple(rule.multiplier)}"
    return Fact(f"Rule {rule.name}", f"count {say.whole(rule.count)}: {rule.zone}{multiplier}", rule.zone)


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
