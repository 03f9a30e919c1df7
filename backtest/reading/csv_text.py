"""Separated text as declared: decoding, header, rows of equal length, and the line each row stands on."""

import codecs
import csv
import io
import unicodedata

import numpy as np
import pyarrow as pa
import pyarrow.csv

from backtest.errors import DataError, StudyError

BLOCK = 64 * 1024 * 1024
"""Bytes pyarrow parses at a time; also the longest row it can read."""


def parse_text(
    content: bytes, name: str, separator: str, encoding: str
) -> tuple[dict[str, pa.ChunkedArray], np.ndarray]:
    """Split text into columns of strings; return them with the line number of every row.

    A byte-order mark is skipped in UTF-8. Blank lines are skipped and counted. Raises DataError for undecodable
    bytes, a missing or repeated column name, a row of another length than the header, a quote never closed.
    """
    _check_separator(separator)
    text = _normal_line_ends(decode(content, name, encoding))
    header = _header(text, name, separator)
    body = text[text.find("\n") + 1 :] if "\n" in text else ""
    _check_quotes(text, name)
    if not body.strip("\n"):
        return {column: pa.chunked_array([], pa.string()) for column in header}, np.empty(0, dtype=np.int64)
    table = _split(body, name, separator, header)
    return dict(zip(header, table.columns, strict=True)), _row_lines(body, table.num_rows, name, separator)


def decode(content: bytes, name: str, encoding: str) -> str:
    """Decode bytes strictly; the error names the line and the bytes."""
    try:
        codec = codecs.lookup(encoding).name
        return content.decode("utf-8-sig" if codec == "utf-8" else codec)
    except LookupError:
        remedy = "Use a name such as 'utf-8' or 'cp1252'."
        raise StudyError("unknown encoding", value=encoding, place="data.encoding", remedy=remedy) from None
    except UnicodeDecodeError as error:
        line = content.count(b"\n", 0, error.start) + 1
        raise DataError(
            f"the bytes are not {encoding}",
            rule="files are decoded as declared, never guessed",
            value=content[error.start : error.start + 4].hex(" "),
            place=f"{name}, line {line}",
            remedy="Correct data.encoding in the study (often 'cp1252' for files from spreadsheets), or the file.",
        ) from None


def _check_separator(separator: str) -> None:
    if not separator.isascii() or separator in '"\r\n':
        remedy = "Use ',' or ';' or a tab."
        raise StudyError("not a usable separator", value=separator, place="data.separator", remedy=remedy)


def _normal_line_ends(text: str) -> str:
    return text.replace("\r\n", "\n").replace("\r", "\n") if "\r" in text else text


def _header(text: str, name: str, separator: str) -> list[str]:
    first = text.split("\n", 1)[0]
    if not first.strip():
        what = "the file is empty" if not text.strip() else "there is no header"
        remedy = "Put the column names in line 1 and the rows below."
        raise DataError(what, rule="line 1 holds the column names", place=f"{name}, line 1", remedy=remedy)
    header = next(csv.reader([first], delimiter=separator))
    check_header(header, f"{name}, line 1")
    return header


def check_header(header: list[str], place: str) -> None:
    """Refuse column names that are repeated or hold control characters."""
    odd = [column for column in header if any(unicodedata.category(c) == "Cc" for c in column)]
    if odd:
        rule = "names have no control characters (Unicode category Cc)"
        remedy = "Correct the header, or data.encoding."
        raise DataError("a control character in a column name", rule=rule, value=odd[0], place=place, remedy=remedy)
    repeated = sorted({column for column in header if header.count(column) > 1})
    if repeated:
        remedy = "Rename or remove one of them."
        raise DataError("a column name stands twice in the header", value=repeated[0], place=place, remedy=remedy)


def _check_quotes(text: str, name: str) -> None:
    if text.count('"') % 2 == 0:
        return
    line = next(i for i, row in enumerate(text.split("\n"), start=1) if row.count('"') % 2)
    remedy = 'Close it, or double a quote that is part of the text ("").'
    raise DataError("a quote is never closed", value='"', place=f"{name}, line {line}", remedy=remedy)


def _split(body: str, name: str, separator: str, header: list[str]) -> pa.Table:
    keys = [str(i) for i in range(len(header))]
    try:
        return pyarrow.csv.read_csv(
            io.BytesIO(body.encode()),
            read_options=pyarrow.csv.ReadOptions(column_names=keys, block_size=BLOCK),
            parse_options=pyarrow.csv.ParseOptions(delimiter=separator, newlines_in_values='"' in body),
            convert_options=pyarrow.csv.ConvertOptions(column_types=dict.fromkeys(keys, pa.string())),
        )
    except pa.ArrowInvalid:
        for line, row in _rows(body, name, separator):
            if len(row) != len(header):
                raise DataError(
                    f"the row has {len(row)} cells, the header has {len(header)}",
                    rule="every row is as long as the header",
                    value=separator.join(row),
                    place=f"{name}, line {line}",
                    remedy="Check data.separator and decimal commas in the study, or mend the row.",
                ) from None
        raise DataError("the text cannot be split into columns", place=name, remedy="Check data.separator.") from None


def _row_lines(body: str, rows: int, name: str, separator: str) -> np.ndarray:
    """Return the line of each row: the plain count where no line is blank and no cell holds a line break."""
    count = body.count("\n") + (not body.endswith("\n"))
    if count == rows:
        return np.arange(2, rows + 2)
    return np.array([line for line, _ in _rows(body, name, separator)], dtype=np.int64)


def _rows(body: str, name: str, separator: str) -> list[tuple[int, list[str]]]:
    """Return (first line in the file, cells) of every row that is not blank: the slow path."""
    reader = csv.reader(io.StringIO(body, newline=""), delimiter=separator, strict=True)
    rows, line = [], 2
    try:
        for cells in reader:
            if cells:
                rows.append((line, cells))
            line = reader.line_num + 2
    except csv.Error as error:
        remedy = "Mend the quoting of this row."
        raise DataError(f"the row cannot be split: {error}", place=f"{name}, line {line}", remedy=remedy) from None
    return rows
