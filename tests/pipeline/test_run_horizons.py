"""A study that asks for further horizons and for intervals by bootstrap."""

import numpy as np
import pandas as pd
import pytest

import backtest
from tests.pipeline.conftest import Ran, run_by_command
from tests.reference.invented_studies import study_text, tailmark, write_study

KEYS = 'fallback_share = 0.05\nhorizons = [1, 10]\nbands = "bootstrap"'


@pytest.fixture(scope="module")
def further(tables, tmp_path_factory) -> Ran:
    pnl = tables["pnl.csv"]
    one = pnl[(pnl["desk"] == "Lumber") & (pnl["known_on"] == pnl["date"])]
    files = {"pnl.csv": one[["date", "desk", "hypothetical"]].iloc[:520]}
    study = write_study(tmp_path_factory.mktemp("further"), files, study_text(forecast=KEYS))
    return run_by_command(study)


def test_longer_horizons_are_recorded_beside_one_day(further):
    table = further.record.forecasts
    table = table[table["model"].str.removesuffix(" sqrt-time").isin(["historical", "conditional-evt"])]
    counts = table.groupby(["model", "horizon"]).size()
    names = [(m, 1) for m in ("conditional-evt", "historical")] + [
        (m + s, 10) for m in ("conditional-evt", "historical") for s in ("", " sqrt-time")
    ]
    assert sorted(counts.index) == sorted(names)
    assert len(set(counts)) == 1


def test_fallbacks_and_results_count_one_day_forecasts_alone(further):
    one = further.record.forecasts
    one = one[one["horizon"] == 1]
    assert further.record.manifest["fallbacks"]["forecasts"] == len(one.drop_duplicates(["date", "desk", "model"]))
    assert not further.record.results["model"].str.contains("sqrt-time").any()


def test_the_last_twenty_days_have_their_interval_by_bootstrap(further):
    made = further.record.forecasts
    made = made[(made["horizon"] == 1) & (made["model"] == "filtered-historical")].reset_index(drop=True)
    pnl = further.record.pnl.set_index("date")["hypothetical"]
    delta = backtest.forecast(pnl, models=["filtered-historical"], window=250)
    moved = (made["var_high"] != delta["var_high"]) | (made["var_low"] != delta["var_low"])
    assert made.loc[moved, "date"].nunique() == 20
    assert made.loc[moved, "date"].min() == np.sort(made["date"].unique())[-20]


def test_a_day_is_shown_with_interval_and_horizon(further):
    last = pd.Timestamp(further.record.forecasts["date"].max())
    said = tailmark("show", further.folder, "Lumber", f"{last:%Y-%m-%d}")
    assert said.code == 0
    assert said.out.count("95% interval from estimation error: VaR ") >= 8
    assert "conditional-evt, 10 days" in said.out
    assert "conditional-evt sqrt-time, 10 days" in said.out


def test_an_unknown_kind_of_interval_is_refused(tables, tmp_path):
    study = write_study(tmp_path, {"pnl.csv": tables["pnl.csv"]}, study_text(forecast='bands = "profile"'))
    said = tailmark("check", study)
    assert said.code == 2
    assert "bands" in said.err
    assert "Traceback" not in said.err


def test_money_is_finite_at_every_horizon(further):
    assert np.isfinite(further.record.forecasts[["var", "es"]]).all(axis=None)
