"""Vectors of linear books from factor returns and exposures: worked by hand, refused where something is missing."""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from backtest.errors import DataError, StudyError
from backtest.reading.inputs import read_inputs
from backtest.records import DeskVectors, Inputs
from tests.reference.broken_inputs import FILES, STUDY, Broken, assert_refused, with_line
from tests.reference.invented_extract import business_days, written_study

DAYS = [str(day) for day in business_days(60)]
NAMED = 'factors = "factors.csv"\nexposures = "exposures.csv"'
FACTORS = "\n".join(
    [
        "date,factor,return",
        *(f"{DAYS[i]},oak,{value}" for i, value in enumerate((0.01, -0.02, 0.03, -0.04))),
        *(f"{DAYS[i]},ash,{value}" for i, value in enumerate((0.5, 0.25, -0.5), start=1)),
        "",
    ]
)
"""Oak moves from DAYS[0] on, ash from DAYS[1] on; the last move is that of DAYS[3]."""
EXPOSURES = f"""date,desk,factor,amount
{DAYS[3]},Lumber,oak,100
{DAYS[3]},Lumber,ash,-10
{DAYS[4]},Lumber,oak,200
{DAYS[4]},Wool,ash,4
{DAYS[4]},Wool,oak,0
"""


def read(folder: Path, factors: str = FACTORS, exposures: str = EXPOSURES, data: str = NAMED) -> Inputs:
    files = {**FILES, "factors.csv": factors, "exposures.csv": exposures}
    return read_inputs(written_study(folder, STUDY.format(review="", data=data, columns=""), files))


def vector(own: DeskVectors, day: str) -> dict[str, float]:
    i = own.days.tolist().index(pd.Timestamp(day).date())
    span = slice(own.begins[i], own.ends[i])
    return dict(zip(own.scenarios[span].astype(str), own.pnl[span], strict=True))


def test_a_scenario_is_the_sum_of_amount_times_return_by_hand(tmp_path):
    found = read(tmp_path).vectors
    assert vector(found["Lumber"], DAYS[3]) == pytest.approx({DAYS[1]: -2 - 5, DAYS[2]: 3 - 2.5})
    expected = {DAYS[0]: 2, DAYS[1]: -4, DAYS[2]: 6, DAYS[3]: -8}
    assert vector(found["Lumber"], DAYS[4]) == pytest.approx(expected)
    assert vector(found["Wool"], DAYS[4]) == {DAYS[1]: 2, DAYS[2]: 1, DAYS[3]: -2}


def test_as_of_exposures_use_the_move_of_their_own_day_for_the_next(tmp_path):
    found = read(tmp_path, data=NAMED + '\nvar_date = "as-of"').vectors["Lumber"]
    assert found.days.astype(str).tolist() == DAYS[4:6]
    assert vector(found, DAYS[4]) == pytest.approx({DAYS[1]: -7, DAYS[2]: 0.5, DAYS[3]: -4 + 5})


def test_later_days_in_the_file_do_not_move_a_vector_by_a_bit(tmp_path):
    rng = np.random.default_rng(2)
    names = [f"factor {i}" for i in range(40)]
    moves = pd.DataFrame(rng.normal(size=(59, 40)), index=DAYS[:59], columns=names)
    factors = moves.rename_axis("date").reset_index().melt("date", var_name="factor", value_name="return")
    held = pd.DataFrame({"date": np.repeat(DAYS[50:60], 40), "desk": "Lumber", "factor": names * 10})
    held["amount"] = rng.normal(size=len(held))
    whole, part = tmp_path / "whole", tmp_path / "part"
    whole.mkdir()
    part.mkdir()
    every = read(whole, factors.to_csv(index=False), held.to_csv(index=False)).vectors["Lumber"]
    fewer = read(
        part,
        factors[factors["date"] < DAYS[51]].sample(frac=1, random_state=1).to_csv(index=False),
        held[held["date"] == DAYS[51]].to_csv(index=False),
    ).vectors["Lumber"]
    assert vector(every, DAYS[51]) == vector(fewer, DAYS[51])
    by_matrix = moves.to_numpy()[:51] @ held.loc[held["date"] == DAYS[51], "amount"].to_numpy()
    np.testing.assert_allclose(fewer.pnl, by_matrix, atol=1e-12)


def test_a_factor_that_ended_is_missed_only_where_it_is_held(tmp_path):
    ended = FACTORS.replace(f"{DAYS[3]},ash,-0.5\n", "")
    zero = EXPOSURES.replace(f"{DAYS[4]},Wool,ash,4", f"{DAYS[4]},Wool,ash,0")
    found = read(tmp_path, ended, zero).vectors
    assert list(vector(found["Wool"], DAYS[4]).values()) == [0, 0, 0, 0]
    assert vector(found["Lumber"], DAYS[3]) == pytest.approx({DAYS[1]: -7, DAYS[2]: 0.5})


def factors_with(line: int, text: str) -> dict[str, str | bytes]:
    return {"factors.csv": with_line(FACTORS, line, text)}


def exposures_with(line: int, text: str) -> dict[str, str | bytes]:
    return {"exposures.csv": with_line(EXPOSURES, line, text)}


CASES = [
    Broken(
        "an unknown factor",
        DataError,
        ("exposures.csv, line 3, column 'factor'", "'ahs'", "Did you mean 'ash'"),
        exposures_with(3, f"{DAYS[3]},Lumber,ahs,1"),
    ),
    Broken("an unknown desk", DataError, ("line 3, column 'desk'", "'Wol'"), exposures_with(3, f"{DAYS[3]},Wol,ash,1")),
    Broken(
        "an empty amount",
        DataError,
        ("exposures.csv, line 3, column 'amount'", "empty"),
        exposures_with(3, f"{DAYS[3]},Lumber,ash,"),
    ),
    Broken(
        "an exposure twice", DataError, ("exposures.csv, line 3", "twice"), exposures_with(3, f"{DAYS[3]},Lumber,oak,1")
    ),
    Broken(
        "an empty return",
        DataError,
        ("factors.csv, line 3, column 'return'", "empty"),
        factors_with(3, f"{DAYS[1]},oak,"),
    ),
    Broken("a return twice", DataError, ("factors.csv, line 3", "twice"), factors_with(3, f"{DAYS[0]},oak,0.1")),
    Broken("no return column", DataError, ("factors.csv", "'return'"), factors_with(1, "date,factor,move")),
    Broken(
        "a missing return",
        DataError,
        (
            "exposures.csv, line 3, column 'factor'",
            f"'ash' has no return on {DAYS[2]}, a scenario of {DAYS[3]}",
            "Supply the return",
        ),
        factors_with(7, f"{DAYS[5]},ash,0.25"),
    ),
    Broken(
        "factors alone", StudyError, ("factors and exposures go together", "study.toml"), data='factors = "factors.csv"'
    ),
    Broken("both kinds", StudyError, ("not both", "study.toml"), data=NAMED + '\nvectors = "vectors.csv"'),
]


@pytest.mark.parametrize("case", CASES, ids=lambda case: case.name.replace(" ", "-"))
def test_what_is_missing_or_unknown_is_refused_with_its_place(tmp_path: Path, case: Broken) -> None:
    files = {"factors.csv": FACTORS, "exposures.csv": EXPOSURES, **case.files}
    if case.error is StudyError:
        with pytest.raises(StudyError) as caught:
            written_study(tmp_path, STUDY.format(review="", data=case.data, columns=""), {})
        assert [part for part in case.says if part not in str(caught.value)] == []
        return
    assert_refused(tmp_path, Broken(case.name, case.error, case.says, files, data=NAMED))
