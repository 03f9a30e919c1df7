"""A run of an invented study: what the record holds, and that it holds what the verbs on tables return."""

import numpy as np
import pandas as pd
import pytest

import backtest
from backtest import pipeline
from backtest.errors import DataError, StudyError
from backtest.judging import battery
from backtest.judging.answers import SampleTest
from backtest.recording.run_folder import TABLES, read_record
from backtest.records import BRIDGE_COLUMNS, FIT_COLUMNS, FORECAST_COLUMNS, REMARK_COLUMNS, RESULT_COLUMNS, Record
from tests.pipeline.conftest import run_by_command
from tests.reference.invented_studies import (
    DAYS,
    KNOWN,
    LEVELS,
    MODELS,
    RESTATED,
    REVIEWED,
    SHORT_DAYS,
    WINDOW,
    calendar,
    study_text,
    write_study,
)

KEY = ["date", "desk", "model", "level"]
QUICK = study_text(**REVIEWED, judge='tests = ["binomial"]').replace("simulations = 199\n", "simulations = 99\n")


def own(record: Record) -> pd.DataFrame:
    """Return the forecasts that the run made with the study's own models."""
    return record.forecasts[record.forecasts["model"].isin(MODELS)].reset_index(drop=True)


def assert_same(one: Record, other: Record, tables=tuple(TABLES)) -> None:
    for table in tables:
        pd.testing.assert_frame_equal(getattr(one, table), getattr(other, table), check_exact=True)


# what the record holds


def test_every_table_has_its_columns(reviewed):
    record = reviewed.record
    assert tuple(record.forecasts.columns) == FORECAST_COLUMNS
    assert tuple(record.fits.columns) == FIT_COLUMNS
    assert tuple(record.results.columns) == RESULT_COLUMNS
    assert tuple(record.bridge.columns) == BRIDGE_COLUMNS
    assert tuple(record.remarks.columns) == REMARK_COLUMNS
    assert {"date", "desk", "model", "var_0.99", "exception_actual_0.975"} <= set(record.exceptions.columns)
    assert {"date", "desk", "hypothetical", "actual", "first_known_hypothetical"} <= set(record.pnl.columns)


def test_only_figure_data_and_what_was_not_asked_for_have_no_rows(reviewed):
    assert [n for n in TABLES if not len(getattr(reviewed.record, n))] == ["estimation_risk", "paths"]


def test_every_forecast_stands_once_and_is_finite_with_a_status(reviewed):
    forecasts = reviewed.record.forecasts
    assert not forecasts.duplicated(KEY).any()
    assert np.isfinite(forecasts["var"]).all()
    assert (forecasts["status"] != "").all()


def test_every_test_is_asked_of_every_desk_model_kind_level_and_span(reviewed):
    results = reviewed.record.results
    tests = [key for key, test in battery.TESTS.items() if isinstance(test, SampleTest)]
    asked = results[results["test"].isin(tests)]
    # two desks have the reported model and four of ours, the short one the reported model alone; each sample is asked
    # how often, when (two tests) and, with a PIT or without, two tests of its tail
    assert len(asked) == (2 * 5 + 1) * 2 * len(LEVELS) * 2 * 5


def test_the_manifest_names_inputs_models_desks_and_seed(reviewed):
    manifest = reviewed.record.manifest
    assert [(i["role"], i["rows"]) for i in manifest["inputs"]] == [("pnl", 1722), ("reported", 3440)]
    assert [m["name"] for m in manifest["models"]] == list(MODELS)
    assert {name: desk["days"] for name, desk in manifest["desks"].items()} == {
        "House": DAYS, "Lumber": DAYS, "Wool": SHORT_DAYS,
    }  # fmt: skip
    assert (manifest["seeds"], manifest["as_of"]) == ({"study": 11}, f"{calendar()[-1]:%Y-%m-%d}")


# reported and own forecasts


