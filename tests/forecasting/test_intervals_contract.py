"""Every filter with every tail: intervals hold forecasts, horizons are finite, units and future change nothing."""

import numpy as np
import pandas as pd
import pytest

import backtest
from tests.reference.datasets import garch_t, pnl_series

FILTERS = [
    {"filter": "none"},
    {"filter": "ewma"},
    {"filter": "garch"},
    {"filter": "garch", "mean": "constant", "innovations": "t"},
    {"filter": "gjr", "mean": "zero"},
    {"filter": "gjr", "innovations": "skew-t"},
]
TAILS = [
    {"tail": "empirical"}, {"tail": "age-weighted"}, {"tail": "normal"}, {"tail": "t"}, {"tail": "skew-t"},
    *({"tail": "gpd", "gpd_fit": fit} for fit in ("ml", "zhang-stephens", "pwm")),
]  # fmt: skip
PAIRS = [{"name": " ".join([*f.values(), "x", *t.values()]), **f, **t} for f in FILTERS for t in TAILS]
LIMITS = ["var_low", "var_high", "es_low", "es_high"]
MONEY = ["var", "es", *LIMITS]
WINDOW, DAYS, LEVELS = 300, 310, (0.975, 0.99)
FITTED = ("empirical", "age-weighted", "gpd")


def forecast(losses, days=DAYS, **options) -> pd.DataFrame:
    settings = {"models": PAIRS, "levels": LEVELS, "window": WINDOW, "horizons": [1, 5], "paths": 1000}
    return backtest.forecast(pnl_series(losses[:days]), **{**settings, **options})


@pytest.fixture(scope="module")
def losses() -> np.ndarray:
    return garch_t(DAYS, 7)[0]


@pytest.fixture(scope="module")
def made(losses) -> pd.DataFrame:
    return forecast(losses)


def holds(table: pd.DataFrame) -> None:
    one = table[table["horizon"] == 1]
    assert np.isfinite(one[MONEY]).all(axis=None)
    slack = 1e-12 * one["es"].abs()
    assert (one["var_low"] <= one["var"] + slack).all()
    assert (one["var"] <= one["var_high"] + slack).all()
    assert (one["es_low"] <= one["es"] + slack).all()
    assert (one["es"] <= one["es_high"] + slack).all()
    assert (one["es_low"] >= one["var_low"] - slack).all()
    assert np.isfinite(table[["var", "es"]]).all(axis=None)
    assert (table["es"] >= table["var"] - 1e-9 * table["var"].abs()).all()


def test_every_interval_holds_its_forecast_and_every_horizon_is_finite(made):
    assert len(made) == len(PAIRS) * (DAYS - WINDOW) * len(LEVELS) * 3  # a day, five days, root of time
    holds(made)


def test_a_fitted_tail_has_an_interval_of_some_width(made):
    one = made[(made["horizon"] == 1) & made["model"].str.contains("x " + "|x ".join(FITTED))]
    assert len(one) == len(FILTERS) * 5 * (DAYS - WINDOW) * len(LEVELS)
    assert (one["var_high"] > one["var_low"]).all()
    assert (one["es_high"] > one["es_low"]).all()


def test_the_root_of_time_multiplies_forecast_and_interval(made):
    root = made[made["model"].str.endswith("sqrt-time")]
    root = root.assign(model=root["model"].str.removesuffix(" sqrt-time"))
    one, root = (t.sort_values(["model", "date", "level"]) for t in (made[made["horizon"] == 1], root))
    np.testing.assert_allclose(root[MONEY], np.sqrt(5) * one[MONEY], rtol=1e-12)


@pytest.mark.parametrize("c", [1e-6, 3.0, 1e9])
def test_the_unit_of_the_pnl_changes_nothing_but_money(made, losses, c):
    scaled = forecast(c * losses)
    for column in MONEY:
        np.testing.assert_allclose(scaled[column], c * made[column], rtol=1e-9, atol=c * 1e-9)


def test_later_days_change_nothing(made, losses):
    fewer = forecast(losses, DAYS - 4)
    kept = made[made["date"] <= fewer["date"].max()].reset_index(drop=True)
    pd.testing.assert_frame_equal(kept, fewer, check_exact=True)


def test_the_number_of_workers_changes_nothing(made, losses):
    pd.testing.assert_frame_equal(forecast(losses, workers=2), made, check_exact=True)


def test_without_bands_the_limits_are_empty_and_nothing_else_changes(made, losses):
    bare = forecast(losses, bands="none")
    assert bare[LIMITS].isna().all(axis=None)
    rest = [c for c in made if c not in LIMITS]
    pd.testing.assert_frame_equal(bare[rest], made[rest], check_exact=True)


HARD = {
    "constant": lambda x: 0 * x + 4.2,
    "two-valued": np.sign,
    "one huge loss": lambda x: np.where(np.arange(x.size) == 200, 22.9 * x.std() * 5, x),
    "a third zeros": lambda x: np.where(np.arange(x.size) % 3 == 0, 0, x),
    "all zeros but one": lambda x: np.where(np.arange(x.size) == 290, 1.0, 0.0),
    "rounded to one figure": np.round,
}


@pytest.mark.parametrize("case", HARD)
def test_hard_pasts_have_intervals_and_horizons(losses, case):
    holds(forecast(HARD[case](losses), DAYS - 6))


def test_a_short_window_has_intervals_and_horizons(losses):
    pairs = [p for p in PAIRS if p["tail"] != "gpd"]
    holds(forecast(losses, 54, models=pairs, window=50))
