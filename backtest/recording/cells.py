"""CSV tables that come back as they went out, and that no spreadsheet takes for formulas.

A text cell that begins with = + - @, tab or carriage return gets a leading apostrophe on writing; so does one that
begins with an apostrophe, so that removing one on reading is exact. Numbers are written in full (shortest text that
reads back to the same double), dates as ISO days, absent values as empty cells; absent text is read as empty text.
"""

import csv
import math
from collections.abc import Callable, Iterable
from pathlib import Path

import numpy as np
import pandas as pd

from backtest.errors import RecordError
from backtest.records import DATE_DTYPE

_GUARDED = tuple("=+-@\t\r'")
_NUMBER_COLUMNS = frozenset(
    (
        "level", "days", "exceptions", "statistic", "p_value", "estimate", "low", "high", "could_see", "window",
        "average_var", "average_change", "score", "score_change", "count", "value",
    )
)  # fmt: skip
"""Columns that hold numbers even where a table has none to show."""


def guard(text: str) -> str:
    """Return a text cell as it is written: guarded by an apostrophe where a spreadsheet could read a formula."""
    return "'" + text if text.startswith(_GUARDED) else text


def unguard(cell: str) -> str:
    """Return the text that ``guard`` was given."""
    return cell.removeprefix("'")


def column_kinds(frame: pd.DataFrame) -> dict[str, str]:
    """Say for each column whether it holds text, number, integer, flag or date.

    Raises RecordError where a column mixes text and numbers: it could not be read back as it was.
    """
    return {str(name): _kind(str(name), frame[name]) for name in frame.columns}


def _kind(name: str, column: pd.Series) -> str:
    if pd.api.types.is_bool_dtype(column.dtype) and not column.isna().any():
        return "flag"
    if pd.api.types.is_datetime64_any_dtype(column.dtype):
        return "date"
    if pd.api.types.is_numeric_dtype(column.dtype):
        whole = pd.api.types.is_integer_dtype(column.dtype) and not column.isna().any()
        return "integer" if whole else "number"
    values = [v for v in column if not _absent(v)]
    if all(isinstance(v, str) for v in values):
        return "number" if not values and name in _NUMBER_COLUMNS else "text"
    if all(isinstance(v, int | float | np.number) and not isinstance(v, bool) for v in values):
        return "number"
    raise RecordError("a column mixes text and other values and cannot be recorded", value=name)


def _absent(value: object) -> bool:
    return value is None or value is pd.NA or value is pd.NaT or (isinstance(value, float) and math.isnan(value))


def write_csv(path: Path, frame: pd.DataFrame) -> dict[str, str]:
    """Write a table as UTF-8 CSV and return the kinds of its columns, which ``read_csv`` needs."""
    kinds = column_kinds(frame)
    columns = [[_cell(v, kind) for v in frame[name]] for name, kind in kinds.items()]
    with path.open("w", encoding="utf-8", newline="") as file:
        writer = csv.writer(file, quoting=csv.QUOTE_NONNUMERIC, lineterminator="\n")
        writer.writerow([guard(name) for name in kinds])
        writer.writerows(zip(*columns, strict=True))
    return kinds


def _cell(value: object, kind: str) -> object:
    if _absent(value):
        return ""
    if kind == "text":
        return guard(str(value))
    if kind == "date":
        return np.datetime_as_string(np.datetime64(str(value)), unit="D")
    if kind == "flag":
        return str(bool(value))
    return int(str(value)) if kind == "integer" else float(str(value))


def read_csv(path: Path, kinds: dict[str, str]) -> pd.DataFrame:
    """Read a table written by ``write_csv``.

    Raises RecordError (file, row, column, value) where the columns are not the recorded ones or a cell does not read.
    """
    with path.open("r", encoding="utf-8", newline="") as file:
        rows = list(csv.reader(file))
    header = [unguard(name) for name in rows[0]] if rows else []
    if header != list(kinds):
        raise RecordError("columns are not the recorded ones", value=", ".join(header), place=path.name)
    broken = next((i for i, row in enumerate(rows) if len(row) != len(header)), None)
    if broken is not None:
        raise RecordError(
            "a row has too few or too many cells", value=len(rows[broken]), place=f"{path.name}, row {broken + 1}"
        )
    cells = list(zip(*rows[1:], strict=True)) or [()] * len(header)
    table = {n: _column(cells[i], kind, f"{path.name}, column {n}") for i, (n, kind) in enumerate(kinds.items())}
    return pd.DataFrame(table)


_READERS: dict[str, tuple[Callable[[str], object], str]] = {
    "text": (unguard, "str"),
    "number": (lambda cell: float(cell) if cell else math.nan, "float64"),
    "integer": (int, "int64"),
    "flag": (lambda cell: {"True": True, "False": False}[cell], "bool"),
    "date": (lambda cell: np.datetime64(cell or "NaT", "us"), DATE_DTYPE),
}


def _column(cells: Iterable[str], kind: str, place: str) -> pd.Series:
    read, dtype = _READERS[kind]
    values = []
    for row, cell in enumerate(cells, start=2):
        try:
            values.append(read(cell))
        except (ValueError, KeyError):
            raise RecordError(f"a cell is no {kind}", value=cell, place=f"{place}, row {row}") from None
    return pd.Series(np.array(values, dtype=dtype) if kind == "date" else values, dtype=dtype)