def test_reported_rows_are_kept_as_reported(reviewed, tables):
    kept = reviewed.record.forecasts.query("status == 'as reported'")
    columns = [*KEY, "var", "es"]
    given = tables["reported.csv"].sort_values(["desk", "model", "level", "date"], ignore_index=True)[columns]
    pd.testing.assert_frame_equal(kept[columns].reset_index(drop=True), given, check_dtype=False, rtol=1e-12)
    assert kept["origin"].isna().all()


def test_a_run_forecasts_what_the_verb_forecasts(reviewed, tables):
    alone = backtest.forecast(tables["pnl.csv"], models=MODELS, levels=LEVELS, window=WINDOW)
    pd.testing.assert_frame_equal(own(reviewed.record), alone, check_exact=True)


def test_the_historical_model_repeats_the_banks_own(reviewed):
    """The bank's method is the model's: they agree but for the days on which the bank knew a restated value early."""
    forecasts = reviewed.record.forecasts.query("desk == 'Lumber' and level == 0.99").set_index("date")
    ours = forecasts.query("model == 'historical'")["var"]
    theirs = forecasts.query("model == 'HS-250'")["var"]
    assert len(ours) == DAYS - WINDOW
    early = (ours.index > calendar()[RESTATED]) & (ours.index <= calendar()[KNOWN])
    np.testing.assert_allclose(ours[~early], theirs.reindex(ours.index)[~early], rtol=1e-9)


def test_a_desk_too_short_for_the_window_is_judged_on_its_reported_forecasts_alone(reviewed):
    record = reviewed.record
    assert set(record.forecasts.query("desk == 'Wool'")["model"]) == {"HS-250"}
    rows = record.results.query("desk == 'Wool'")
    assert set(rows["model"]) == {"HS-250"}
    assert set(rows.query("test == 'binomial'")["days"]) == {SHORT_DAYS}
    assert set(rows.query("test == 'binomial'")["decision"]) <= {"rejected", "not rejected"}
    assert set(record.bridge.query("desk == 'Wool'")["note"]) == {"not tested: history"}


# results


def test_exceptions_of_a_result_are_counted_from_the_tables(reviewed):
    record = reviewed.record
    both = record.forecasts.merge(record.pnl, on=["date", "desk"])
    both = both[(both["date"] >= calendar()[-250]) & (both["level"] == 0.975)]
    counted = (-both["actual"] > both["var"]).groupby([both["desk"], both["model"]]).sum()
    rows = record.results.query("test == 'binomial' and pnl_kind == 'actual' and level == 0.975")
    rows = rows[rows["from"] >= f"{calendar()[-250]:%Y-%m-%d}"].drop_duplicates(["desk", "model"])
    assert len(rows) == 11
    for row in rows.itertuples():
        assert row.exceptions == counted[row.desk, row.model]


def test_results_of_a_run_are_those_of_the_verb(alone):
    record = alone.record
    ours = record.results[~record.results["test"].str.startswith(("sufficient", "basel"))].reset_index(drop=True)
    theirs = backtest.judge(record.pnl, own(record), simulations=199, seed=11, days=[250, "all"])
    theirs = theirs[theirs["test"] != "basel-zone"].reset_index(drop=True)
    assert len(ours) == 4 * 2 * 2 * 5 + 3 * 2 * 2  # models x levels x spans x tests, and the comparisons with one
    text = ours.select_dtypes("str").columns
    pd.testing.assert_frame_equal(ours[text], theirs[text].fillna(""), check_dtype=False)
    rest = ours.columns.difference(text)
    pd.testing.assert_frame_equal(ours[rest], theirs[rest], check_dtype=False, rtol=1e-12)


def test_the_firm_has_a_zone_and_a_study_without_one_says_so(reviewed, alone):
    (zone,) = reviewed.record.results.query("test == 'basel-zone'").itertuples()
    assert (zone.desk, zone.model, zone.level, zone.days, zone.decision) == ("House", "HS-250", 0.99, 250, "green")
    assert alone.record.results.query("test == 'basel-zone'")["decision"].tolist() == ["not tested"]


