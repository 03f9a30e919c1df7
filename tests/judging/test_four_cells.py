"""The four cells: what the filter and the tail is worth, on known truth and a negative control."""

from functools import lru_cache

import numpy as np
import pandas as pd
import pytest

import backtest
from backtest.judging.four_cells import CELLS, four_cells, gains
from backtest.judging.ranking import mean_difference
from backtest.records import FOUR_CELLS_COLUMNS
from tests.reference.comparison_paths import garch_t, pnl_of
from tests.reference.judging_tables import tables

LEVELS = (0.975, 0.99)
EFFECTS = ["filter", "tail", "filter and tail", "together beyond apart"]


@lru_cache(maxsize=4)
def forecast_of(kind: str) -> tuple[pd.DataFrame, pd.DataFrame]:
    losses = garch_t(2600, 1) if kind == "garch" else np.random.default_rng(5).standard_t(5, 2600)
    pnl = pnl_of(losses)
    return pnl, backtest.forecast(pnl, models=list(CELLS.values()), levels=list(LEVELS), window=1000)


def cells(kind, **more):
    return four_cells(*forecast_of(kind), levels=LEVELS, window=1000, **more)


def effect(table, name, level):
    (row,) = table[(table["name"] == name) & (table["level"] == level)].to_dict("records")
    return row


@pytest.mark.parametrize("level", LEVELS)
def test_the_filter_gains_where_volatility_moves(level):
    row = effect(cells("garch"), "filter", level)
    assert 0.0 < row["low"] < row["gain"] < row["high"]
    assert row["decision"] == "evidence of a gain"
    assert row["share_low"] < 100.0 < row["share_high"]  # the tail adds nothing that 1,600 days can tell


@pytest.mark.parametrize("level", LEVELS)
def test_the_filter_does_not_gain_on_independent_days(level):
    row = effect(cells("iid"), "filter", level)
    assert row["decision"] != "evidence of a gain"
    assert row["low"] < 0.0
    assert np.isnan(row["share"])  # no share of a gain that is not there


@pytest.mark.parametrize("kind", ["garch", "iid"])
def test_filter_and_tail_add_up_to_the_gain_of_both(kind):
    table = cells(kind)
    for level in LEVELS:
        parts = [effect(table, name, level)["gain"] for name in EFFECTS]
        assert parts[0] + parts[1] == pytest.approx(parts[2])
        score = {name: effect(table, name, level)["score"] for name in CELLS.values()}
        assert parts[2] == pytest.approx(score["historical"] - score["conditional-evt"])


def test_shares_add_up_to_a_hundred():
    rows = [effect(cells("garch"), name, 0.975) for name in ("filter", "tail")]
    assert sum(r["share"] for r in rows) == pytest.approx(100.0)
    assert all(r["share_low"] < r["share"] < r["share_high"] for r in rows)


def test_gains_by_hand():
    scores = dict(zip(CELLS, (np.array([v]) for v in (10.0, 7.0, 9.0, 5.0)), strict=True))
    assert {name: g[0] for name, g in gains(scores).items()} == dict(zip(EFFECTS, (3.5, 1.5, 5.0, 1.0), strict=True))


def test_the_interval_is_that_of_newey_west():
    table = cells("garch")
    row = effect(table, "filter and tail", 0.99)
    pnl, forecasts = forecast_of("garch")
    wide = forecasts[forecasts["level"] == 0.99].merge(pnl, on=["date", "desk"])
    wide["fz0"] = (
        (-wide["hypothetical"] - wide["var"]).clip(lower=0) / (0.01 * wide["es"])
        + wide["var"] / wide["es"] - 1 + np.log(wide["es"])
    )  # fmt: skip
    scores = wide.pivot_table(index="date", columns="model", values="fz0").dropna()
    found = mean_difference((scores["historical"] - scores["conditional-evt"]).to_numpy())
    assert (row["gain"], row["low"], row["high"]) == pytest.approx((found.mean, found.low, found.high))


