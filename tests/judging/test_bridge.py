"""The bridge from the reported forecast to the challenger, and the table of exceptions."""

import numpy as np
import pandas as pd
import pytest

from backtest.judging.bridge import Step, bridge_table
from backtest.judging.exceptions import exceptions_table
from backtest.judging.ranking import mean_difference
from backtest.judging.scores import fz0, tick
from backtest.records import BRIDGE_COLUMNS
from tests.reference.judging_tables import business_days, tables

DAYS = 600
LOSSES = np.exp(0.5 * np.sin(np.arange(DAYS) / 25)) * np.random.default_rng(1).standard_t(5, DAYS)


def rows_of(var, es=np.nan, level=0.975, first=0):
    dates = business_days(DAYS)[first:]
    frame = pd.DataFrame({"date": dates, "level": level})
    return frame.assign(var=np.broadcast_to(var, DAYS)[first:], es=np.broadcast_to(es, DAYS)[first:])


def pnl():
    return pd.DataFrame({"date": business_days(DAYS), "desk": "A", "hypothetical": -LOSSES})


VAR = 2.0 + 0.2 * np.cos(np.arange(DAYS) / 10)


def steps(first=100):
    return [
        Step("reported", "bank", None, rows_of(VAR, 2.9)),
        Step("longer window", "historical", 500, rows_of(2.6, 3.5, first=first)),
        Step("plus filter", "filtered-historical", 500, rows_of(1.2 * VAR, 3.3)),
    ]


def test_all_steps_stand_on_their_shared_days():
    table = bridge_table(pnl(), {"A": steps()}, levels=[0.975])
    assert list(table.columns) == list(BRIDGE_COLUMNS)
    assert table["step"].tolist() == ["reported", "longer window", "plus filter"]
    assert table["days"].tolist() == [500, 500, 500]
    assert table["from"].unique().tolist() == [str(business_days(DAYS)[100].date())]
    assert table["exceptions"].tolist() == [int((v < LOSSES)[100:].sum()) for v in (VAR, 2.6, 1.2 * VAR)]


def test_money_and_restlessness():
    table = bridge_table(pnl(), {"A": steps()}, levels=[0.975])
    assert table["average_var"].tolist() == pytest.approx([VAR[100:].mean(), 2.6, 1.2 * VAR[100:].mean()])
    assert table["average_change"].iloc[0] == pytest.approx(np.abs(np.diff(VAR[100:])).mean())
    assert table["average_change"].iloc[1] == 0.0


def test_score_changes_are_against_the_step_before():
    table = bridge_table(pnl(), {"A": steps()}, levels=[0.975])
    losses = LOSSES[100:]
    ones = np.ones(500)
    scores = [fz0(losses, VAR[100:], 2.9 * ones, 0.975), fz0(losses, 2.6 * ones, 3.5 * ones, 0.975)]
    change = mean_difference(scores[1] - scores[0])
    assert table["score_name"].unique().tolist() == ["FZ0"]
    assert np.isnan(table["score_change"].iloc[0])
    assert table.loc[1, ["score_change", "low", "high"]].tolist() == pytest.approx(
        [change.mean, change.low, change.high]
    )
    assert table["score"].iloc[0] == pytest.approx(scores[0].mean())


def test_tick_where_a_step_lacks_es():
    chain = [*steps(), Step("plus tail", "conditional-evt", 500, rows_of(VAR))]
    table = bridge_table(pnl(), {"A": chain}, levels=[0.975])
    assert table["score_name"].unique().tolist() == ["tick"]
    assert table["note"].iloc[0] == "not FZ0: no ES on every day from plus tail"
    assert table["score"].iloc[0] == pytest.approx(tick(LOSSES[100:], VAR[100:], 0.975).mean())


def test_a_desk_without_history_has_one_row_that_says_so():
    table = bridge_table(pnl(), {"A": steps(), "New": []}, levels=[0.975])
    assert table.loc[table["desk"] == "New", "note"].tolist() == ["not tested: history"]
    short = bridge_table(pnl(), {"A": steps(first=400)}, levels=[0.975])
    assert short["note"].tolist() == ["not tested: history"]
    assert short["days"].tolist() == [200]


