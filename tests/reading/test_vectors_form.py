"""Vectors files: read value by value in every declared form; what cannot be right is refused with its place."""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from backtest.errors import DataError, StudyError
from backtest.reading.inputs import read_inputs
from backtest.records import Inputs
from tests.reference.broken_inputs import FILES, STUDY, TABLE, Broken, assert_refused, parquet, with_line
from tests.reference.invented_extract import business_days, written_study
from tests.reference.invented_vectors import long_vectors

DAYS = [str(day) for day in business_days(60)]
NAMED = 'vectors = "vectors.csv"'
LEARN = STUDY + 'learn_from = "vectors"\n'


def lumber() -> pd.Series:
    rows = TABLE[TABLE["desk"] == "Lumber"]
    return pd.Series(rows["hpl"].to_numpy(), index=pd.DatetimeIndex(rows["date"]))


def vectors(first: int = 55, last: int = 60, scenarios: int = 50) -> pd.DataFrame:
    """Return the vectors of Lumber for some of its days; line 2 of the file is DAYS[55] under the move of DAYS[5]."""
    return long_vectors(lumber(), range(first, last), scenarios, desk="Lumber")


TEXT = vectors().to_csv(index=False)


def read(folder: Path, table: pd.DataFrame | bytes, study: str = LEARN, data: str = NAMED) -> Inputs:
    content = table if isinstance(table, bytes) else table.to_csv(index=False)
    name = "vectors.parquet" if isinstance(table, bytes) else "vectors.csv"
    text = study.format(review="", data=data.replace("vectors.csv", name), columns="")
    return read_inputs(written_study(folder, text, {**FILES, name: content}))


def said(inputs: Inputs, rule: str) -> list[tuple[str, int, str, str]]:
    return [(r.desk, r.count, r.first, r.last) for r in inputs.remarks if r.rule == rule]


def assert_holds(inputs: Inputs, table: pd.DataFrame) -> None:
    own, rows = inputs.vectors["Lumber"], table.sort_values(["date", "scenario"])
    dates = [pd.Timestamp(day) for day in own.days]
    assert dates == sorted(table["date"].unique())
    for i, (_, mine) in enumerate(rows.groupby("date")):
        span = slice(own.begins[i], own.ends[i])
        np.testing.assert_array_equal(own.pnl[span], mine["pnl"])
        np.testing.assert_array_equal(own.scenarios[span], mine["scenario"].to_numpy().astype("datetime64[D]"))


def test_csv_is_read_value_by_value_whatever_the_order_of_rows(tmp_path):
    inputs = read(tmp_path, vectors().sample(frac=1, random_state=1))
    assert_holds(inputs, vectors())
    assert [s.role for s in inputs.sources] == ["pnl", "reported", "vectors"]
    assert inputs.sources[-1].rows == len(vectors())


def test_parquet_is_read_as_csv_is(tmp_path):
    assert_holds(read(tmp_path, parquet(vectors().astype({"desk": "category"}))), vectors())


def test_losses_in_the_file_become_profits(tmp_path):
    losses = vectors().assign(pnl=lambda t: -t["pnl"])
    inputs = read(tmp_path, losses, data=NAMED + '\npnl_sign = "loss-positive"')
    assert_holds(inputs, vectors())


def test_as_of_dates_move_to_the_next_business_day_and_may_use_the_move_of_that_evening(tmp_path):
    table = vectors(55, 59)
    target = dict(zip(pd.to_datetime(DAYS[55:59]), pd.to_datetime(DAYS[54:58]), strict=True))
    inputs = read(tmp_path, table.assign(date=table["date"].map(target)), data=NAMED + '\nvar_date = "as-of"')
    assert_holds(inputs, table)
    assert said(inputs, "old-scenarios") == []


def test_clean_vectors_raise_no_remark_on_their_desk(tmp_path):
    rules = {r.rule for r in read(tmp_path, vectors()).remarks if r.source == "vectors.csv"}
    assert rules == {"no-vectors"}


def test_a_desk_without_vectors_is_said_to_have_no_forecast(tmp_path):
    inputs = read(tmp_path, vectors())
    assert said(inputs, "no-vectors") == [("Wool", 0, DAYS[0], DAYS[-1])]
    assert "no forecast of ours" in next(r.text for r in inputs.remarks if r.rule == "no-vectors")


def test_ragged_vectors_are_counted(tmp_path):
    inputs = read(tmp_path, pd.concat([vectors(54, 58, 50), vectors(58, 60, 49)]))
    assert said(inputs, "short-vectors") == [("Lumber", 2, DAYS[58], DAYS[59])]
    text = next(r.text for r in inputs.remarks if r.rule == "short-vectors")
    assert "fewer than 50 scenarios: 2 of 6, the shortest 49" in text