def test_both_values_of_a_restated_day_are_kept(reviewed, tables):
    day = calendar()[RESTATED]
    kept = reviewed.record.pnl.query("desk == 'Lumber'").set_index("date")
    values = tables["pnl.csv"].query("desk == 'Lumber' and date == @day").set_index("known_on")["hypothetical"]
    assert kept.loc[day, "hypothetical"] == values[calendar()[KNOWN]]
    assert kept.loc[day, "first_known_hypothetical"] == values[day]
    assert kept["first_known_hypothetical"].notna().sum() == 1


def test_the_log_holds_every_exception_of_the_reported_model(reviewed):
    record = reviewed.record
    both = record.forecasts.query("model == 'HS-250'").merge(record.pnl, on=["date", "desk"])
    both = both[(-both["hypothetical"] > both["var"]) | (-both["actual"] > both["var"])]
    expected = set(zip(both["date"], both["desk"], strict=True))
    assert set(zip(record.exceptions["date"], record.exceptions["desk"], strict=True)) == expected
    assert len(record.exceptions) == len(expected) > 20


# the bridge


def test_the_bridge_goes_from_the_reported_to_the_last_challenger_on_shared_days(reviewed):
    rows = reviewed.record.bridge.query("desk == 'House' and level == 0.975 and pnl_kind == 'hypothetical'")
    assert rows[["step", "model"]].to_numpy().tolist() == [
        ["reported", "HS-250"],
        ["longer window", "historical 500"],
        ["plus filter", "filtered-historical 500"],
        ["plus tail", "conditional-evt 500"],
    ]
    assert set(rows["days"]) == {DAYS - 500}
    table = reviewed.record.forecasts.query("desk == 'House' and level == 0.975")
    for row in rows.itertuples():
        var = table[(table["model"] == row.model) & (table["date"] >= calendar()[500])]["var"]
        assert row.average_var == pytest.approx(var.mean(), rel=1e-12)


def test_a_study_without_a_reported_model_has_a_bridge_that_starts_at_historical(alone):
    assert alone.said.code == 0
    steps = alone.record.bridge.query("level == 0.99")["step"].tolist()
    assert steps == ["longer window", "plus filter", "plus tail"]
    assert not len(alone.record.exceptions)
    assert "no reported VaR was supplied" in alone.said.out


# what changes nothing, and what is cut off


def test_the_number_of_workers_changes_nothing(reviewed):
    again = run_by_command(reviewed.study, "--workers", 2)
    assert again.folder != reviewed.folder
    assert_same(again.record, reviewed.record)
    times = {"started", "finished", "files"}
    assert {k: v for k, v in again.record.manifest.items() if k not in times} == {
        k: v for k, v in reviewed.record.manifest.items() if k not in times
    }
    files = [{n: f["sha256"] for n, f in ran.record.manifest["files"].items()} for ran in (again, reviewed)]
    assert files[0] == files[1]


def test_the_cut_off_leaves_out_all_that_is_later(tables, tmp_path):
    """A run as of a day is the run of an extract that ends there, restatements not yet known included."""
    cut = calendar()[RESTATED + 2]
    text = QUICK.replace("[review]", f"[review]\nas_of = {cut:%Y-%m-%d}")
    whole = run_by_command(write_study(tmp_path / "whole", tables, text)).record
    short = {name: t[t["date"] <= cut] for name, t in tables.items()}
    short["pnl.csv"] = short["pnl.csv"].query("known_on <= @cut")
    ended = run_by_command(write_study(tmp_path / "ended", short, QUICK)).record
    for table in (whole.pnl, whole.forecasts, whole.fits, whole.exceptions):
        assert table["date"].max() <= cut
    assert whole.forecasts["date"].max() == cut
    assert whole.results["to"].max() == f"{cut:%Y-%m-%d}"
    assert_same(whole, ended, ("forecasts", "fits", "results", "exceptions", "bridge"))
    pd.testing.assert_frame_equal(whole.pnl.drop(columns="known_on"), ended.pnl.drop(columns="known_on"))
    assert {"after-cut-off", "known-after-cut-off"} <= set(whole.remarks["rule"])


