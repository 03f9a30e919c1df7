"""A good study and changes that break it: what each error must say. Invented data."""

import io
from dataclasses import dataclass, field
from pathlib import Path

import pandas as pd
import pytest

from backtest.errors import TailmarkError
from backtest.reading.inputs import read_inputs
from tests.reference.invented_extract import invented, pnl_text, reported_text, written_study

STUDY = """
[review]
firm = "Lumber"
{review}
[data]
pnl = "pnl.csv"
reported = "reported.csv"
{data}
[data.columns]
{columns}
[forecast]
window = 50
"""
TABLE = invented()
FILES = {"pnl.csv": pnl_text(TABLE), "reported.csv": reported_text(TABLE)}


@dataclass(frozen=True)
class Broken:
    """A change to the good study, the error it must meet, and what its one line must say."""

    name: str
    error: type[TailmarkError]
    says: tuple[str, ...]
    files: dict[str, str | bytes] = field(default_factory=dict)
    review: str = ""
    data: str = ""
    columns: str = ""
    study: str = STUDY


def pnl_with(line: int, row: str) -> dict[str, str | bytes]:
    """Return the P&L file with one line (header is line 1) replaced."""
    return {"pnl.csv": with_line(FILES["pnl.csv"], line, row)}


def reported_with(line: int, row: str) -> dict[str, str | bytes]:
    """Return the reported file with one line replaced."""
    return {"reported.csv": with_line(FILES["reported.csv"], line, row)}


def with_line(text: str, line: int, row: str) -> str:
    lines = text.splitlines()
    lines[line - 1] = row
    return "\n".join(lines) + "\n"


def parquet(table: pd.DataFrame) -> bytes:
    buffer = io.BytesIO()
    table.to_parquet(buffer, index=False)
    return buffer.getvalue()


PARQUET_PNL = pd.DataFrame({"date": pd.to_datetime(TABLE["date"]), "desk": TABLE["desk"], "hypothetical": TABLE["hpl"]})
IN_PARQUET = STUDY.replace('pnl = "pnl.csv"', 'pnl = "pnl.parquet"')
DESKS = "desk,parent\nLumber,\nWool,Lumber\n"
SMALL = "date,desk,hypothetical\n2022-01-03,Lumber,1\n2022-01-04,Lumber,2\n"
ALONE = '[data]\npnl = "pnl.csv"\n'
NEGATIVE = TABLE.assign(var_99=-TABLE["var_99"])
ES_LOW = TABLE.assign(es_975=TABLE["var_975"] / 2)


def read_broken(folder: Path, case: Broken) -> object:
    """Write the broken study and its files, and read them."""
    study = (
        case.study.format(review=case.review, data=case.data, columns=case.columns) if "{" in case.study else case.study
    )
    return read_inputs(written_study(folder, study, {**FILES, **case.files}))


def assert_refused(folder: Path, case: Broken) -> None:
    """Check the error's class, and that its one line has the place, the value and the remedy that the case expects."""
    with pytest.raises(case.error) as caught:
        read_broken(folder, case)
    message = str(caught.value)
    assert type(caught.value) is case.error
    assert [part for part in case.says if part not in message] == [], message
    assert "\n" not in message
    assert caught.value.place
    assert caught.value.remedy