def test_days_without_a_vector_are_counted_from_the_first_with_one(tmp_path):
    table = vectors(54, 59)
    inputs = read(tmp_path, table[table["date"] != DAYS[56]])
    assert said(inputs, "missing-vectors") == [("Lumber", 2, DAYS[56], DAYS[59])]


def test_old_scenarios_are_counted(tmp_path):
    table = vectors()
    old = (table["date"] == DAYS[57]) & (table["scenario"] == DAYS[56])
    assert said(read(tmp_path, table[~old]), "old-scenarios") == [("Lumber", 1, DAYS[57], DAYS[57])]


def test_vectors_of_no_business_day_are_left_out_with_a_remark(tmp_path):
    table = vectors()
    saturday = pd.Timestamp(DAYS[59]) + pd.Timedelta(days=1)
    inputs = read(tmp_path, pd.concat([table, table[table["date"] == DAYS[59]].assign(date=saturday)]))
    assert_holds(inputs, table)
    assert said(inputs, "vectors-off-calendar") == [("Lumber", 1, str(saturday.date()), str(saturday.date()))]


def test_vectors_after_the_cut_off_are_left_out_with_a_remark(tmp_path):
    study = LEARN.replace("{review}", f"as_of = {DAYS[57]}")
    inputs = read(tmp_path, vectors(), study)
    assert_holds(inputs, vectors(55, 58))
    assert ("Lumber", 2, DAYS[58], DAYS[59]) in said(inputs, "after-cut-off")


def test_vectors_that_nothing_learns_from_are_read_and_remarked_on(tmp_path):
    inputs = read(tmp_path, vectors(), STUDY)
    assert_holds(inputs, vectors())
    assert said(inputs, "vectors-unused") == [("", 5, "", "")]
    assert said(inputs, "no-vectors") == []


def row(day: int, scenario: int, desk: str = "Lumber", pnl: str = "1") -> str:
    return f"{DAYS[day]},{desk},{DAYS[scenario]},{pnl}"


def line(number: int, text: str) -> dict[str, str | bytes]:
    return {"vectors.csv": with_line(TEXT, number, text)}


CASES = [
    Broken("a missing column", DataError, ("vectors.csv", "'scenario'"), line(1, "date,desk,scenarios,pnl")),
    Broken("an unknown desk", DataError, ("line 7", "'Lumbr'", "Did you mean 'Lumber'"), line(7, row(55, 10, "Lumbr"))),
    Broken(
        "a control character", DataError, ("line 7, column 'desk'", r"Lum\x07ber"), line(7, row(55, 10, "Lum\aber"))
    ),
    Broken(
        "no number", DataError, ("line 7, column 'pnl'", "'1.5e'", "not a number"), line(7, row(55, 10, pnl="1.5e"))
    ),
    Broken("an infinite value", DataError, ("line 7, column 'pnl'", "infinite"), line(7, row(55, 10, pnl="1e999"))),
    Broken("an empty value", DataError, ("line 7, column 'pnl'", "empty", "Supply"), line(7, row(55, 10, pnl=""))),
    Broken(
        "no date", DataError, ("line 7, column 'scenario'", "not a date"), line(7, f"{DAYS[55]},Lumber,2022-13-01,1")
    ),
    Broken(
        "a scenario on the target",
        DataError,
        ("line 7, column 'scenario'", DAYS[55], "before the date, which is the target day", "data.var_date"),
        line(7, row(55, 55)),
    ),
    Broken("a scenario after the target", DataError, ("line 7", DAYS[57], "had not happened"), line(7, row(55, 57))),
    Broken(
        "a scenario after the day the positions stood",
        DataError,
        ("line 7", DAYS[56], "not after the date, which is the day the positions stood"),
        line(7, row(55, 56)),
        data=NAMED + '\nvar_date = "as-of"',
    ),
    Broken(
        "the same scenario twice",
        DataError,
        ("line 7, column 'scenario'", f"{DAYS[55]}, Lumber, {DAYS[5]}", "twice"),
        line(7, row(55, 5)),
    ),
    Broken("no rows", DataError, ("vectors.csv", "no rows"), {"vectors.csv": "date,desk,scenario,pnl\n"}),
    Broken(
        "nothing to learn from",
        StudyError,
        ("study.toml, forecast.learn_from", "'vectors'", "data.vectors"),
        study=LEARN.replace("{data}", ""),
    ),
    Broken(
        "no vector as long as the window",
        DataError,
        ("vectors.csv", "50 scenarios, windows 60", "Shorten forecast.window"),
        study=LEARN.replace("window = 50", "window = 60").replace('reported = "reported.csv"', ""),
    ),
]


@pytest.mark.parametrize("case", CASES, ids=lambda case: case.name.replace(" ", "-"))
def test_broken_vectors_are_refused_with_place_value_and_remedy(tmp_path: Path, case: Broken) -> None:
    data = case.data or NAMED
    files = {"vectors.csv": TEXT, **case.files}
    assert_refused(tmp_path, Broken(case.name, case.error, case.says, files, data=data, study=case.study))
