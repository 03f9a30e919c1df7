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


_COMPACT = (
    ("binomial", "Binomial p"),
    ("christoffersen-independence", "Independence p"),
    ("mcneil-frey", "McNeil-Frey p"),
    ("acerbi-szekely-2", "Acerbi-Szekely p"),
)
_COMPACT_HEADER = (
    "Model", "Level", "Days", "Exceptions (expected)", *(name for _, name in _COMPACT), "VaR multiple [95%]",
    "Score beside the reference [95%]",
)  # fmt: skip


def challenger_tables(book: Book, desk: str) -> tuple[Table, ...]:
    """Return the challengers of a desk compactly: on the main span and, where longer, on all days."""
    tables: list[Table] = []
    for which, words in ((book.main_span, "the latest days"), (book.longest_span, "all days")):
        spans = {m: span for m in book.models if (span := which(desk, m)) is not None}
        rows = [_compact(book, desk, m, s, level) for m, s in spans.items() for level in book.levels(desk, m)]
        shown = tuple(r for r in rows if r)
        if shown and not any(t.rows == shown for t in tables):
            first, last = min(s.first for s in spans.values()), max(s.last for s in spans.values())
            caption = f"Challengers over {words}, {first} to {last}, hypothetical P&L"
            tables.append(table(caption, _COMPACT_HEADER, shown, _COMPACT_HEADER[1:8]))
    return tuple(tables)


def _compact(book: Book, desk: str, model: str, span: Span, level: float) -> tuple[str, ...]:
    kind = book.kinds(desk, model)[0]
    count = book.result("binomial", desk, model, span, kind, level)
    ps = [p_cell(book.result(test, desk, model, span, kind, level), book) for test, _ in _COMPACT]
    size = book.result("sufficient-var-multiple", desk, model, span, kind, level)
    score = book.result("diebold-mariano", desk, model, span, kind, level)
    days = say.whole(span.days if count is None else count["days"])
    return (
        model,
        say.level(level),
        days,
        exceptions_cell(count),
        *ps,
        estimate(size, book.currency) if size else say.DASH,
        _score(score, book),
    )


def _score(row: Row | None, book: Book) -> str:
    p = given(row["p_value"]) if row else None
    if row is None or p is None:
        return say.DASH if row is None else answer(row, book)
    words = text(row["direction"]) or f"against {text(row['against'])}"
    return f"{words}: {estimate(row, book.currency)}, {say.p_value(p, book.significance)}"


BRIDGE_HEADER = (
    "Step", "Model", "Window", "Exceptions", "Average VaR", "Average daily change", "Score change [95%]", "Remark",
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
