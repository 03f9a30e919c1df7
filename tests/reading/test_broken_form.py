"""Files that cannot be read as they are written are refused with place, value and remedy; nothing is half-read."""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from backtest.errors import DataError, StudyError
from backtest.reading.inputs import read_inputs
from tests.reference.broken_inputs import (
    ALONE,
    FILES,
    IN_PARQUET,
    PARQUET_PNL,
    STUDY,
    Broken,
    assert_refused,
    parquet,
    pnl_with,
)
from tests.reference.invented_extract import written_study

CASES = [
    Broken(
        "a missing file",
        DataError,
        ("prices.csv", "cannot be read", "No such file", "Known: "),
        data='calendar = "prices.csv"',
    ),
    Broken("an empty file", DataError, ("pnl.csv, line 1", "empty", "column names"), {"pnl.csv": ""}),
    Broken("a header only", DataError, ("pnl.csv", "no rows", "Supply"), {"pnl.csv": "date,desk,hypothetical\n"}),
    Broken(
        "a spreadsheet",
        DataError,
        ("pnl.xlsx", "spreadsheet", "Save the sheet"),
        {"pnl.xlsx": b"PK"},
        study=STUDY.replace('pnl = "pnl.csv"', 'pnl = "pnl.xlsx"'),
    ),
    Broken(
        "no Parquet inside",
        DataError,
        ("pnl.parquet", "not readable Parquet", "Write"),
        {"pnl.parquet": b"date"},
        study=IN_PARQUET,
    ),
    Broken(
        "undecodable bytes",
        DataError,
        ("pnl.csv, line 2", "e9", "cp1252"),
        {"pnl.csv": b"date,desk,hypothetical\n2022-01-03,Caf\xe9,1\n"},
    ),
    Broken("an unknown encoding", StudyError, ("data.encoding", "'utf-9'", "cp1252"), data='encoding = "utf-9"'),
    Broken(
        "a ragged row",
        DataError,
        ("pnl.csv, line 4", "4 cells", "2022-01-05,Lumber,1,5", "separator"),
        pnl_with(4, "2022-01-05,Lumber,1,5"),
    ),
    Broken("a short row", DataError, ("pnl.csv, line 4", "2 cells", "mend"), pnl_with(4, "2022-01-05,Lumber")),
    Broken(
        "a quote never closed", DataError, ("pnl.csv, line 4", "quote", "Close it"), pnl_with(4, '2022-01-05,"Lumber,1')
    ),
    Broken("a column twice", DataError, ("pnl.csv, line 1", "'desk'", "Rename"), pnl_with(1, "date,desk,desk")),
    Broken(
        "another separator",
        DataError,
        ("pnl.csv", "column is missing", "'date'", "data.columns.date"),
        {"pnl.csv": FILES["pnl.csv"].replace(",", ";")},
    ),
    Broken(
        "a date that is none",
        DataError,
        ("pnl.csv, line 5, column 'date'", "'2022-02-30'", "data.date_format"),
        pnl_with(5, "2022-02-30,Lumber,1"),
    ),
    Broken(
        "a date in another format", DataError, ("line 5", "'07.01.2022'", "2022"), pnl_with(5, "07.01.2022,Lumber,1")
    ),
    Broken("an empty date", DataError, ("line 5, column 'date'", "empty", "Supply the date"), pnl_with(5, ",Lumber,1")),
    Broken(
        "a thousands separator",
        DataError,
        ("line 5, column 'hypothetical'", "'1 234.5'", "thousands"),
        pnl_with(5, "2022-01-06,Lumber,1 234.5"),
    ),
    Broken(
        "text for a number",
        DataError,
        ("line 5, column 'hypothetical'", "'n/a'", "leave a missing value empty"),
        pnl_with(5, "2022-01-06,Lumber,n/a"),
    ),
    Broken(
        "nan for a number",
        DataError,
        ("line 5, column 'hypothetical'", "'nan'", "empty"),
        pnl_with(5, "2022-01-06,Lumber,nan"),
    ),
    Broken(
        "inf for a number",
        DataError,
        ("line 5, column 'hypothetical'", "'-inf'"),
        pnl_with(5, "2022-01-06,Lumber,-inf"),
    ),
    Broken(
        "a number beyond all bounds",
        DataError,
        ("line 5", "infinite", "'1e999'", "Correct"),
        pnl_with(5, "2022-01-06,Lumber,1e999"),
    ),
    Broken(
        "a number beyond all money",
        DataError,
        ("line 5, column 'hypothetical'", "not an amount of money", "-1e+160", "Correct"),
        pnl_with(5, "2022-01-06,Lumber,-1e+160"),
    ),
    Broken(
        "an infinite value in Parquet",
        DataError,
        ("pnl.parquet, row 4 (counted from 1), column 'hypothetical'", "inf", "Correct"),
        {"pnl.parquet": parquet(PARQUET_PNL.assign(hypothetical=np.where(PARQUET_PNL.index == 3, np.inf, 1.0)))},
        study=IN_PARQUET,
    ),
    Broken(
        "a time of day in Parquet",
        DataError,
        ("row 1 (counted from 1), column 'date'", "18:00", "Store the day"),
        {"pnl.parquet": parquet(PARQUET_PNL.assign(date=PARQUET_PNL["date"] + pd.Timedelta(hours=18)))},
        study=IN_PARQUET,
    ),
    Broken(
        "a time zone in Parquet",
        DataError,
        ("column 'date'", "UTC", "without time zone"),
        {"pnl.parquet": parquet(PARQUET_PNL.assign(date=PARQUET_PNL["date"].dt.tz_localize("UTC")))},
        study=IN_PARQUET,
    ),
    Broken(
        "a control character in a desk",
        DataError,
        ("line 5, column 'desk'", r"Lum\x07ber", "Correct the name"),
        pnl_with(5, "2022-01-06,Lum\aber,1"),
    ),
    Broken(
        "a control character in the header",
        DataError,
        ("line 1", r"de\x07sk", "header"),
        pnl_with(1, "date,de\ask,hypothetical"),
    ),
    Broken("an empty desk", DataError, ("line 5, column 'desk'", "empty", "Correct"), pnl_with(5, "2022-01-06,,1")),
]


@pytest.mark.parametrize("case", CASES, ids=lambda case: case.name.replace(" ", "-"))
def test_broken_form_is_refused_with_place_value_and_remedy(tmp_path: Path, case: Broken) -> None:
    assert_refused(tmp_path, case)


def test_the_first_bad_row_of_the_file_is_named_whatever_the_order_of_desks(tmp_path: Path) -> None:
    rows = "date,desk,hypothetical\n2022-01-04,Wool,x\n2022-01-03,Lumber,y\n"
    with pytest.raises(DataError, match=r"line 2, column 'hypothetical'.*'x'"):
        read_inputs(written_study(tmp_path, ALONE, {"pnl.csv": rows}))


def test_lines_are_counted_through_blank_lines_and_line_breaks_in_cells(tmp_path: Path) -> None:
    rows = 'date,desk,hypothetical,note\n2022-01-03,Wool,1,"two\nlines"\n\n2022-01-04,Wool,x,\n'
    with pytest.raises(DataError, match=r"pnl.csv, line 5, column 'hypothetical'"):
        read_inputs(written_study(tmp_path, ALONE, {"pnl.csv": rows}))
