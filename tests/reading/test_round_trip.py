"""Random tables, written in a random declared format, come back equal."""

import csv
import datetime as dt
import io
import json
import tempfile
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from backtest.reading.inputs import read_inputs
from backtest.records import Inputs
from tests.reference.invented_extract import written_study

Rows = list[tuple[dt.date, str, float | None, float]]
"""date, desk, hypothetical P&L (None: no value), VaR at 99%."""

dates = st.dates(dt.date(1990, 1, 1), dt.date(2068, 12, 31))
desks = st.text(st.characters(codec="cp1252", exclude_categories=["C"]), min_size=1, max_size=8).filter(str.strip)
values = st.floats(-1e12, 1e12, allow_nan=False).map(lambda v: v + 0.0)
tables = st.dictionaries(
    st.tuples(dates, desks), st.tuples(st.none() | values, st.floats(0, 1e12)), min_size=1, max_size=12
).map(lambda found: [(*key, *value) for key, value in found.items()])


@dataclass(frozen=True)
class Format:
    """How the file is written and declared."""

    separator: str
    decimal: str
    encoding: str
    date_format: str
    loss_positive: bool
    quoting: int


formats = st.builds(
    Format,
    separator=st.sampled_from([";", "\t", "|"]),
    decimal=st.sampled_from([".", ","]),
    encoding=st.sampled_from(["utf-8", "cp1252", "utf-16", "utf-8-sig"]),
    date_format=st.sampled_from(["%Y-%m-%d", "%d.%m.%Y", "%m/%d/%Y", "%Y%m%d", "%d-%b-%Y", "%d/%m/%y"]),
    loss_positive=st.booleans(),
    quoting=st.sampled_from([csv.QUOTE_MINIMAL, csv.QUOTE_ALL]),
)


def written(rows: Rows, form: Format) -> bytes:
    text = io.StringIO()
    writer = csv.writer(text, delimiter=form.separator, quoting=form.quoting, lineterminator="\n")
    writer.writerow(["date", "desk", "hypothetical", "var"])
    for date, desk, pnl, var in rows:
        signed = pnl if pnl is None or not form.loss_positive else -pnl
        numbers = ["" if x is None else repr(x).replace(".", form.decimal) for x in (signed, var)]
        writer.writerow([date.strftime(form.date_format), desk, *numbers])
    return text.getvalue().encode(form.encoding)


def read_back(rows: Rows, form: Format) -> Inputs:
    study = f"""
    [data]
    pnl = "extract.csv"
    reported = "extract.csv"
    separator = {json.dumps(form.separator)}
    decimal = "{form.decimal}"
    encoding = "{form.encoding}"
    date_format = "{form.date_format}"
    pnl_sign = "{"loss-positive" if form.loss_positive else "profit-positive"}"
    [data.columns]
    var = [{{ column = "var", level = 0.99 }}]
    """
    with tempfile.TemporaryDirectory() as folder:
        return read_inputs(written_study(Path(folder), study, {"extract.csv": written(rows, form)}))


@settings(max_examples=40, deadline=None)
@given(rows=tables, form=formats)
def test_every_value_comes_back_bit_for_bit(rows: Rows, form: Format) -> None:
    inputs = read_back(rows, form)
    expected = sorted(rows, key=lambda row: (row[1], row[0]))
    last = max(row[0] for row in rows)
    assert inputs.as_of == np.datetime64(last)
    assert inputs.pnl["desk"].tolist() == [row[1] for row in expected]
    assert [day.date() for day in inputs.pnl["date"]] == [row[0] for row in expected]
    np.testing.assert_array_equal(
        inputs.pnl["hypothetical"], [np.nan if row[2] is None else row[2] for row in expected]
    )
    np.testing.assert_array_equal(inputs.reported["var"], [row[3] for row in expected])
    assert inputs.calendar.tolist() == sorted({row[0] for row in rows})
