"""The demo's P&L vectors: positions of the day under past moves, so that a change of positions is followed at once."""

import numpy as np
import pandas as pd
import pytest

import backtest
from backtest.reading.inputs import read_inputs
from backtest.study import read_study

HALVED = pd.Timestamp("2025-07-01")


@pytest.fixture(scope="module")
def vectors(demo) -> pd.DataFrame:
    return pd.read_parquet(demo.folder / "vectors.parquet")


@pytest.fixture(scope="module")
def inputs(demo):
    return read_inputs(read_study(demo.folder / "study-vectors.toml"))


def test_two_desks_have_500_scenarios_on_each_of_the_last_250_days(demo, inputs):
    assert sorted(inputs.vectors) == ["Metals", "Rates"]
    for own in inputs.vectors.values():
        assert own.days.tolist() == [day.date() for day in demo.last]
        assert set(own.counts) == {500}


def test_desks_without_vectors_are_remarked_on(demo, inputs):
    silent = {r.desk for r in inputs.remarks if r.rule == "no-vectors"}
    assert silent == set(demo.names) - {"Metals", "Rates"}
    assert not {r.rule for r in inputs.remarks} & {"missing-vectors", "short-vectors", "old-scenarios"}


def test_a_vector_is_the_pnl_before_it_where_positions_did_not_change(demo, vectors):
    pnl = -demo.loss()["Rates"]
    mine = vectors[vectors["desk"] == "Rates"]
    np.testing.assert_array_equal(mine["pnl"], pnl.reindex(mine["scenario"]).to_numpy())


def test_moves_before_the_restructuring_are_halved_from_that_day_on(demo, vectors):
    pnl = -demo.loss()["Metals"]
    mine = vectors[vectors["desk"] == "Metals"]
    plain = pnl.reindex(mine["scenario"]).to_numpy()
    changed = (mine["date"] >= HALVED) & (mine["scenario"] < HALVED)
    assert changed.sum() > 50_000
    np.testing.assert_allclose(mine["pnl"], np.where(changed, plain / 2, plain), atol=0.0051)


def test_var_on_vectors_halves_the_day_positions_do_and_var_on_pnl_does_not(demo, vectors):
    pnl = -demo.loss()["Metals"].dropna()
    table = pd.DataFrame({"date": pnl.index, "desk": "Metals", "hypothetical": pnl.to_numpy()})
    mine = vectors[(vectors["desk"] == "Metals") & vectors["date"].between("2025-06-02", "2025-07-31")]
    models = ["historical", "volatility-scaled", "unconditional-evt"]
    settings = {"models": models, "window": 500, "levels": [0.975, 0.99]}
    following = backtest.forecast(table, learn_from="vectors", vectors=mine, **settings)
    staying = backtest.forecast(table[-700:], **settings)
    before = demo.days[demo.days < HALVED][-1]
    for made, expected in ((following, 0.5), (staying, 1.0)):
        var = made.set_index(["date", "model", "level"])["var"]
        np.testing.assert_allclose(var[HALVED] / var[before], expected, rtol=0.06)


@pytest.mark.slow
def test_script_writes_the_committed_vectors(vectors, remade):
    pd.testing.assert_frame_equal(pd.read_parquet(remade / "vectors.parquet"), vectors, check_exact=True)
