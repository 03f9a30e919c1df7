"""Every filter with every tail sits the same examination."""

import pickle

import numpy as np
import pandas as pd
import pytest

import backtest
from backtest.forecasting.models import GPD_FITS, MEANS, STARTS
from backtest.records import FALLBACK, FORECAST_COLUMNS
from tests.reference.datasets import garch_t, pnl_series

FILTERS = [
    {"filter": "none"},
    {"filter": "ewma"},
    *({"filter": "garch", "mean": mean} for mean in MEANS),
    *({"filter": "garch", "start": start} for start in STARTS[1:]),
    {"filter": "library:EGARCH", "recalibrate_days": 21},
    {"filter": "library:APARCH", "recalibrate_days": 21, "mean": "zero", "innovations": "skew-t"},
]
TAILS = [
    {"tail": "empirical"},
    {"tail": "age-weighted"},
    {"tail": "normal"},
    {"tail": "t"},
    {"tail": "skew-t"},
    *({"tail": "gpd", "gpd_fit": fit} for fit in GPD_FITS),
]
EVERY = [{"name": " ".join(map(str, [*f.values(), *t.values()])), **f, **t} for f in FILTERS for t in TAILS]
SOME = [pair for i, pair in enumerate(EVERY) if i < 2 * len(TAILS) or i % (len(TAILS) + 1) in (0, 3)]
"""Every tail without a filter and behind the first that has one; every filter with a few tails."""
WINDOW, DAYS, LEVELS = 300, 340, (0.975, 0.99)


def forecast(losses, models=SOME, window=WINDOW, **options) -> pd.DataFrame:
    return backtest.forecast(pnl_series(losses), models=models, levels=LEVELS, window=window, **options)


@pytest.fixture(scope="module")
def losses() -> np.ndarray:
    return garch_t(DAYS, 7)[0]


@pytest.fixture(scope="module", params=[SOME, pytest.param(EVERY, marks=pytest.mark.slow)], ids=["some", "every"])
def pairs(request) -> list[dict[str, str]]:
    return request.param


@pytest.fixture(scope="module")
def made(losses, pairs) -> pd.DataFrame:
    return forecast(losses, pairs)


def by_model(table: pd.DataFrame, column: str) -> pd.DataFrame:
    return table.pivot_table(index=["date", "level"], columns="model", values=column)


def test_every_pair_has_a_row_a_day_and_level(made, pairs):
    assert tuple(made.columns) == FORECAST_COLUMNS
    assert len(made) == len(pairs) * (DAYS - WINDOW) * len(LEVELS)
    assert not made.duplicated(["date", "model", "level"]).any()


def test_every_forecast_is_finite_with_a_status(made):
    assert np.isfinite(made[["var", "es", "pit_hypothetical"]]).all(axis=None)
    assert (made["status"] != "").all()


def test_es_is_not_below_var_and_a_deeper_level_not_below_a_shallower(made):
    assert (made["es"] >= made["var"]).all()
    for column in ("var", "es"):
        wide = made.pivot_table(index=["date", "model"], columns="level", values=column)
        assert (wide[0.99] >= wide[0.975]).all()


def test_the_origin_lies_before_the_target(made):
    assert (made["origin"] < made["date"]).all()


def test_the_pit_exceeds_the_level_only_on_an_exception(made, losses):
    loss = -pnl_series(losses)
    hit = loss.reindex(made["date"]).to_numpy() > made["var"].to_numpy()
    assert hit[(made["pit_hypothetical"] > made["level"]).to_numpy()].all()
    continuous = made["model"].str.contains(r"normal$| t$|skew-t$").to_numpy()
    assert (made["pit_hypothetical"] > made["level"]).to_numpy()[continuous & hit].all()


@pytest.mark.parametrize("c", [1e-6, 0.01, 3.0, 1e9])
def test_the_unit_of_the_pnl_changes_nothing_but_money(made, losses, pairs, c):
    scaled = forecast(c * losses, pairs)
    for column in ("var", "es"):
        np.testing.assert_allclose(scaled[column], c * made[column], rtol=1e-9)
    np.testing.assert_allclose(scaled["pit_hypothetical"], made["pit_hypothetical"], atol=1e-9)
    assert (scaled["status"] == made["status"]).all()


def test_the_number_of_workers_changes_nothing(made, losses, pairs):
    pd.testing.assert_frame_equal(forecast(losses, pairs, workers=2), made)


def test_the_order_of_rows_and_desks_changes_nothing(losses):
    a, b = (pnl_series(x) for x in (losses, 2 * losses[::-1]))
    table = pd.concat(
        [pd.DataFrame({"date": s.index, "desk": d, "hypothetical": s.to_numpy()}) for d, s in (("a", a), ("b", b))]
    )
    options = {"models": ["conditional-evt", "historical"], "levels": LEVELS, "window": WINDOW}
    once = backtest.forecast(table, **options)
    again = backtest.forecast(table.sample(frac=1, random_state=1), **options)
    pd.testing.assert_frame_equal(once, again)


def test_forecasts_pickle(made):
    pd.testing.assert_frame_equal(pickle.loads(pickle.dumps(made)), made)


def test_gpd_parameters_stand_in_gpd_rows_alone(made):
    gpd = made["model"].str.contains("gpd")
    assert made.loc[gpd, ["shape", "scale", "threshold"]].notna().all(axis=None)
    assert made.loc[~gpd, ["shape", "scale", "threshold"]].isna().all(axis=None)


HARD = {
    "constant zero": lambda x: 0 * x,
    "constant": lambda x: 0 * x + 4.2,
    "nearly constant": lambda x: 5 + 1e-12 * x,
    "two-valued": np.sign,
    "one huge loss": lambda x: np.where(np.arange(x.size) == 200, 22.9 * x.std() * 5, x),
    "sixty zeros in a row": lambda x: np.where((np.arange(x.size) >= 120) & (np.arange(x.size) < 180), 0, x),
    "a third zeros": lambda x: np.where(np.arange(x.size) % 3 == 0, 0, x),
    "all zeros but one": lambda x: np.where(np.arange(x.size) == 310, 1.0, 0.0),
    "rounded to one figure": np.round,
}


@pytest.mark.parametrize("case", HARD)
def test_hard_pasts_get_a_forecast_and_a_status(losses, pairs, case):
    table = forecast(HARD[case](losses), pairs)
    assert len(table) == len(pairs) * (DAYS - WINDOW) * len(LEVELS)
    assert np.isfinite(table[["var", "es", "pit_hypothetical"]]).all(axis=None)
    assert (table["es"] >= table["var"] - 1e-12 * table["var"].abs()).all()
    assert (table["status"] != "").all()


def test_a_constant_past_is_a_stated_fallback_that_repeats_the_value(losses):
    table = forecast(0 * losses + 4.2, models=["conditional-evt", "garch-normal"])
    assert table["status"].str.contains(f"{FALLBACK}: constant past").all()
    np.testing.assert_allclose(table["var"], 4.2)


def test_recalibrating_less_often_still_filters_daily(losses):
    table = forecast(losses, models=[{"name": "m", "filter": "garch", "recalibrate_days": 21}])
    assert table[table["level"] == 0.99]["sigma"].nunique() == DAYS - WINDOW


def test_every_start_is_never_below_the_usual_search():
    losses = garch_t(1000, 11)[0]
    usual, audited = (
        backtest.forecast(pnl_series(losses), models=["garch-normal"], window=500, every_start=on)
        for on in (False, True)
    )
    assert (audited["sigma"] / usual["sigma"] - 1).abs().median() < 1e-7
