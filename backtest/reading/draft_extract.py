"""One file of an unknown extract, looked at: its layout, the columns it has, and which table of a study it is."""

import dataclasses
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from backtest.reading.cells import numbers
from backtest.reading.csv_text import decode
from backtest.reading.draft_layout import Finding, date_formats, find_decimal, find_encoding, find_separator
from backtest.reading.draft_names import RiskColumn, key_of, pnl_kind, risk_column
from backtest.reading.exposures import EXPOSURE_COLUMNS, FACTOR_COLUMNS
from backtest.reading.tables import PARQUET_SUFFIXES, Layout, Table, file_bytes, read_table
from backtest.reading.vectors import VECTOR_COLUMNS

POSITION_ROLES = {"vectors": VECTOR_COLUMNS, "factors": FACTOR_COLUMNS, "exposures": EXPOSURE_COLUMNS}
"""Tables of positions under past moves, known by columns of exactly these names."""
_NO_DATE = Finding("", "no column holds days", False)
SAMPLE = 4000
"""Distinct cells of a column that are looked at, evenly spread over those it has."""


@dataclass(frozen=True, slots=True)
class Extract:
    """A file with what was found in it. ``layout`` holds findings by key of [data] (empty for Parquet)."""

    table: Table
    layout: dict[str, Finding]
    keys: dict[str, Finding]
    pnl: dict[str, Finding]
    risk: tuple[RiskColumn, ...]

    @property
    def role(self) -> str:
        """Which table this is, by the columns found: P&L comes before forecasts, since it may hold them too."""
        header = set(self.table.columns)
        own = next((role for role, columns in POSITION_ROLES.items() if set(columns) <= header), None)
        if own is not None:
            return own
        if self.pnl:
            return "pnl"
        if self.risk:
            return "reported"
        if {"date", "desk", "kind"} <= header:
            return "changes"
        if "desk" in header and {"parent", "valid_from", "valid_to", "scope"} & header:
            return "desks"
        return "calendar" if list(self.keys) == ["date"] and len(header) == 1 else ""

    @property
    def column_a_desk(self) -> bool:
        """Whether the file looks like dates with one column of numbers a desk: a form that is not read."""
        others = [column for column in self.table.columns if column != str(self.keys.get("date", _NO_DATE).value)]
        unnamed = "date" in self.keys and not {"desk"} & set(self.keys) and not self.role
        return unnamed and len(others) > 1 and all(is_number(self.table, column) for column in others)


def look_at(path: Path, folder: Path) -> Extract:
    """Read a file and find out how it is written and what its columns are. Raises DataError where it is unreadable."""
    name = path.relative_to(folder).as_posix()
    content = file_bytes(path, name)
    if path.suffix.lower() in PARQUET_SUFFIXES:
        table = read_table(folder, name, "draft", Layout())
        return _with_columns(table, {}, _main_date(table, {}))
    encoding = find_encoding(content)
    text = decode(content, name, str(encoding.value))
    separator = find_separator(text, name)
    table = read_table(folder, name, "draft", Layout(separator=str(separator.value), encoding=str(encoding.value)))
    samples = {column: _sample(cells) for column, cells in table.columns.items()}
    decimal = find_decimal((cell for cells in samples.values() for cell in cells), str(separator.value))
    formats = {column: found for column, cells in samples.items() if (found := date_formats(cells))}
    date = _main_date(table, formats)
    layout = {"separator": separator, "decimal": decimal, "encoding": encoding}
    layout["date_format"] = _date_format(date, formats, name)
    final = Layout(str(separator.value), str(decimal.value), str(encoding.value), str(layout["date_format"].value))
    return _with_columns(dataclasses.replace(table, layout=final), layout, date)


def _sample(cells: pa.ChunkedArray) -> list[str]:
    distinct = [text for text in pc.unique(cells).to_pylist() if text]
    return distinct[:: max(1, len(distinct) // SAMPLE)]


def _main_date(table: Table, formats: dict[str, list[str]]) -> str | None:
    """Return the date column: one with a usual name among those that hold days, else the first that holds days."""
    stored = [c for c, cells in table.columns.items() if pa.types.is_temporal(cells.type)]
    days = [column for column in table.columns if column in formats or column in stored]
    days = [column for column in days if key_of(column) != "known_on"]
    usual = [column for column in days if key_of(column) == "date"]
    return next(iter([*usual, *days]), None)


def _date_format(date: str | None, formats: dict[str, list[str]], name: str) -> Finding:
    if date is None:
        return Finding("%Y-%m-%d", f"no column of {name} was recognised as dates", False)
    found = formats[date]
    why = f"all sampled cells of {date!r} are days written so"
    if len(found) > 1:
        why += f"; they could also be {' or '.join(found[1:])}, which has no fewer weekends"
    return Finding(found[0], why)


def _with_columns(table: Table, layout: dict[str, Finding], date: str | None) -> Extract:
    keys = {}
    if date is not None:
        keys["date"] = Finding(date, "its cells are days")
    for column in table.columns:
        key = key_of(column)
        if key is not None and key not in keys and key != "date":
            keys[key] = Finding(column, "by its name")
    pnl = _pnl(table)
    risk = tuple(found for column in table.columns if (found := risk_column(column)) and is_number(table, column))
    return Extract(table, layout, keys, pnl, risk)


def _pnl(table: Table) -> dict[str, Finding]:
    """Return the P&L columns by kind; a single P&L column of no named kind is taken for the hypothetical."""
    kinds: dict[str, Finding] = {}
    for column in table.columns:
        kind = pnl_kind(column)
        if kind is not None and kind not in kinds and is_number(table, column):
            kinds[kind] = Finding(column, "by its name")
    general = kinds.pop("any", None)
    if general is not None and "hypothetical" not in kinds:
        kinds["hypothetical"] = Finding(general.value, "the name does not say which P&L this is")
    return kinds


def is_number(table: Table, column: str) -> bool:
    """Say whether all cells of a sample are numbers in the table's layout and not all are empty."""
    cells = table.columns[column]
    if pa.types.is_string(cells.type) or pa.types.is_large_string(cells.type):
        decimal = table.layout.decimal
        number = r"^ *[+-]?(\d+X?\d*|X\d+)([eE][+-]?\d+)? *$".replace("X", "\\" + decimal)
        sample = pa.array(_sample(cells), pa.string())
        return bool(len(sample)) and bool(pc.all(pc.match_substring_regex(sample, number)).as_py())
    kind = cells.type
    numeric = pa.types.is_integer(kind) or pa.types.is_floating(kind) or pa.types.is_decimal(kind)
    return bool(numeric and np.isfinite(numbers(table, column)).any())