def test_no_decision_below_a_thousand_shared_days_but_sizes():
    pnl, forecasts = forecast_of("garch")
    first = np.sort(forecasts["date"].unique())[-999]
    table = four_cells(pnl, forecasts[forecasts["date"] >= first], levels=[0.975])
    effects = table[table["part"] == "effect"]
    assert set(effects["decision"]) == {"no decision: 999 shared days, needs 1,000"}
    assert effects["p_value"].isna().all()
    assert effects[["gain", "low", "high"]].notna().all().all()


def test_the_gpd_interval_is_narrower_where_the_empirical_one_reads_few_losses():
    table = cells("garch")
    for name in ("unfiltered", "filtered"):
        row = effect(table, f"GPD against empirical, {name}", 0.99)
        assert row["interval_ratio"] < 1.0
        assert row["interval_days"] == 1600
    cell = effect(table, "historical", 0.99)
    rows = forecast_of("garch")[1].query("model == 'historical' and level == 0.99")
    assert cell["interval_width"] == pytest.approx((rows["var_high"] - rows["var_low"]).mean())
    assert cell["interval_percent"] == pytest.approx(100 * cell["interval_width"] / cell["average_var"])


def invented(days=1100, level=0.99, **more):
    losses = {"A": np.random.default_rng(3).standard_t(5, days)}
    pnl, forecasts = tables(losses, models=tuple(CELLS.values()), levels=(level,), var=3.0, es=4.0, **more)
    return pnl, forecasts.assign(var_low=forecasts["var"] - 1.0, var_high=forecasts["var"] + 1.0)


@pytest.mark.parametrize(
    ("window", "level", "words", "answered"),
    [
        (500, 0.9985, "cannot answer: beyond 1 - 1/500", False),
        (500, 0.998, "upper end lies beyond the largest of 500 losses", True),  # exactly 1 - 1/500: the second largest
        (368, 0.99, "", True),  # 0.99^368 is below 2.5%, 0.99^367 is not
        (367, 0.99, "upper end lies beyond the largest of 367 losses", True),
    ],
)
def test_how_deep_an_empirical_tail_reaches(window, level, words, answered):
    table = four_cells(*invented(level=level), levels=[level], window=window)
    for name in ("historical", "filtered-historical"):
        row = effect(table, name, level)
        assert words in row["note"]
        assert bool(row["note"]) == bool(words)
        assert np.isfinite(row["interval_width"]) == answered
    assert effect(table, "conditional-evt", level)["interval_width"] == pytest.approx(2.0)
    assert np.isfinite(effect(table, "GPD against empirical, filtered", level)["interval_ratio"]) == answered


def test_a_missing_cell_or_level_is_named():
    pnl, forecasts = invented()
    table = four_cells(pnl, forecasts[forecasts["model"] != "unconditional-evt"], levels=[0.99, 0.975])
    assert list(table["note"]) == [
        "not tested: needs unconditional-evt at 0.99",
        "not tested: needs historical, filtered-historical, unconditional-evt, conditional-evt at 0.975",
    ]
    assert tuple(table.columns) == FOUR_CELLS_COLUMNS


def test_without_es_the_cells_are_scored_by_tick_and_say_so():
    pnl, forecasts = invented()
    table = four_cells(pnl, forecasts.drop(columns=["es", "var_low", "var_high"]), levels=[0.99])
    cell = effect(table, "historical", 0.99)
    assert cell["score_name"] == "tick"
    assert "not FZ0" in cell["note"]
    assert cell["interval_days"] == 0


def test_the_unit_of_the_pnl_changes_money_alone():
    pnl, forecasts = forecast_of("garch")
    money = ["var", "es", "var_low", "var_high"]
    scaled = four_cells(
        pnl.assign(hypothetical=pnl["hypothetical"] * 1e6), forecasts.assign(**(forecasts[money] * 1e6)), levels=LEVELS
    )
    plain = four_cells(pnl, forecasts, levels=LEVELS)
    for column in ("gain", "low", "high", "p_value", "share", "interval_percent", "interval_ratio"):
        assert scaled[column].to_numpy() == pytest.approx(plain[column].to_numpy(), rel=1e-7, nan_ok=True)
    assert scaled["average_var"].to_numpy() == pytest.approx(1e6 * plain["average_var"].to_numpy(), nan_ok=True)