@pytest.mark.parametrize("place", [RESTATED + 3, KNOWN + 1])
def test_no_forecast_of_a_run_learns_from_its_own_day_or_later(reviewed, tables, tmp_path, place):
    """All P&L from a day on becomes noise, what was restated later is dropped: no forecast up to that day moves."""
    day, pnl = calendar()[place], tables["pnl.csv"]
    before = pnl[pnl["known_on"] < day]
    later = pnl[(pnl["date"] >= day) & (pnl["known_on"] == pnl["date"])].copy()
    noise = np.random.default_rng(place).standard_cauchy((len(later), 2))
    later[["hypothetical", "actual"]] = (1e4 * noise).round(2)
    files = tables | {"pnl.csv": pd.concat([before, later])}
    other = run_by_command(write_study(tmp_path, files, QUICK)).record
    columns = [*KEY, "origin", "var", "es", "mean", "sigma", "shape", "scale", "threshold", "status"]
    ours, theirs = (
        r.forecasts[r.forecasts["date"] <= day].sort_values(KEY)[columns].reset_index(drop=True)
        for r in (reviewed.record, other)
    )
    assert len(ours) > 2000
    pd.testing.assert_frame_equal(ours, theirs, check_exact=True)
    fits = [
        r.fits[r.fits["date"] <= day].sort_values(["desk", "date"], ignore_index=True) for r in (reviewed.record, other)
    ]
    pd.testing.assert_frame_equal(*fits, check_exact=True)


def test_the_check_on_the_future_can_fail(reviewed, tables, tmp_path):
    """Negative control: the day before does move the forecast."""
    day, pnl = calendar()[400], tables["pnl.csv"].copy()
    pnl.loc[pnl["date"] == calendar()[399], "hypothetical"] -= 1e6
    other = run_by_command(write_study(tmp_path, tables | {"pnl.csv": pnl}, QUICK)).record
    made = (own(r) for r in (reviewed.record, other))
    ours, theirs = (t.loc[t["date"] == day, "var"].to_numpy() for t in made)
    assert (ours != theirs).sum() == len(ours) == 2 * len(MODELS) * len(LEVELS)


# names come before data

UNKNOWN = {
    "model": {"forecast": 'models = ["conditional-evtt"]'},
    "pair": {"forecast": '[[forecast.model]]\nname = "mine"\nfilter = "garhc"'},
    "option": {"forecast": '[[forecast.model]]\nname = "mine"\nfilter = "ewma"\nmean = "ar1"'},
    "test": {"judge": 'tests = ["binomal"]'},
    "rules": {"review": 'rules = "basel-mar33"'},
    "method": {"review": '[[review.method]]\nfrom = 2020-01-01\nwindow = 250\ntail = "empircal"'},
}


@pytest.mark.parametrize("kind", UNKNOWN)
def test_names_are_resolved_before_data_are_read(tmp_path, kind):
    text = study_text(**UNKNOWN[kind])
    if kind == "model":
        text = text.replace('models = ["historical", "ewma-normal", "filtered-historical", "conditional-evt"]\n', "")
    study = backtest.read_study(write_study(tmp_path, {}, days_first(text)))
    with pytest.raises(StudyError) as caught:
        backtest.run(study)
    assert "pnl.csv" not in str(caught.value)
    assert caught.value.value in ("conditional-evtt", "garhc", "ar1", "binomal", "basel-mar33", "empircal")
    assert [p.name for p in tmp_path.iterdir()] == ["study.toml"]


def days_first(text: str) -> str:
    """Return a study in which days = ... stands before a [[review.method]] block, as TOML wants it."""
    days = 'days = [250, "all"]\n'
    return text.replace(days, "").replace("[review]\n", "[review]\n" + days)


