"""The stated criteria and what the results say to them, as facts and a table."""

from collections.abc import Callable, Mapping

import pandas as pd

from backtest.reporting import wording as say
from backtest.reporting.book import Book, given, text
from backtest.reporting.effects import test_name
from backtest.reporting.prose import prose
from backtest.reporting.tables import Table, table

OUTCOME = "proposed outcome"
HOUSE_DEFAULTS = "house defaults, replace with yours"
NAMES = {
    "exceptions_zone": "zone of the dated rule",
    "var_multiple_at_most": "multiple of VaR that would have sufficed",
    "es_multiple_at_most": "multiple of ES that would have sufficed",
    "clustering": "when exceptions fall",
}
_HEADER = ("Criterion", "Limit", "Level", "P&L", "Days", "Found [95%]", "Answer", "Basis")


def outcome(book: Book, desk: str) -> str:
    """Return the proposed outcome of a desk with the criteria behind it, empty where none was drawn."""
    rows = _rows(book, desk)
    found = rows[rows["criterion"] == OUTCOME]
    if found.empty:
        return ""
    answer, names = str(found["answer"].iloc[0]), text(found["note"].iloc[0])
    because = say.listed([NAMES.get(name, name) for name in names.split(", ")]) if names else ""
    return f"{answer}: {because}" if because else answer


def whose(book: Book) -> str:
    """Say whose criteria were asked: those of the study, or the defaults."""
    stated = book.mapping("criteria")
    return HOUSE_DEFAULTS if stated.get("house_defaults") else "as stated in the study"


def criteria_table(book: Book, desk: str) -> Table | None:
    """Return what every criterion found on a desk, None where nothing was asked."""
    rows = _rows(book, desk)
    rows = rows[rows["criterion"] != OUTCOME]
    if rows.empty:
        return None
    found: dict[tuple[str, ...], list[str]] = {}
    for row in rows.to_dict("records"):
        *cells, basis = _cells({str(k): v for k, v in row.items()}, book)
        found.setdefault(tuple(cells), []).append(basis)
    shown = [(*same, "; ".join(dict.fromkeys(bases))) for same, bases in found.items()]
    minimum = book.mapping("criteria").get("minimum_days")
    note = "Sizes are compared by the end of their interval that favours the model; the outcome follows from this"
    note += " table alone, is proposed, and is nobody's opinion."
    note += f" Fewer than {say.plural(int(minimum), 'day')}: not judged." if minimum else ""
    return table(f"Criteria ({whose(book)})", _HEADER, shown, ("Level", "Days"), note)


def _rows(book: Book, desk: str) -> pd.DataFrame:
    rows = book.record.criteria
    return rows[rows["desk"] == desk]


def _cells(row: Mapping[str, object], book: Book) -> tuple[str, ...]:
    value, low, high, level = (given(row[c]) for c in ("value", "low", "high", "level"))
    name = str(row["criterion"])
    if name == "exceptions_zone":
        found = say.DASH if value is None else say.plural(int(value), "exception")
    elif value is None:
        found = say.DASH
    elif name == "clustering":
        found = f"{say.points(value)} points [{_end(low, say.points)} to {_end(high, say.points)}]"
    else:
        size: Callable[[float], str] = say.multiple if name.endswith("multiple_at_most") else say.number
        found = f"{size(value)} [{_end(low, size)} to {_end(high, size)}]"
    days = given(row["days"])
    limit = f"at most {row['limit']}" if name.endswith("at_most") else str(row["limit"])
    return (
        NAMES.get(name, name), limit, say.DASH if level is None else say.level(level), text(row["pnl_kind"]),
        say.DASH if days is None else say.whole(days), found, str(row["answer"]),
        test_name(text(row["note"])) if name == "clustering" else prose(text(row["note"])),
    )  # fmt: skip


def _end(value: float | None, size: Callable[[float], str]) -> str:
    return "no limit" if value is None else size(value)
