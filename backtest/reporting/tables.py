"""Tables of the page as ready strings: results, challengers, bridge, exceptions, remarks."""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import pandas as pd

from backtest.records import PNL_KINDS
from backtest.reporting import wording as say
from backtest.reporting.book import BY_RULE, Book, Row, Span, given, text
from backtest.reporting.facts import Bridge, Step

EXCEPTIONS_SHOWN = 40


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


TESTS = {
    "binomial": ("Exact binomial", "share"),
    "kupiec": ("Kupiec, proportion of failures", "share"),
    "christoffersen-independence": ("Christoffersen, independence", "points"),
    "christoffersen-coverage": ("Christoffersen, conditional coverage", "points"),
    "mcneil-frey": ("McNeil and Frey, ES residuals", "multiple"),
    "acerbi-szekely-2": ("Acerbi and Szekely, second statistic", "multiple"),
    "diebold-mariano": ("Diebold and Mariano, score difference", "number"),
    "basel-zone": ("Zone by rule", "multiplier"),
    "sufficient-var-multiple": ("VaR multiple that would have sufficed", "multiple"),
    "sufficient-es-multiple": ("ES multiple that would have sufficed", "multiple"),
}
"""Readable name of a test and the unit of its estimate; a test that is not listed shows its key and a plain number."""
_UNITS = {
    "share": say.percent,
    "points": lambda value: f"{say.number(value, 3)} points",
    "number": say.number,
    "multiple": lambda value: f"{say.multiple(value)} times",
    "multiplier": say.multiple,
}


def estimate(row: Row) -> str:
    """Return the effect size of a result with its interval, in its unit; a dash where there is none."""
    value, low, high = (given(row[c]) for c in ("estimate", "low", "high"))
    unit = TESTS.get(row["test"], ("", "number"))[1]
    if value is None:
        return say.DASH
    show = _UNITS[unit]
    if unit == "multiple":
        return f"{show(value)} [{say.interval(low, high)}]"
    if low is None or high is None:
        return show(value)
    return f"{show(value)} [{show(low).removesuffix(' points')} to {show(high).removesuffix(' points')}]"


def span_words(span: Span) -> str:
    """Return "250 days, 2025-01-02 to 2025-12-31"."""
    return f"{say.plural(span.days, 'day')}, {span.first} to {span.last}"


RESULT_HEADER = ("Level", "Question", "Test", "Days", "Exceptions (expected)", "Statistic", "p", "Law", "Estimate [95%]", "Answer")  # fmt: skip
_RESULT_FIGURES = ("Level", "Days", "Exceptions (expected)", "Statistic", "p")


def result_tables(book: Book, desk: str, model: str) -> tuple[Table, ...]:
    """Return the results of one desk's model: a table for each span and P&L kind, the main span first, the rule last."""
    main, tables = book.main_span(desk, model), []
    spans = sorted(book.spans(desk, model), key=lambda s: s != main)
    for span in [s for i, s in enumerate(spans) if not any(_same(s, t) for t in spans[:i])]:
        for kind in book.kinds(desk, model):
            rows = [r for r in book.results(desk, model, pnl_kind=kind, place=span.place) if r["question"] != BY_RULE]
            tables.append(_results(book, rows, f"{model}, {kind} P&L, {span_words(span)}"))
    rule = book.results(desk, model, question=BY_RULE)
    return tuple(tables + [_results(book, rule, f"{model}, by rule")] * bool(rule))


def _same(one: Span, other: Span) -> bool:
    return (one.first, one.last, one.days) == (other.first, other.last, other.days)


def _results(book: Book, rows: list[Row], caption: str) -> Table:
    ordered = sorted(rows, key=lambda r: r["level"])
    notes = dict.fromkeys(f"{_name(r)}, {say.level(r['level'])}: {text(r['note'])}" for r in ordered if text(r["note"]))
    return table(caption, RESULT_HEADER, [_result(r, book) for r in ordered], _RESULT_FIGURES, ". ".join(notes))


def _name(row: Row) -> str:
    return TESTS.get(row["test"], (str(row["test"]), ""))[0]


def tests_used(book: Book) -> list[tuple[str, str]]:
    """Return each test of the record with the source it names, in recorded order, once."""
    used = book.record.results[["test", "source"]].drop_duplicates("test")
    return [(TESTS.get(t, (str(t), ""))[0], text(s) or say.DASH) for t, s in used.itertuples(index=False)]


