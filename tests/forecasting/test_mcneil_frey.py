"""McNeil & Frey (2000), J. Empirical Finance 7:271-300, Table 2, on the series they used (BMW, 6146 daily returns).

Published counts read in the authors' preprint. The paper's mean equation (5) has no intercept: model A, mean
"ar1-no-intercept"; model B has one (our default). Start-up "sample-variance". Tolerances: how far counts move between
start-ups and mean equations, as measured (up to 8 of 261 at .95); unconditional EVT at .99 and .995 is exact.
"""

import numpy as np
import pandas as pd
import pytest

import backtest
from tests.reference.datasets import bmw

LEVELS = (0.95, 0.975, 0.99, 0.995)
A = {"filter": "garch", "mean": "ar1-no-intercept"}
MODELS = [
    "historical",
    "unconditional-evt",
    "conditional-evt",
    "garch-normal",
    "filtered-historical",
    {"name": "A conditional-evt", "tail": "gpd", **A},
    {"name": "A garch-normal", "tail": "normal", **A},
    {"name": "A filtered-historical", "tail": "empirical", **A},
]


def counts(days: int | None = None) -> pd.DataFrame:
    pnl = -bmw().iloc[:days]
    table = backtest.forecast(pnl, models=MODELS, levels=LEVELS, window=1000)
    hit = -pnl.reindex(table["date"]).to_numpy() > table["var"].to_numpy()
    return table.assign(hit=hit).pivot_table(index="model", columns="level", values="hit", aggfunc="sum")


# Computed with an independent engine (L-BFGS-B on a plain likelihood, three starts) for the first 1000 forecasts.
FIRST_THOUSAND = {
    "A conditional-evt": [52, 27, 8, 6],
    "A garch-normal": [48, 30, 21, 11],
    "A filtered-historical": [54, 25, 12, 5],
    "conditional-evt": [53, 27, 8, 6],
    "garch-normal": [48, 31, 21, 13],
    "filtered-historical": [58, 26, 13, 5],
    "unconditional-evt": [48, 24, 7, 5],
    "historical": [49, 23, 9, 5],
}


def test_the_first_thousand_forecasts_count_as_an_independent_engine_does():
    found = counts(2000)
    assert {m: found.loc[m].tolist() for m in FIRST_THOUSAND} == FIRST_THOUSAND


@pytest.fixture(scope="module")
def table_2() -> pd.DataFrame:
    return counts()


@pytest.mark.slow
@pytest.mark.parametrize(
    ("model", "level", "published", "within"),
    [
        ("A conditional-evt", 0.95, 261, 6),
        ("A conditional-evt", 0.99, 48, 5),
        ("A conditional-evt", 0.995, 29, 1),
        ("conditional-evt", 0.95, 261, 6),
        ("conditional-evt", 0.99, 48, 5),
        ("conditional-evt", 0.995, 29, 1),
        ("unconditional-evt", 0.95, 251, 1),
        ("unconditional-evt", 0.99, 55, 0),
        ("unconditional-evt", 0.995, 31, 0),
        ("garch-normal", 0.95, 210, 5),
        ("garch-normal", 0.99, 86, 4),
        ("garch-normal", 0.995, 57, 5),
        ("A garch-normal", 0.95, 210, 12),
        ("A garch-normal", 0.99, 86, 4),
        ("A garch-normal", 0.995, 57, 5),
    ],
)
def test_table_2(table_2, model, level, published, within):
    assert abs(table_2.loc[model, level] - published) <= within


@pytest.mark.slow
def test_every_count_of_an_independent_engine_comes_out(table_2):
    # Same engine as FIRST_THOUSAND, all 5146 forecasts.
    assert table_2.loc["A conditional-evt"].tolist() == [261, 123, 48, 29]
    assert table_2.loc["conditional-evt"].tolist() == [259, 123, 49, 29]
    assert table_2.loc["A filtered-historical"].tolist() == [271, 130, 60, 27]
    assert table_2.loc["filtered-historical"].tolist() == [273, 131, 61, 27]
    assert table_2.loc["historical"].tolist() == [259, 126, 62, 30]


@pytest.mark.slow
@pytest.mark.parametrize(
    ("model", "published", "within"),
    [
        # Table 4, BMW, at .95, .99, .995; tolerances cover mean equation, start-up and resampling, as measured.
        ("A conditional-evt", (0.36, 0.08, 0.11), (0.05, 0.03, 0.05)),
        ("garch-normal", (0.0, 0.0, 0.0), (0.01, 0.01, 0.01)),  # printed as "much less than .01"
    ],
)
def test_table_4_by_the_bootstrap(model, published, within):
    from backtest.judging.severity import bootstrap_p

    losses = bmw()
    chosen = [m for m in MODELS if m == model or (isinstance(m, dict) and m["name"] == model)]
    table = backtest.forecast(-losses, models=chosen, levels=(0.95, 0.99, 0.995), window=1000)
    loss = losses.reindex(table["date"]).to_numpy()
    residual = (loss - table["es"]) / table["sigma"]
    for level, p, tolerance in zip((0.95, 0.99, 0.995), published, within, strict=True):
        on = (table["level"] == level) & (loss > table["var"])
        found = bootstrap_p(residual[on].to_numpy(), 10_000, np.random.default_rng(1))
        assert found == pytest.approx(p, abs=tolerance)
