"""Intervals by refitting filter and tail to rebuilt pasts."""

import numpy as np
import pandas as pd
import pytest
from scipy import stats

import backtest
from backtest.forecasting.asked import Asked
from backtest.forecasting.bootstrap import replicate
from backtest.forecasting.filters import apply_filter
from backtest.forecasting.models import resolve
from tests.reference.datasets import garch_t, pnl_series

LIMITS = ["var_low", "var_high", "es_low", "es_high"]
OPTIONS = {"window": 300, "bootstraps": 99, "bootstrap_days": 3}


def forecast(losses, models, **options) -> pd.DataFrame:
    return backtest.forecast(pnl_series(losses), models=models, **{**OPTIONS, **options})


@pytest.fixture(scope="module")
def losses() -> np.ndarray:
    return garch_t(310, 1)[0]


def test_the_last_days_are_refitted_and_the_others_keep_the_delta_method(losses):
    models = ["conditional-evt", "historical"]
    made, delta = forecast(losses, models, bands="bootstrap"), forecast(losses, models)
    last = made["date"].isin(np.sort(made["date"].unique())[-3:])
    pd.testing.assert_frame_equal(made[~last], delta[~last])
    moved = made[LIMITS] != delta[LIMITS]
    assert moved[last & (made["model"] == "conditional-evt")].all(axis=None)
    assert moved[last & (made["model"] == "historical")].any(axis=1).all()
    same = [c for c in made if c not in LIMITS]
    pd.testing.assert_frame_equal(made[same], delta[same])


def test_intervals_hold_the_forecast_and_do_not_depend_on_workers_desks_or_other_models(losses):
    one = forecast(losses, ["conditional-evt"], bands="bootstrap")
    assert (one["var_low"] <= one["var"]).all()
    assert (one["var"] <= one["var_high"]).all()
    assert (one["es_low"] <= one["es"]).all()
    assert (one["es"] <= one["es_high"]).all()
    pnl = pnl_series(losses)
    table = pd.concat(
        [
            pd.DataFrame({"date": pnl.index, "desk": d, "hypothetical": f * pnl.to_numpy()})
            for d, f in (("a", 2), ("b", 1))
        ]
    )
    many = backtest.forecast(table, models=["historical", "conditional-evt"], bands="bootstrap", workers=2, **OPTIONS)
    again = many[(many["desk"] == "b") & (many["model"] == "conditional-evt")].reset_index(drop=True)
    pd.testing.assert_frame_equal(again[LIMITS], one[LIMITS])


def test_another_seed_gives_another_interval(losses):
    one, two = (forecast(losses, ["filtered-historical"], bands="bootstrap", seed=s) for s in (1, 2))
    last = one["date"] == one["date"].max()
    assert (one.loc[last, "var_high"] != two.loc[last, "var_high"]).all()


def test_nothing_is_estimated_and_nothing_varies_in_a_standard_law_behind_ewma(losses):
    made = forecast(losses, ["ewma-normal"], bands="bootstrap")
    np.testing.assert_allclose(made["var_low"], made["var_high"], rtol=1e-12)


@pytest.mark.slow
def test_intervals_cover_the_true_var_of_a_garch_path():
    """Known truth: 100 paths of GARCH(.02, .08, .90) with normal innovations; 95% intended, 90 or so usual."""
    q = np.array([0.99])
    model = resolve({"name": "g", "filter": "garch", "mean": "zero", "tail": "normal"}, levels=q)
    hits, off = [], []
    for k in range(100):
        rng, h, x = np.random.default_rng(k), 1.0, []
        for _ in range(1500):
            x.append(np.sqrt(h) * rng.standard_normal())
            h = 0.02 + 0.08 * x[-1] ** 2 + 0.90 * h
        true, past = np.sqrt(h) * stats.norm.ppf(0.99), np.array(x[-1000:])
        filtered = apply_filter(past[None], model.filter, np.array([0]), np.array([True]))
        var, _ = replicate(model, filtered, past, 0, q, Asked(bootstraps=99), np.datetime64("2020-01-01") + k)
        low, high = np.quantile(var[:, 0], [0.025, 0.975])
        hits.append(low <= true <= high)
        off.append(low <= 1.2 * true <= high)
    assert 0.82 <= np.mean(hits) <= 1.0
    assert np.mean(off) < 0.5  # negative control: a VaR 20% too high is not covered
