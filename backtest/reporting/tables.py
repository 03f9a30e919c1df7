"""Tables of the page as ready strings: results, challengers, bridge."""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from backtest.reporting import wording as say
from backtest.reporting.book import BY_RULE, Book, Row, Span, given, text
from backtest.reporting.effects import NO_UNIT, TICK, estimate, score_amount, test_name
from backtest.reporting.facts import Bridge, Step
from backtest.reporting.prose import answer, notes_on, prose


@dataclass(frozen=True)
class Table:
    """A table of ready strings.

    ``numeric`` says which columns hold figures (set to the right, never broken), ``links`` the anchors of the rows.
    """

    caption: str
    header: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]
    numeric: tuple[bool, ...]
    note: str = ""
    links: tuple[str, ...] = ()


@dataclass(frozen=True)
class Fact:
    """A label and what stands beside it; ``zone`` is the rule's colour word where the text is a rule's zone."""

    label: str
    text: str
    zone: str = ""


def table(
    caption: str, header: Iterable[str], rows: Iterable[Sequence[str]], numeric: Iterable[str] = (), note: str = ""
) -> Table:
    """Return a table; ``numeric`` names the columns of figures."""
    names, figures = tuple(header), set(numeric)
    return Table(caption, names, tuple(tuple(r) for r in rows), tuple(n in figures for n in names), note)


def span_words(span: Span) -> str:
    """Return "250 days, 2025-01-02 to 2025-12-31"."""
    return f"{say.plural(span.days, 'day')}, {span.first} to {span.last}"


RESULT_HEADER = (
    "Level", "Question", "Test", "Days", "Exceptions (expected)", "Statistic", "p", "Law", "Estimate [95%]", "Answer",
)  # fmt: skip
_RESULT_FIGURES = ("Level", "Days", "Exceptions (expected)", "Statistic", "p")


def result_tables(book: Book, desk: str, model: str) -> tuple[Table, ...]:
    """Return the results of one desk's model: a table a span and P&L kind, the main span first, the rule last."""
    main, tables = book.main_span(desk, model), []
    spans = sorted(book.spans(desk, model), key=lambda s: s != main)
    for span in [s for i, s in enumerate(spans) if not any(_same(s, t) for t in spans[:i])]:
        for kind in book.kinds(desk, model):
            rows = [r for r in book.results(desk, model, pnl_kind=kind, place=span.place) if r["question"] != BY_RULE]
            if rows:
                own = max(rows, key=lambda r: r["days"])
                days = span_words(Span(span.place, own["from"], own["to"], own["days"]))
                notes = notes_on(rows) if span == main else "The notes on these results stand in results.csv."
                tables.append(_results(book, rows, f"{say.name(model)}, {kind} P&L, {days}", notes))
    rule = book.results(desk, model, question=BY_RULE)
    return tuple(tables + [_results(book, rule, f"{say.name(model)}, by rule", notes_on(rule))] * bool(rule))


def _same(one: Span, other: Span) -> bool:
    return (one.first, one.last, one.days) == (other.first, other.last, other.days)


def _results(book: Book, rows: list[Row], caption: str, notes: str) -> Table:
    ordered = sorted(rows, key=lambda r: r["level"])
    return table(caption, RESULT_HEADER, [_result(r, book) for r in ordered], _RESULT_FIGURES, notes)


def tests_used(book: Book) -> list[tuple[str, str]]:
    """Return each test of the record with the source it names, in recorded order, once."""
    used = book.record.results[["test", "source"]].drop_duplicates("test")
    return [(test_name(str(t)), prose(text(s)) or say.DASH) for t, s in used.itertuples(index=False)]


def _result(row: Row, book: Book) -> tuple[str, ...]:
    against = f", against {row['against']}" if text(row["against"]) else ""
    statistic = given(row["statistic"])
    return (
        say.level(row["level"]),
        text(row["question"]),
        f"{test_name(row['test'])}{against}",
        say.whole(row["days"]),
        exceptions_cell(row),
        say.DASH if statistic is None else say.number(statistic),
        p_cell(row, book),
        text(row["law"]) or say.DASH,
        estimate(row, book.currency),
        answer(row, book),
    )


def exceptions_cell(row: Row | None) -> str:
    """Return "6 (2.5)": the exceptions and, in brackets, what the level lets expect."""
    if row is None or given(row["exceptions"]) is None:
        return say.DASH
    return f"{say.whole(row['exceptions'])} ({say.expected(int(row['days']), row['level'])})"


def p_cell(row: Row | None, book: Book) -> str:
    """Return the p-value of a result, a dash where there is none."""
    p = given(row["p_value"]) if row else None
    return say.DASH if p is None else say.p_cell(p, book.significance)


Column = tuple[tuple[str, str], ...]
_COMPACT: tuple[Column, ...] = (
    (("binomial", "Count p"),),
    (("dynamic-quantile", "Dynamic quantile p"), ("christoffersen-independence", "Independence p")),
    (("es-zones", "ES zones p"), ("acerbi-szekely-2", "Acerbi-Szekely p"), ("mcneil-frey", "McNeil-Frey p")),
    (("berkowitz-tail", "Tail p"),),
)
"""A column of p-values a question (how often, when, how deep, what shape): of its tests the first that was asked."""
_BEFORE, _SIZE, _SCORE = ("Model", "Level", "Days", "Exceptions (expected)"), "VaR multiple [95%]", "Score [95%]"