def test_a_level_that_a_step_lacks_is_named():
    table = bridge_table(pnl(), {"A": steps()}, levels=[0.99])
    assert "needs VaR at 0.99 in every step, lacks reported, longer window, plus filter" in table["note"].iloc[0]


def test_actual_pnl_has_its_own_rows_and_the_cut_off_holds():
    both = pnl().assign(actual=lambda p: p["hypothetical"] * 2)
    cut = business_days(DAYS)[499].to_datetime64()
    table = bridge_table(both, {"A": steps()}, levels=[0.975], as_of=cut)
    assert table["pnl_kind"].tolist() == ["hypothetical"] * 3 + ["actual"] * 3
    assert table["days"].unique().tolist() == [400]
    assert table["exceptions"].iloc[3] > table["exceptions"].iloc[0]


def test_steps_that_use_the_same_model_twice_stay_apart():
    same = [Step("reported", "HS", 250, rows_of(VAR)), Step("re-performed", "HS", 250, rows_of(VAR))]
    table = bridge_table(pnl(), {"A": same}, levels=[0.975])
    assert table["model"].tolist() == ["HS", "HS"]
    assert table["score_change"].iloc[1] == 0.0
    assert np.isnan(table["low"].iloc[1])


def exceptions_of(losses, *, subject="bank", **more):
    return exceptions_table(*tables(losses, models=("bank", "historical"), var=2.0, **more), subject)


def test_one_row_a_date_and_desk_with_levels_and_kinds_as_columns():
    losses = {"A": np.array([0.0, 2.1, 5.0, 2.0]), "B": np.array([0.0, 0.0, 3.0, 0.0])}
    table = exceptions_of(losses, es=3.0, actual=True)
    assert list(zip(table["desk"], table["date"].dt.day, strict=True)) == [("A", 2), ("A", 3), ("B", 3)]
    assert table["hypothetical"].tolist() == [-2.1, -5.0, -3.0]
    assert table["exception_hypothetical_0.99"].tolist() == [True, True, True]
    assert table["exception_actual_0.99"].tolist() == [False, True, True]
    assert table["excess_hypothetical_0.975"].tolist() == pytest.approx([0.1, 3.0, 1.0])
    assert table["ratio_hypothetical_0.99"].tolist() == pytest.approx([1.05, 2.5, 1.5])
    assert np.isnan(table["ratio_actual_0.99"].iloc[0])
    assert table[["var_0.99", "es_0.975"]].iloc[0].tolist() == [2.0, 3.0]


def test_no_exception_and_no_subject_give_an_empty_table():
    assert len(exceptions_of({"A": np.zeros(5)})) == 0
    assert list(exceptions_of({"A": np.full(5, 9.0)}, subject=None).columns) == ["date", "desk", "model"]


def test_desks_reported_at_different_levels_share_one_table():
    pnl, forecasts = tables({"A": np.full(3, 9.0), "B": np.full(3, 9.0)}, models=("bank",), var=2.0)
    forecasts = forecasts[(forecasts["desk"] == "A") | (forecasts["level"] == 0.99)]
    table = exceptions_table(pnl, forecasts, "bank")
    assert len(table) == 6
    assert table.loc[table["desk"] == "B", "exception_hypothetical_0.975"].tolist() == [False] * 3
    assert table["exception_hypothetical_0.99"].dtype == bool


def test_a_day_without_pnl_or_var_is_no_exception_here():
    pnl, forecasts = tables({"A": np.full(4, 9.0)}, models=("bank",), levels=(0.99,), var=2.0)
    pnl.loc[0, "hypothetical"] = np.nan
    forecasts.loc[1, "var"] = np.nan
    assert exceptions_table(pnl, forecasts, "bank")["date"].dt.day.tolist() == [3, 6]
