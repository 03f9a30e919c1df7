"""How an unknown extract is written: encoding, separator, decimal, date format, each with the reason."""

import codecs
import csv
import datetime as dt
import re
from collections.abc import Iterable
from dataclasses import dataclass

from backtest.errors import DataError

SEPARATORS = (";", "\t", "|", ",")
DATE_FORMATS = (
    "%Y-%m-%d", "%d.%m.%Y", "%d/%m/%Y", "%m/%d/%Y", "%Y/%m/%d", "%d-%m-%Y", "%m-%d-%Y", "%Y%m%d", "%d-%b-%Y",
    "%d %b %Y", "%d.%m.%y", "%d/%m/%y", "%m/%d/%y", "%Y-%m-%d %H:%M:%S", "%Y-%m-%dT%H:%M:%S",
)  # fmt: skip
SAMPLE_LINES = 50


@dataclass(frozen=True, slots=True)
class Finding:
    """A value for the study and why; ``sure`` is False where it is offered as a line to complete."""

    value: object
    why: str
    sure: bool = True


def find_encoding(content: bytes) -> Finding:
    """Return the encoding in which all bytes can be read."""
    if content.startswith((codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE)):
        return Finding("utf-16", "the file begins with a UTF-16 byte-order mark")
    try:
        content.decode("utf-8")
    except UnicodeDecodeError as error:
        at = f"byte {content[error.start]:#04x} at {error.start}"
        return Finding("cp1252" if _decodes(content, "cp1252") else "latin-1", f"not UTF-8 ({at}); check accents")
    return Finding("utf-8", "all bytes are ASCII" if content.isascii() else "all bytes decode as UTF-8")


def _decodes(content: bytes, encoding: str) -> bool:
    try:
        content.decode(encoding)
    except UnicodeDecodeError:
        return False
    return True


def find_separator(text: str, name: str) -> Finding:
    """Return the separator that cuts the header and the first rows into the same number of cells, the most of them."""
    lines = [line for line in text.splitlines()[: SAMPLE_LINES + 1] if line.strip()]
    if len(lines) < 2:
        raise DataError("the table has no rows", place=name, remedy="Supply a header and rows.")
    best, width = ",", 1
    for separator in SEPARATORS:
        widths = {len(row) for row in csv.reader(lines, delimiter=separator)}
        if len(widths) == 1 and max(widths) > width:
            best, width = separator, max(widths)
    if width == 1:
        return Finding(best, f"no separator found in {name}: read as one column")
    return Finding(best, f"header and first {len(lines) - 1} rows of {name} have {width} cells each")


def find_decimal(cells: Iterable[str], separator: str) -> Finding:
    """Return the decimal mark of number-like cells, told by those that have exactly one of '.' and ','."""
    comma, point, thousands = 0, 0, 0
    for cell in cells:
        comma += bool(re.fullmatch(r"[+-]?\d*,\d+([eE][+-]?\d+)?", cell))
        point += bool(re.fullmatch(r"[+-]?\d*\.\d+([eE][+-]?\d+)?", cell))
        thousands += bool(re.fullmatch(r"[+-]?\d{1,3}([.,]\d{3})+([.,]\d+)?", cell))
    marked = f"{comma} sampled numbers have a comma, {point} a point"
    if comma + point and thousands == comma + point:
        return Finding(
            "," if comma > point else ".", marked + ", all before three digits: thousands separators?", False
        )
    if comma and separator == ",":
        return Finding(".", marked + "; the comma cannot separate both: write the file again with semicolons", False)
    if not comma and not point:
        return Finding(".", "no sampled number has decimals", False)
    return Finding("," if comma > point else ".", marked)


def date_formats(cells: Iterable[str]) -> list[str]:
    """Return the formats in which every cell is a day, the likeliest first: the fewest weekends, then as listed."""
    cells = sorted(set(cells))
    if not cells:
        return []
    weekends = {}
    for date_format in DATE_FORMATS:
        if _day(cells[0], date_format) is None:
            continue
        days = [day for cell in cells if (day := _day(cell, date_format)) is not None]
        if len(days) == len(cells):
            weekends[date_format] = sum(day.weekday() >= 5 for day in days)
    return sorted(weekends, key=lambda f: weekends[f])


def _day(cell: str, date_format: str) -> dt.datetime | None:
    try:
        day = dt.datetime.strptime(cell, date_format)
    except ValueError:
        return None
    return day if day.time() == dt.time() and 1950 <= day.year < 2100 else None