def challenger_tables(book: Book, desk: str) -> tuple[Table, ...]:
    """Return the challengers of a desk compactly: on the main span and, where longer, on all days."""
    tables: list[Table] = []
    for which, words in ((book.main_span, "the latest days"), (book.longest_span, "all days")):
        spans = {m: span for m in book.models if (span := which(desk, m)) is not None}
        asked = [_asked(book, desk, m, s, level) for m, s in spans.items() for level in book.levels(desk, m)]
        asked = [found for found in asked if found]
        if asked:
            first, last = min(s.first for s in spans.values()), max(s.last for s in spans.values())
            made = _challengers(book, asked, f"Challengers over {words}, {first} to {last}, hypothetical P&L")
            if not any(t.rows == made.rows for t in tables):
                tables.append(made)
    return tuple(tables)


Asked = dict[str, Row]
"""The results of one model, level and span by test."""


def _asked(book: Book, desk: str, model: str, span: Span, level: float) -> Asked:
    kind = book.kinds(desk, model)[0]
    return {r["test"]: r for r in book.results(desk, model, pnl_kind=kind, level=level, place=span.place)}


def _challengers(book: Book, asked: list[Asked], caption: str) -> Table:
    """Return the table of some models and levels; a question that was asked of none of them has no column."""
    columns = [tests for tests in _COMPACT if any(test in found for test, _ in tests for found in asked)]
    headers, note = [], ""
    for tests in columns:
        used = {name: [f for f in asked if _first(tests, f) == test] for test, name in tests}
        names = [name for name, rows in used.items() if rows]
        headers.append(names[0] if len(names) == 1 else f"{names[0].removesuffix(' p')}, else other, p")
        others = [f"{name} of {say.listed(_models_of(used[name]), 20)}" for name in names[1:]]
        note += f" In that column {say.listed(others)}." if others else ""
    header = (*_BEFORE, *headers, _SIZE, _SCORE)
    rows = [_compact(book, found, columns) for found in asked]
    note = f"Score: beside the reference, below 0 favours the challenger.{note}"
    return table(caption, header, rows, header[1:-2], note)


def _models_of(rows: list[Asked]) -> list[str]:
    return list(dict.fromkeys(say.name(str(next(iter(found.values()))["model"])) for found in rows))


def _first(tests: Column, found: Asked) -> str:
    return next((test for test, _ in tests if test in found), "")


def _compact(book: Book, found: Asked, columns: list[Column]) -> tuple[str, ...]:
    any_row, count = next(iter(found.values())), found.get("binomial")
    size = found.get("sufficient-var-multiple")
    days = max(r["days"] for r in found.values()) if count is None else count["days"]
    return (
        str(any_row["model"]),
        say.level(any_row["level"]),
        say.whole(days),
        exceptions_cell(count),
        *(p_cell(found.get(_first(tests, found)), book) for tests in columns),
        estimate(size, book.currency) if size else say.DASH,
        _score(found.get("diebold-mariano"), book),
    )


def _score(row: Row | None, book: Book) -> str:
    p = given(row["p_value"]) if row else None
    if row is None or p is None:
        return say.DASH if row is None else answer(row, book)
    words = text(row["direction"]) or f"against {text(row['against'])}"
    return f"{words}: {estimate(row, book.currency)}, {say.p_value(p, book.significance)}"


BRIDGE_HEADER = (
    "Step", "Model", "Window", "Exceptions", "Average VaR", "Daily change", "Score change [95%]", "Remark",
)  # fmt: skip


def bridge_words(bridge: Bridge) -> str:
    """Say why a bridge was not built, and at which level."""
    where = f"{say.level(bridge.level)}, {bridge.kind} P&L: " if bridge.level is not None else ""
    return f"{where}{bridge.note or 'not built'}"


def bridge_table(bridge: Bridge) -> Table:
    """Return a bridge that was built as a table; amounts with their unit, score changes against the step before."""
    level = bridge.level or 0.0
    days = f"{say.plural(bridge.days, 'shared day')}, {bridge.first} to {bridge.last}"
    expectation = say.expected(bridge.days, level)
    caption = (
        f"{say.name(bridge.desk)}, {say.level(level)}, {bridge.kind} P&L, {days}; {expectation} exceptions expected"
    )
    scores = say.listed([_score_words(s, bridge.currency) for s in sorted({s.score_name for s in bridge.steps} - {""})])
    note = f"Score: {scores}, difference to the step before; below 0 is better." if scores else ""
    remarks = {s.note for s in bridge.steps}
    rows = [_bridge_row(s, bridge.currency) for s in bridge.steps]
    if len(remarks) > 1:
        return table(caption, BRIDGE_HEADER, rows, BRIDGE_HEADER[2:7], note)
    said = f"{note} {remarks.pop()}".strip()  # one remark on every step is said once, below
    return table(caption, BRIDGE_HEADER[:-1], [r[:-1] for r in rows], BRIDGE_HEADER[2:7], said)


def _score_words(name: str, currency: str) -> str:
    return f"{name} ({f'in {currency}' if name == TICK else NO_UNIT})"


def _bridge_row(step: Step, currency: str) -> tuple[str, ...]:
    def amount(value: float | None) -> str:
        return say.DASH if value is None else say.money(value, currency)

    def show(value: float) -> str:
        return score_amount(value, step.score_name == TICK, currency)

    change = say.DASH if step.score_change is None else show(step.score_change)
    if step.score_change is not None and step.low is not None and step.high is not None:
        change += f" [{show(step.low)} to {show(step.high)}]"
    counts = [say.DASH if n is None else say.whole(n) for n in (step.window, step.exceptions)]
    return (step.name, step.model, *counts, amount(step.average_var), amount(step.average_change), change, step.note)