def _result(row: Row, book: Book) -> tuple[str, ...]:
    against = f", against {row['against']}" if text(row["against"]) else ""
    statistic = given(row["statistic"])
    return (
        say.level(row["level"]),
        text(row["question"]),
        f"{_name(row)}{against}",
        say.whole(row["days"]),
        exceptions_cell(row),
        say.DASH if statistic is None else say.number(statistic),
        p_cell(row, book),
        text(row["law"]) or say.DASH,
        estimate(row),
        text(row["phrase"]) or text(row["note"]) or say.DASH,
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
_COMPACT_HEADER = ("Model", "Level", "Days", "Exceptions (expected)", *(n for _, n in _COMPACT), "VaR multiple [95%]", "Score difference [95%], p")  # fmt: skip


def challenger_tables(book: Book, desk: str) -> tuple[Table, ...]:
    """Return the challengers of a desk compactly: on the main span and, where longer, on all days."""
    tables = []
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
    better = (
        say.DASH if score is None else f"{estimate(score)}, {p_cell(score, book)}, against {text(score['against'])}"
    )
    days = say.whole(span.days if count is None else count["days"])
    return (model, say.level(level), days, exceptions_cell(count), *ps, estimate(size) if size else say.DASH, better)


BRIDGE_HEADER = ("Step", "Model", "Window", "Exceptions", "Average VaR", "Average daily change", "Score change [95%]", "Remark")  # fmt: skip


def bridge_words(bridge: Bridge) -> str:
    """Say why a bridge was not built, and at which level."""
    where = f"{say.level(bridge.level)}, {bridge.kind} P&L: " if bridge.level is not None else ""
    return f"{where}{bridge.note or 'not built'}"


def bridge_table(bridge: Bridge) -> Table:
    """Return a bridge that was built as a table; amounts with their unit, score changes against the step before."""
    level = bridge.level or 0.0
    days = f"{say.whole(bridge.days)} shared days, {bridge.first} to {bridge.last}"
    expectation = say.expected(bridge.days, level)
    caption = f"{bridge.desk}, {say.level(level)}, {bridge.kind} P&L, {days}; {expectation} exceptions expected"
    scores = say.listed(sorted({s.score_name for s in bridge.steps if s.score_name}))
    note = f"Score: {scores}, difference to the step before; below 0 is better." if scores else ""
    return table(
        caption, BRIDGE_HEADER, [_bridge_row(s, bridge.currency) for s in bridge.steps], BRIDGE_HEADER[2:7], note
    )


def _bridge_row(step: Step, currency: str) -> tuple[str, ...]:
    def amount(value: float | None) -> str:
        return say.DASH if value is None else say.money(value, currency)

    change = say.DASH if step.score_change is None else say.number(step.score_change, 3)
    if step.score_change is not None and step.low is not None and step.high is not None:
        change += f" [{say.number(step.low, 3)} to {say.number(step.high, 3)}]"
    counts = [say.DASH if n is None else say.whole(n) for n in (step.window, step.exceptions)]
    return (step.name, step.model, *counts, amount(step.average_var), amount(step.average_change), change, step.note)


def exceptions_table(log: pd.DataFrame, desk: str, model: str) -> Table | None:
    """Return the latest rows of a desk's exceptions log; None where there are none.

    A flag ``exception_...`` with its ratio becomes one column; what is left over, whatever its name, a column each.
    """
    own = log[log["desk"] == desk] if "desk" in log else log.iloc[:0]
    if own.empty:
        return None
    shown = own.sort_values("date", ascending=False).head(EXCEPTIONS_SHOWN)
    names = [
        str(c)
        for c in shown.columns
        if c not in ("desk", "model") and not str(c).startswith(("excess_", "ratio_", "es_"))
    ]
    columns = {_column_words(n): _log_cells(shown, n) for n in names}
    part = (
        f"the latest {len(shown)} of {len(own)}; all are in exceptions.csv"
        if len(own) > len(shown)
        else f"all {len(own)}"
    )
    figures = [_column_words(n) for n in names if n == "date" or pd.api.types.is_numeric_dtype(own[n].dtype)]
    return table(f"Exceptions of {model}, {part}", columns, zip(*columns.values(), strict=True), figures)


def _column_words(name: str) -> str:
    prefix, _, rest = name.partition("_")
    if prefix == "var" and rest.startswith("0."):
        return f"VaR {say.level(float(rest))}"
    if prefix == "exception" and "_0." in rest:
        kind, confidence = rest.rsplit("_", 1)
        return f"loss / VaR {say.level(float(confidence))}, {kind}"
    return f"{name} P&L" if name in PNL_KINDS else name.replace("_", " ")


def _log_cells(shown: pd.DataFrame, name: str) -> list[str]:
    ratio = name.replace("exception_", "ratio_", 1)
    if not name.startswith("exception_") or ratio not in shown:
        return [say.cell(v) for v in shown[name]]
    pairs = zip(shown[name], shown[ratio], strict=True)
    return [say.DASH if not hit else "yes" if given(r) is None else say.multiple(float(r)) for hit, r in pairs]


def remarks_table(remarks: pd.DataFrame, caption: str) -> Table | None:
    """Return data remarks as a table; None where there are none."""
    if remarks.empty:
        return None
    header = ("Rule", "Source", "Desk", "First", "Last", "Count", "What was seen")
    columns = ["rule", "source", "desk", "first", "last", "count", "text"]
    rows = [[say.cell(v) for v in row] for row in remarks[columns].itertuples(index=False)]
    return table(caption, header, rows, ["First", "Last", "Count"])
