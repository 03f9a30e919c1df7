"""A file becomes a table of cells as written, each row with its place in the file; nothing is interpreted here."""

import hashlib
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pyarrow as pa

from backtest.errors import DataError, near_miss
from backtest.reading.csv_text import parse_text
from backtest.reading.parquet import parse_parquet
from backtest.records import Source
from backtest.study_form import Data

PARQUET_SUFFIXES = (".parquet", ".pq")
SPREADSHEET_SUFFIXES = (".xls", ".xlsx", ".xlsm", ".ods")


@dataclass(frozen=True, slots=True)
class Layout:
    """How numbers, dates and characters are written in the files of a study."""

    separator: str = ","
    decimal: str = "."
    encoding: str = "utf-8"
    date_format: str = "%Y-%m-%d"


@dataclass(frozen=True, slots=True)
class Table:
    """The columns of one file, cell by cell as written.

    ``lines`` holds the line of each row in the file (header is line 1); in a Parquet file, which has no lines, the
    rows count from 1. ``unit`` is "line" or "row" accordingly.
    """

    role: str
    name: str
    columns: dict[str, pa.ChunkedArray]
    lines: np.ndarray
    unit: str
    layout: Layout
    sha256: str

    @property
    def rows(self) -> int:
        """The number of data rows."""
        return len(self.lines)

    @property
    def source(self) -> Source:
        """The record of this file for the manifest."""
        return Source(self.role, self.name, self.sha256, self.rows)

    def place(self, index: int, column: str = "") -> str:
        """Say where row ``index`` (from 0) stands in the file."""
        return place_of(self, int(self.lines[index]), column)


def place_of(table: Table, line: int, column: str = "") -> str:
    """Say where a line of a table stands: file, line (or row of a Parquet file) and column."""
    count = " (counted from 1)" if table.unit == "row" else ""
    return f"{table.name}, {table.unit} {line}{count}" + (f", column {column!r}" if column else "")


def layout_of(data: Data) -> Layout:
    """Return the layout that a study declares."""
    return Layout(data.separator, data.decimal, data.encoding, data.date_format)


def read_table(folder: Path, name: str, role: str, layout: Layout) -> Table:
    """Read one file of a study into a Table.

    Parquet is told by the suffix (.parquet, .pq); everything else is read as separated text by ``layout``. Raises
    DataError where the file cannot be read, has no rows, is ragged, cannot be decoded or repeats a column.
    """
    content = file_bytes(folder / name, name)
    unit, parse = _parser(name, layout)
    columns, lines = parse(content)
    if not len(lines):
        remedy = "Supply the rows, or take the file out of the study."
        raise DataError("the table has no rows", rule="a table has at least one row", place=name, remedy=remedy)
    return Table(role, name, columns, lines, unit, layout, hashlib.sha256(content).hexdigest())


Columns = tuple[dict[str, pa.ChunkedArray], np.ndarray]


def _parser(name: str, layout: Layout) -> tuple[str, Callable[[bytes], Columns]]:
    suffix = Path(name).suffix.lower()
    if suffix in SPREADSHEET_SUFFIXES:
        remedy = "Save the sheet as CSV or Parquet."
        raise DataError("a spreadsheet is not a table file", value=suffix, place=name, remedy=remedy)
    if suffix in PARQUET_SUFFIXES:
        return "row", lambda content: parse_parquet(content, name)
    return "line", lambda content: parse_text(content, name, layout.separator, layout.encoding)


def file_bytes(path: Path, name: str) -> bytes:
    """Read the bytes of a file; a file that cannot be read is a DataError that names the nearest file there is."""
    try:
        return path.read_bytes()
    except OSError as error:
        beside = [p.name for p in path.parent.iterdir() if p.is_file()] if path.parent.is_dir() else []
        remedy = near_miss(path.name, beside) if beside else "Check the path."
        raise DataError("the file cannot be read", value=error.strerror, place=name, remedy=remedy) from None