def test_without_the_data_the_data_are_what_is_complained_about(tmp_path):
    study = backtest.read_study(write_study(tmp_path, {}, study_text()))
    with pytest.raises(DataError, match=r"pnl\.csv"):
        backtest.run(study)


def test_a_challenger_may_not_bear_the_name_of_the_reported_model(tables, tmp_path):
    review = 'subject = "historical"'
    study = backtest.read_study(write_study(tmp_path, tables, study_text(**REVIEWED | {"review": review})))
    with pytest.raises(StudyError, match="two models of the same name"):
        backtest.run(study)


def test_a_challenger_may_not_bear_the_name_of_another_reported_model(tables, tmp_path):
    """The subject is not the only name that reported forecasts bring along."""
    rival = tables["reported.csv"].assign(model="historical")
    files = tables | {"reported.csv": pd.concat([tables["reported.csv"], rival])}
    study = backtest.read_study(write_study(tmp_path, files, QUICK))
    for verb in (backtest.run, pipeline.check):
        with pytest.raises(StudyError, match="'historical'"):
            verb(study)
    assert {p.name for p in tmp_path.iterdir()} == {*files, "study.toml"}


@pytest.mark.parametrize("name", ["HS-250 re-performed", "historical 500 (bridge)", "mine sqrt-time"])
def test_a_model_may_not_bear_a_name_that_a_run_makes_itself(tables, tmp_path, name):
    text = QUICK.replace("[judge]", f'[[forecast.model]]\nname = "{name}"\nfilter = "ewma"\n[judge]')
    study = backtest.read_study(write_study(tmp_path, tables, text))
    with pytest.raises(StudyError, match="kept for what a run makes") as caught:
        pipeline.check(study)
    assert caught.value.value == name


@pytest.mark.parametrize("workers", [0, -1, 1.5, "2", True])
def test_workers_are_a_whole_number_of_threads(tables, tmp_path, workers):
    study = backtest.read_study(write_study(tmp_path, tables, QUICK))
    with pytest.raises(StudyError, match="workers"):
        backtest.run(study, workers=workers)
    assert {p.name for p in tmp_path.iterdir()} == {*tables, "study.toml"}


def test_a_bridge_step_does_not_take_the_name_of_another_model(tables, tmp_path):
    """A user's model that is called like a step of the bridge, but is not it, is neither used for it nor doubled."""
    mine = '[[forecast.model]]\nname = "historical 500"\nfilter = "ewma"\n'
    text = QUICK.replace("[judge]", mine + "[judge]")
    record = run_by_command(write_study(tmp_path, tables, text)).record
    assert not record.forecasts.duplicated(KEY).any()
    step = record.bridge.query("desk == 'House' and level == 0.99 and step == 'longer window'").iloc[0]
    historical = record.forecasts[record.forecasts["model"] == step["model"]]
    assert step["model"] != "historical 500"
    assert historical["sigma"].isna().all()


# the verbs run and read_study


def test_run_from_python_returns_folder_sentences_and_fallbacks(tables, tmp_path):
    study = backtest.read_study(write_study(tmp_path, tables, QUICK))
    seen: list[tuple[str, int, int]] = []
    outcome = backtest.run(study, tmp_path / "mine", workers=2, progress=lambda *step: seen.append(step))
    assert outcome.folder == tmp_path / "mine"
    assert len(outcome.sentences) == 6
    counted = read_record(outcome.folder).manifest["fallbacks"]
    assert outcome.fallback_share == counted["fallbacks"] / counted["forecasts"]
    assert 0 < outcome.fallback_share < 0.05
    assert not outcome.too_many_fallbacks
    assert {what for what, _, _ in seen} >= {"reading", "forecasting desk x filter", "bridge by desk", "judging"}
    assert all(0 <= done <= total for _, done, total in seen)
