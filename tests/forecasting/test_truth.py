"""Simulated losses whose true conditional law is known: GARCH(.02, .08, .90) with unit-variance t innovations."""

import numpy as np
import pandas as pd
import pytest
from scipy.stats import binom
from scipy.stats import t as student

import backtest
from tests.reference.datasets import garch_t, pnl_series

DAYS, WINDOW = 3500, 1000


@pytest.fixture(scope="module", params=[1, 2])
def judged(request) -> pd.DataFrame:
    losses, sigma = garch_t(DAYS, request.param)
    pnl = pnl_series(losses)
    table = backtest.forecast(pnl, models=["conditional-evt", "historical", "garch-normal"], window=WINDOW)
    truth = pd.Series(sigma, index=pnl.index).reindex(table["date"]).to_numpy()
    q = student.ppf(table["level"], 5) * np.sqrt(3 / 5)
    return table.assign(loss=-pnl.reindex(table["date"]).to_numpy(), truth=truth * q)


def rows(table: pd.DataFrame, model: str, level: float) -> pd.DataFrame:
    return table[(table["model"] == model) & (table["level"] == level)]


@pytest.mark.parametrize("level", [0.975, 0.99])
def test_conditional_evt_covers_what_it_says(judged, level):
    found = rows(judged, "conditional-evt", level)
    hits = int((found["loss"] > found["var"]).sum())
    low, high = binom.interval(0.999, len(found), 1 - level)
    assert low <= hits <= high


@pytest.mark.parametrize("level", [0.975, 0.99])
def test_conditional_evt_follows_the_true_var_and_historical_simulation_does_not(judged, level):
    # Common measure: RMSE of the relative error. Known from an independent engine: 7-12 % against 24-57 %.
    def rmse(model: str) -> float:
        found = rows(judged, model, level)
        return float(np.sqrt(np.mean((found["var"] / found["truth"] - 1) ** 2)))

    assert rmse("conditional-evt") < 0.5 * rmse("historical")
    assert rmse("conditional-evt") < 0.16


def clustering_p(hits: np.ndarray, block: int = 50) -> float:
    """Chance, if days were exchangeable, of block counts at least as uneven as these (a permutation law)."""
    rng = np.random.default_rng(0)

    def unevenness(x: np.ndarray) -> float:
        return float(x[: len(x) // block * block].reshape(-1, block).sum(axis=1).var())

    null = [unevenness(rng.permutation(hits)) for _ in range(1999)]
    return float((1 + np.sum(np.array(null) >= unevenness(hits))) / 2000)


def test_historical_simulation_clusters_as_the_truth_implies(judged):
    # The true volatility moves by a factor of three, the VaR of historical simulation hardly: exceptions must cluster.
    found = rows(judged, "historical", 0.975)
    assert clustering_p((found["loss"] > found["var"]).to_numpy()) < 0.01


def test_conditional_evt_does_not_cluster(judged):
    """Negative control: the same measure sees no clustering where the forecast follows volatility."""
    found = rows(judged, "conditional-evt", 0.975)
    assert clustering_p((found["loss"] > found["var"]).to_numpy()) > 0.01


def test_a_normal_tail_is_seen_to_be_too_thin(judged):
    found = rows(judged, "garch-normal", 0.99)
    assert (found["var"] / found["truth"]).mean() < 0.97
