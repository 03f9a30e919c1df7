"""The forecast for a day does not move, to the last bit, when everything from that day on is replaced."""

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import backtest
from backtest.forecasting.models import NAMED
from tests.reference.datasets import garch_t, pnl_series

DAYS, WINDOW, LEVELS = 480, 300, (0.975, 0.99)
MODELS = list(NAMED)
COMPARED = ["var", "es", "mean", "sigma", "shape", "scale", "threshold", "origin"]


def table_with_restatements() -> pd.DataFrame:
    """One desk with three values restated a week or a month later."""
    pnl = pnl_series(garch_t(DAYS, 21)[0])
    table = pd.DataFrame({"date": pnl.index, "desk": "d", "hypothetical": pnl.to_numpy(), "known_on": pnl.index})
    again = table.iloc[[250, 330, 400]].copy()
    again["hypothetical"] *= 3
    again["known_on"] = pnl.index[[255, 352, 431]]
    return pd.concat([table, again], ignore_index=True)


def forecast(table: pd.DataFrame) -> pd.DataFrame:
    calendar = pnl_series(np.zeros(DAYS)).index
    return backtest.forecast(table, models=MODELS, levels=LEVELS, window=WINDOW, calendar=calendar)


@pytest.fixture(scope="module")
def table() -> pd.DataFrame:
    return table_with_restatements()


@pytest.fixture(scope="module")
def made(table) -> pd.DataFrame:
    return forecast(table)


@given(st.integers(WINDOW, DAYS - 1), st.integers(0, 1000))
@settings(max_examples=12, deadline=None)
def test_the_future_does_not_reach_the_forecast(table, made, at, seed):
    day = table["date"].iloc[at]
    known = table[table["known_on"] < day]
    rng = np.random.default_rng(seed)
    later = table[(table["date"] >= day) & (table["known_on"] == table["date"])].copy()
    later["hypothetical"] = rng.standard_cauchy(len(later))
    scrambled = forecast(pd.concat([known, later], ignore_index=True))
    ours, theirs = (t[t["date"] <= day].reset_index(drop=True) for t in (made, scrambled))
    pd.testing.assert_frame_equal(ours[COMPARED], theirs[COMPARED], check_exact=True)


def test_the_check_can_fail(table, made):
    """Negative control: changing the day before moves the forecast."""
    changed = table.copy()
    changed.loc[399, "hypothetical"] += 50.0
    day = table["date"].iloc[400]
    ours, theirs = (t[t["date"] == day]["var"].to_numpy() for t in (made, forecast(changed)))
    assert (ours != theirs).sum() >= len(MODELS)


@pytest.mark.parametrize("cut", [37, 150])
def test_an_extract_that_starts_later_gives_the_same_forecasts(cut):
    losses = garch_t(1100, 5)[0]
    pnl = pnl_series(losses)
    whole, later = (
        backtest.forecast(s, models=["conditional-evt", "historical"], window=WINDOW, levels=LEVELS)
        for s in (pnl, pnl.iloc[cut:])
    )
    both = whole.merge(later, on=["date", "model", "level"], suffixes=("", "_later"))
    assert len(both) == len(later)
    near = both["status"].str.contains("second mode") | both["status_later"].str.contains("second mode")
    np.testing.assert_allclose(both["var"][~near], both["var_later"][~near], rtol=1e-6)
    from backtest.forecasting.windows import BLOCK_DAYS, weekday_numbers

    blocks = weekday_numbers(both["date"].to_numpy().astype("datetime64[D]")) // BLOCK_DAYS
    inside = both[blocks > blocks.min()]
    assert len(inside) > 0
    np.testing.assert_array_equal(inside["var"], inside["var_later"])
