"""The demo's files: complete, adding up, read by the study form, and reproduced by the script."""

import numpy as np
import pandas as pd
import pyarrow.parquet as pq
import pytest

from backtest.study import read_study

KINDS = ["hypothetical", "actual", "risk_theoretical"]
LEGACY_CLOSED = pd.Timestamp("2019-07-01")
CSV_FILES = ("pnl.csv", "reported.csv", "desks.csv", "changes.csv", "calendar.csv")


def gaps_in_cents(demo, kind):
    """Return firm less the sum of its desks, per day, NaN where a listed desk has no row."""
    cents = np.round(demo.loss(kind) * 100)
    starts = demo.desks.set_index("desk")["valid_from"]
    listed = pd.DataFrame({desk: demo.days >= starts[desk] for desk in demo.names}, index=demo.days)
    complete = (cents.notna() | ~listed).all(axis=1)
    return (cents["Firm"] - cents.drop(columns="Firm").sum(axis=1)).where(complete)


def test_study_is_read_and_names_invented_bank(demo):
    study = read_study(demo.folder / "study.toml")
    assert "invented" in study.title
    assert study.review.subject == "HS-250"
    assert len(study.forecast.models) == 7


def test_study_files_exist(demo):
    data = read_study(demo.folder / "study.toml").data
    for name in (data.pnl, data.reported, data.desks, data.changes, data.calendar):
        assert (demo.folder / name).is_file()


def test_study_methods_follow_the_recorded_model_change(demo):
    methods = read_study(demo.folder / "study.toml").review.method
    change = demo.changes[demo.changes["kind"] == "model"]["date"].unique()
    assert [m.window for m in methods] == [500, 250]
    assert list(change) == [pd.Timestamp(methods[1].since)]
    assert change[0].year == 2024


def test_data_end_at_the_cut_off_of_the_study(demo):
    as_of = pd.Timestamp(read_study(demo.folder / "study.toml").review.as_of)
    assert demo.days[-1] == as_of == demo.rows["date"].max() == demo.reported["date"].max()


def test_calendar_is_weekdays_less_a_handful_of_holidays_a_year(demo):
    weekdays = pd.bdate_range("2015-01-01", "2025-12-31")
    assert demo.days.isin(weekdays).all()
    assert demo.days.is_unique
    assert demo.days.is_monotonic_increasing
    closed = weekdays.difference(demo.days)
    assert pd.Series(closed).dt.year.value_counts().between(2, 6).all()


def test_firm_has_eleven_years_and_desks_six_to_eight_but_the_last(demo):
    days = demo.loss().notna().sum()
    assert days["Firm"] == len(demo.days) == demo.forecast("var_99_1d")["Firm"].notna().sum()
    assert len(demo.names) == 8
    years = demo.loss().apply(lambda desk: (demo.days[-1] - desk.first_valid_index()).days / 365.25)
    assert 10.9 < years["Firm"] < 11.1
    assert years.drop(["Firm", "Structured"]).between(6, 8.01).all()


def test_structured_is_new_with_exactly_290_days(demo):
    loss = demo.loss()["Structured"]
    assert loss.notna().sum() == 290
    assert loss.iloc[-290:].notna().all()


@pytest.mark.parametrize("kind", KINDS)
def test_desks_add_up_to_the_cent_once_the_legacy_books_are_closed(demo, kind):
    gaps = gaps_in_cents(demo, kind)[demo.days >= LEGACY_CLOSED]
    assert gaps.isna().sum() == 1
    assert (gaps.dropna() == 0).all()
    assert (gaps.iloc[-290:].dropna() == 0).all()


@pytest.mark.parametrize("kind", KINDS)
def test_desks_do_not_add_up_while_legacy_books_are_open(demo, kind):
    gaps = gaps_in_cents(demo, kind)[demo.days < LEGACY_CLOSED]
    assert (gaps != 0).mean() > 0.99


def test_each_restatement_changes_firm_and_desk_alike(demo):
    change = demo.loss() - demo.loss(keep="first")
    moved = change[(change != 0) & change.notna()].dropna(how="all")
    assert len(moved) == 2
    np.testing.assert_allclose(moved["Firm"], moved["Rates"], atol=0.005)
    assert moved.drop(columns=["Firm", "Rates"]).isna().all(axis=None)


def test_reported_and_truth_have_a_row_wherever_a_desk_is_listed(demo):
    listed = sum(int((demo.days >= start).sum()) for start in demo.desks["valid_from"])
    for table in (demo.reported, demo.truth):
        assert len(table) == listed
        assert not table.duplicated(["date", "desk"]).any()
        assert not table.isna().any(axis=None)


def test_expected_shortfall_is_beyond_var_everywhere(demo):
    assert (demo.reported["es_975_1d"] > demo.reported["var_975_1d"]).all()
    for name in ("975", "99"):
        assert (demo.truth[f"es_{name}"] > demo.truth[f"var_{name}"]).all()


def test_folder_is_under_four_megabytes(demo):
    assert sum(f.stat().st_size for f in demo.folder.iterdir() if f.is_file()) < 4e6


@pytest.mark.slow
@pytest.mark.parametrize("name", CSV_FILES)
def test_script_writes_the_committed_tables_byte_for_byte(demo, remade, name):
    assert (remade / name).read_bytes() == (demo.folder / name).read_bytes()


@pytest.mark.slow
def test_script_writes_the_committed_truth(demo, remade):
    pd.testing.assert_frame_equal(pd.read_parquet(remade / "truth.parquet"), demo.truth, check_exact=True)


@pytest.mark.slow
def test_script_writes_the_committed_truth_byte_for_byte_under_the_same_versions(demo, remade):
    new, old = (pq.read_metadata(folder / "truth.parquet") for folder in (remade, demo.folder))
    if (new.created_by, new.metadata) != (old.created_by, old.metadata):
        pytest.skip("truth.parquet was committed under other versions of pyarrow or pandas, which the format records")
    assert (remade / "truth.parquet").read_bytes() == (demo.folder / "truth.parquet").read_bytes()
