"""Cells become dates, numbers and names, strictly: what does not parse is refused with its row, never a silent NaN."""

import datetime as dt
import unicodedata
from collections.abc import Sequence
from typing import NoReturn

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.compute as pc

from backtest.errors import DataError, near_miss
from backtest.reading.tables import Table
from backtest.records import DATE_DTYPE

LARGEST_AMOUNT = 1e150
"""Beyond it a number is no amount of money, and its square no number."""
_NUMBER = r"^[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?$"
_EPOCH = dt.datetime(1970, 1, 1)


def numbers(table: Table, column: str) -> np.ndarray:
    """Return a column as float64; an empty cell is NaN, "no value". Refuses anything else that is no finite number."""
    cells = table.columns[column]
    if _is_text(cells):
        values = _parsed_numbers(table, column, cells)
    elif pa.types.is_integer(cells.type) or pa.types.is_floating(cells.type) or pa.types.is_decimal(cells.type):
        values = np.asarray(cells.cast(pa.float64(), safe=False).to_numpy(), dtype=np.float64)
    elif pa.types.is_null(cells.type):
        values = np.full(table.rows, np.nan)
    else:
        refuse(table, 0, column, f"a column of type {cells.type} holds no numbers", remedy="Store numbers.")
    infinite = np.isinf(values)
    if infinite.any():
        row = int(infinite.argmax())
        refuse(table, row, column, "an infinite value", rule="values are finite", remedy="Correct or empty the cell.")
    rule = f"values lie between -{LARGEST_AMOUNT:g} and {LARGEST_AMOUNT:g}"
    far = np.abs(values) > LARGEST_AMOUNT
    refuse_first(table, far, column, "not an amount of money", rule=rule, remedy="Correct or empty the cell.")
    return values


def _parsed_numbers(table: Table, column: str, cells: pa.ChunkedArray) -> np.ndarray:
    text = pc.utf8_trim(pc.fill_null(cells, ""), characters=" ")
    decimal = table.layout.decimal
    pattern = _NUMBER if decimal == "." else _NUMBER.replace(r"\.", ",")
    empty = pc.equal(text, "")
    good = pc.or_(empty, pc.match_substring_regex(text, pattern)).to_numpy()
    if not good.all():
        remedy = f"Write numbers like 1234{decimal}5 or 1e5, without thousands separators; leave a missing value empty."
        rule = f"numbers have the declared decimal {decimal!r}"
        refuse(table, int(good.argmin()), column, "not a number", rule=rule, remedy=remedy)
    plain = text if decimal == "." else pc.replace_substring(text, ",", ".")
    values = pc.if_else(empty, pa.scalar(None, pa.string()), plain).cast(pa.float64())
    return np.array(values.to_numpy(), dtype=np.float64)


def dates(table: Table, column: str, *, required: bool = True) -> np.ndarray:
    """Return a column as datetime64[us] days. Text is read by the declared date format; a time of day is refused.

    An empty cell is NaT, refused where ``required``.
    """
    cells = table.columns[column]
    values = _parsed_dates(table, column, cells) if _is_text(cells) else _stored_dates(table, column, cells)
    missing = np.isnat(values)
    if required and missing.any():
        remedy = "Supply the date or take the row out."
        refuse(table, int(missing.argmax()), column, "the date is empty", rule="every row has a date", remedy=remedy)
    return values


def _parsed_dates(table: Table, column: str, cells: pa.ChunkedArray) -> np.ndarray:
    encoded = pc.utf8_trim(pc.fill_null(cells, ""), characters=" ").combine_chunks().dictionary_encode()
    texts, codes = encoded.dictionary.to_pylist(), encoded.indices.to_numpy()
    days = [_parse_day(text, table.layout.date_format) for text in texts]
    wrong = np.array([day is None for day in days], dtype=bool)
    if wrong.any():
        remedy = f"Write a day like {_EPOCH.strftime(table.layout.date_format)}, or correct data.date_format."
        rule = f"dates are written {table.layout.date_format}"
        refuse(table, int(wrong[codes].argmax()), column, "not a date", rule=rule, remedy=remedy)
    return np.asarray(np.array(days, dtype=DATE_DTYPE)[codes])


