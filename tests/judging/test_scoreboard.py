"""What stands beside every score, by hand and on shared days."""

import numpy as np
import pytest

from backtest.judging.scoreboard import longest_run, peak_to_trough, restlessness, scoreboard
from backtest.judging.scores import fz0, half_homogeneous, tick
from backtest.records import SCOREBOARD_COLUMNS
from tests.reference.judging_tables import tables

LOSSES = np.array([3.0, 3.0, 0.0, 5.0, 5.0, 5.0, 1.0, -2.0])
VAR = np.array([2.0, 2.5, 2.0, 4.0, 4.0, 4.0, 4.0, 1.0])


def board(**more):
    measures = {"var": VAR, "es": VAR + 1.0, **more}
    return scoreboard(*tables({"A": LOSSES}, levels=(0.99,), actual=True, **measures))


def test_one_row_by_hand():
    row = board().iloc[1]
    assert (row["model"], row["pnl_kind"]) == ("bank", "actual")
    row = board().iloc[2]
    assert (row["model"], row["pnl_kind"]) == ("historical", "hypothetical")
    assert (row["days"], row["exceptions"], row["longest_run"]) == (8, 5, 3)
    assert row["average_var"] == pytest.approx(23.5 / 8)
    assert row["average_change"] == pytest.approx((0.5 + 0.5 + 2.0 + 3.0) / 7)
    assert row["peak_to_trough"] == 4.0
    es = VAR + 1.0
    for name, score in (("fz0", fz0), ("half_homogeneous", half_homogeneous)):
        assert row[name] == pytest.approx(score(LOSSES, VAR, es, 0.99).mean())
    assert row["tick"] == pytest.approx(tick(LOSSES, VAR, 0.99).mean())


def test_all_models_of_a_desk_are_measured_on_the_same_days():
    pnl, forecasts = tables({"A": LOSSES}, levels=(0.99,), var=VAR)
    forecasts.loc[(forecasts["model"] == "bank") & (forecasts["date"] < forecasts["date"].iloc[3]), "var"] = np.nan
    table = scoreboard(pnl, forecasts)
    assert list(table["days"]) == [5, 5]
    assert len(set(table["from"])) == len(set(table["to"])) == 1
    assert table["exceptions"].tolist()[1] == 3


def test_a_model_without_a_day_says_so_and_leaves_the_others_theirs():
    pnl, forecasts = tables({"A": LOSSES}, levels=(0.99,), var=VAR)
    forecasts.loc[forecasts["model"] == "bank", "var"] = np.nan
    table = scoreboard(pnl, forecasts)
    assert list(table["days"]) == [0, 8]
    assert table["note"].iloc[0] == "no day with VaR of every model and P&L"
    assert tuple(table.columns) == SCOREBOARD_COLUMNS


@pytest.mark.parametrize(
    ("es", "words"),
    [(np.nan, "no ES on 8 of 8 days: no joint score"), (VAR - 0.5, "ES not positive or below VaR on 8 of 8 days")],
)
def test_without_a_usable_es_only_tick_is_given(es, words):
    table = board(es=es)
    assert table["tick"].notna().all()
    assert table[["fz0", "half_homogeneous"]].isna().all().all()
    assert table["note"].str.startswith(words).all()


def test_longest_runs():
    assert longest_run(np.zeros(5, dtype=bool)) == 0
    assert longest_run(np.ones(5, dtype=bool)) == 5
    assert longest_run(np.array([1, 1, 0, 1, 1, 1, 0, 1], dtype=bool)) == 3


def test_a_ratio_of_var_that_is_not_positive_is_refused_in_words():
    assert peak_to_trough(np.array([2.0, 0.0, -1.0])) == (
        None, "VaR not positive on 2 of 3 days: no peak-to-trough ratio",
    )  # fmt: skip


def test_a_single_day_has_no_day_to_day_change():
    assert restlessness(np.array([2.0])) is None
