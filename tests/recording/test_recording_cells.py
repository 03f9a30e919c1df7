import math

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st

from backtest.errors import RecordError
from backtest.recording.cells import column_kinds, guard, read_csv, unguard, write_csv


@pytest.mark.parametrize("start", ["=", "+", "-", "@", "\t", "\r"])
def test_a_text_that_a_spreadsheet_could_run_is_guarded(start):
    assert guard(f"{start}cmd()") == f"'{start}cmd()"


def test_a_text_that_begins_with_an_apostrophe_survives():
    assert unguard(guard("'=1")) == "'=1"
    assert unguard(guard("'")) == "'"


def test_harmless_text_is_written_as_it_is():
    assert guard("Rates = 5%") == "Rates = 5%"


@given(st.lists(st.text(), min_size=1, max_size=5))
def test_any_text_comes_back_exactly(tmp_path_factory, texts):
    path = tmp_path_factory.mktemp("cells") / "t.csv"
    kinds = write_csv(path, pd.DataFrame({"text": pd.Series(texts, dtype="str")}))
    assert list(read_csv(path, kinds)["text"]) == texts


@given(st.lists(st.floats(allow_infinity=False), min_size=1, max_size=5))
def test_any_number_comes_back_to_the_last_bit(tmp_path_factory, numbers):
    path = tmp_path_factory.mktemp("cells") / "t.csv"
    frame = pd.DataFrame({"value": pd.Series(numbers, dtype="float64")})
    back = read_csv(path, write_csv(path, frame))["value"].to_numpy()
    np.testing.assert_array_equal(back, frame["value"].to_numpy())


def test_no_written_cell_begins_like_a_formula(tmp_path):
    frame = pd.DataFrame({"=name": ["=1+1", "-5", "@x"], "number": [-1.5, 2.0, math.nan]})
    write_csv(tmp_path / "t.csv", frame)
    text = (tmp_path / "t.csv").read_text(encoding="utf-8")
    assert text == '"\'=name","number"\n"\'=1+1",-1.5\n"\'-5",2.0\n"\'@x",""\n'


def test_every_kind_of_column_is_told_apart():
    frame = pd.DataFrame(
        {
            "date": pd.to_datetime(["2025-01-02"]),
            "flag": [True],
            "whole": [3],
            "real": [0.5],
            "text": ["x"],
            "estimate": [None],
            "law": [None],
        }
    )
    kinds = ["date", "flag", "integer", "number", "text", "number", "text"]
    assert list(column_kinds(frame).values()) == kinds


def test_a_column_of_text_and_numbers_is_refused():
    with pytest.raises(RecordError, match="mixes text and other values"):
        column_kinds(pd.DataFrame({"note": ["x", 3]}))


def test_an_absent_date_comes_back_absent(tmp_path):
    frame = pd.DataFrame({"date": pd.to_datetime(["2025-01-02", None]).astype("datetime64[us]")})
    back = read_csv(tmp_path / "t.csv", write_csv(tmp_path / "t.csv", frame))
    pd.testing.assert_frame_equal(back, frame)


def test_a_cell_that_is_no_number_is_named_with_file_row_and_column(tmp_path):
    path = tmp_path / "t.csv"
    path.write_text('"level"\n0.99\n"high"\n', encoding="utf-8")
    with pytest.raises(RecordError, match=r"t\.csv, column level, row 3: a cell is no number, found 'high'"):
        read_csv(path, {"level": "number"})


def test_a_row_with_too_few_cells_is_refused(tmp_path):
    path = tmp_path / "t.csv"
    path.write_text('"a","b"\n"x"\n', encoding="utf-8")
    with pytest.raises(RecordError, match=r"t\.csv, row 2"):
        read_csv(path, {"a": "text", "b": "text"})