def _parse_day(text: str, date_format: str) -> dt.datetime | np.datetime64 | None:
    """Return the day, NaT where the cell is empty, None where it is no day or has a time of day."""
    if not text:
        return np.datetime64("NaT")
    try:
        day = dt.datetime.strptime(text, date_format)
    except ValueError:
        return None
    return day if day.tzinfo is None and day.time() == dt.time() else None


def _stored_dates(table: Table, column: str, cells: pa.ChunkedArray) -> np.ndarray:
    kind = cells.type
    if pa.types.is_null(kind):
        return np.full(table.rows, np.datetime64("NaT"), dtype=DATE_DTYPE)
    if not (pa.types.is_date(kind) or pa.types.is_timestamp(kind)) or getattr(kind, "tz", None):
        remedy = "Store dates without time zone (date32 or timestamp)."
        refuse(table, 0, column, f"a column of type {kind} holds no plain dates", remedy=remedy)
    values = np.asarray(cells.cast(pa.timestamp("us"), safe=False).to_numpy(), dtype=DATE_DTYPE)
    with_time = ~np.isnat(values) & (values != values.astype("datetime64[D]"))
    if with_time.any():
        row = int(with_time.argmax())
        refuse(table, row, column, "a date with a time of day", rule="dates are days", remedy="Store the day alone.")
    return values


def names(table: Table, column: str, *, required: bool = True) -> pd.Series:
    """Return a column as text, kept as written. Refuses control characters and, where ``required``, empty cells."""
    texts, codes = coded_names(table, column, required=required)
    return pd.Series(pd.array(texts, dtype="str").take(codes), name=column)


def coded_names(table: Table, column: str, *, required: bool = True) -> tuple[list[str], np.ndarray]:
    """Return the different names of a column and, for each row, which of them it has; checked like ``names``."""
    cells = table.columns[column]
    if not _is_text(cells):
        if not (pa.types.is_integer(cells.type) or pa.types.is_null(cells.type)):
            refuse(table, 0, column, f"a column of type {cells.type} holds no names", remedy="Store text.")
        cells = cells.cast(pa.string())
    encoded = pc.fill_null(cells, "").cast(pa.string()).combine_chunks().dictionary_encode()
    texts, codes = encoded.dictionary.to_pylist(), encoded.indices.to_numpy()
    _refuse_where(table, column, codes, [_has_control(t) for t in texts], "a control character in a name")
    if required:
        _refuse_where(table, column, codes, [not t.strip() for t in texts], "the name is empty")
    return texts, codes


def choices(table: Table, column: str, allowed: Sequence[str], *, required: bool = True) -> pd.Series:
    """Return a column of names from a fixed list; an unknown one is refused with the near miss."""
    values = names(table, column, required=required)
    unknown = ~values.isin([*allowed, *([] if required else [""])])
    if unknown.any():
        row = int(unknown.to_numpy().argmax())
        rule = "one of " + " | ".join(allowed)
        refuse(table, row, column, "unknown value", rule=rule, remedy=near_miss(values[row], allowed))
    return values


def refuse(table: Table, row: int, column: str, what: str, *, rule: str = "", remedy: str = "") -> NoReturn:
    """Raise DataError for a cell: its place, its text as written, the rule and the remedy. ``row`` counts from 0."""
    value = table.columns[column][row].as_py()
    raise DataError(what, rule=rule, value=value, place=table.place(row, column), remedy=remedy)


def refuse_first(table: Table, wrong: np.ndarray, column: str, what: str, *, rule: str = "", remedy: str = "") -> None:
    """Refuse the first row of the file (in file order) where ``wrong`` (bool[rows]) holds; do nothing if none."""
    if wrong.any():
        refuse(table, int(wrong.argmax()), column, what, rule=rule, remedy=remedy)


def _refuse_where(table: Table, column: str, codes: np.ndarray, wrong: list[bool], what: str) -> None:
    rule = "names are not empty and have no control characters (Unicode category Cc)"
    refuse_first(table, np.array(wrong, dtype=bool)[codes], column, what, rule=rule, remedy="Correct the name.")


def _has_control(text: str) -> bool:
    return any(unicodedata.category(character) == "Cc" for character in text)


def _is_text(cells: pa.ChunkedArray) -> bool:
    return bool(pa.types.is_string(cells.type) or pa.types.is_large_string(cells.type))
