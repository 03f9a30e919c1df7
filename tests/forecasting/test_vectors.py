"""Models on current-position histories: the same engine, another past."""

import numpy as np
import pandas as pd
import pytest

import backtest
from backtest.errors import DataError, StudyError
from backtest.forecasting.models import NAMED
from backtest.forecasting.windows import plan, plan_vectors
from backtest.reading.frames import vectors_table
from backtest.records import NO_VECTORS
from tests.reference.datasets import garch_t, pnl_series
from tests.reference.invented_vectors import long_vectors

DAYS, WINDOW, LEVELS = 380, 300, (0.975, 0.99)
PAIRS = [
    {"name": f"{f} {t}", "filter": f, "tail": t}
    for f in ("none", "ewma", "garch")
    for t in ("empirical", "normal", "gpd")
]


@pytest.fixture(scope="module")
def pnl() -> pd.Series:
    return pnl_series(garch_t(DAYS, 41)[0])


@pytest.fixture(scope="module")
def positions() -> np.ndarray:
    """Positions of each day: halved at day 350, and a little different every day."""
    rng = np.random.default_rng(5)
    return np.where(np.arange(DAYS) < 350, 1.0, 0.5) * rng.uniform(0.95, 1.05, DAYS)


def on_vectors(pnl, vectors, models=PAIRS, **options) -> pd.DataFrame:
    settings = {"window": WINDOW, "levels": LEVELS, **options}
    return backtest.forecast(pnl, models=models, learn_from="vectors", vectors=vectors, **settings)


def planned(vectors: pd.DataFrame, days: pd.DatetimeIndex, window: int):
    own = vectors_table(vectors, ["desk"])["desk"]
    return plan_vectors(own, days.to_numpy().astype("datetime64[D]"), window)


def test_constant_positions_reproduce_the_forecasts_on_pnl_exactly(pnl):
    vectors = long_vectors(pnl, range(WINDOW, DAYS), WINDOW)
    models = list(NAMED)
    plain = backtest.forecast(pnl, models=models, window=WINDOW, levels=LEVELS)
    pd.testing.assert_frame_equal(on_vectors(pnl, vectors, models), plain, check_exact=True)


def test_longer_vectors_than_the_window_give_their_last_scenarios(pnl):
    long, short = (long_vectors(pnl, range(320, DAYS), n) for n in (320, WINDOW))
    pd.testing.assert_frame_equal(on_vectors(pnl, long), on_vectors(pnl, short), check_exact=True)


def test_the_plan_pairs_each_day_with_the_vector_of_its_own_positions(pnl, positions):
    days = pnl.index
    found = planned(long_vectors(pnl, range(310, 330), 305, positions), days, WINDOW)
    assert found.targets.tolist() == days[310:330].to_numpy().astype("datetime64[D]").tolist()
    assert (found.origins == days[309:329].to_numpy().astype("datetime64[D]")).all()
    pasts = np.concatenate([found.pasts(rows) for rows in found.blocks()])
    expected = [-positions[t] * pnl.to_numpy()[t - WINDOW : t] for t in range(310, 330)]
    np.testing.assert_array_equal(pasts, expected)


def test_the_plan_has_the_blocks_and_refits_of_a_plan_on_pnl(pnl):
    days = pnl.index.to_numpy().astype("datetime64[D]")
    known = pd.DataFrame({"date": pnl.index, "known_on": pnl.index, "loss": -pnl.to_numpy()})
    on_pnl, ours = plan(known, days, 100), planned(long_vectors(pnl, range(100, DAYS), 100), pnl.index, 100)
    assert ours.blocks() == on_pnl.blocks()
    np.testing.assert_array_equal(ours.places, on_pnl.places)
    for rows in ours.blocks():
        np.testing.assert_array_equal(ours.refits(rows, 5), on_pnl.refits(rows, 5))


def test_a_day_without_a_full_vector_is_no_target(pnl):
    whole, short = long_vectors(pnl, range(310, 320), WINDOW), long_vectors(pnl, range(320, 325), WINDOW - 1)
    found = planned(pd.concat([whole, short]), pnl.index, WINDOW)
    assert len(found.targets) == 10
    assert len(planned(short, pnl.index, WINDOW).targets) == 0
    assert len(plan_vectors(NO_VECTORS, found.targets, WINDOW).targets) == 0


def test_a_vector_of_no_business_day_is_no_target(pnl):
    found = planned(long_vectors(pnl, range(310, 320), WINDOW), pnl.index.delete(315), WINDOW)
    assert len(found.targets) == 9
    assert pnl.index[315].to_datetime64() not in found.targets


def test_scenarios_on_or_after_the_target_enter_no_past(pnl):
    """Reading refuses them; the plan, where "before" is written, has no use for them all the same."""
    own = vectors_table(long_vectors(pnl, range(311, 312), 311), ["desk"])["desk"]
    early = own.kept(np.array([True]), pnl.index[[305]].to_numpy().astype("datetime64[D]"))
    found = plan_vectors(early, pnl.index.to_numpy().astype("datetime64[D]"), WINDOW)
    assert found.origins.tolist() == [pnl.index[304].date()]
    np.testing.assert_array_equal(found.pasts(slice(0, 1))[0], -pnl.to_numpy()[305 - WINDOW : 305])


def test_scrambling_later_vectors_leaves_forecasts_bit_identical(pnl, positions):
    vectors = long_vectors(pnl, range(WINDOW, DAYS), WINDOW, positions)
    day = pnl.index[340]
    later = vectors["date"] > day
    scrambled = vectors.assign(pnl=vectors["pnl"].mask(later, np.random.default_rng(3).standard_cauchy(len(vectors))))
    ours, theirs = (t[t["date"] <= day] for t in (on_vectors(pnl, vectors), on_vectors(pnl, scrambled)))
    assert len(ours) == 41 * len(PAIRS) * len(LEVELS)
    pd.testing.assert_frame_equal(ours.reset_index(drop=True), theirs.reset_index(drop=True), check_exact=True)
    without = on_vectors(pnl, vectors[~later])
    pd.testing.assert_frame_equal(ours.reset_index(drop=True), without, check_exact=True)


def test_the_check_can_fail(pnl, positions):
    """Negative control: another vector of the day itself moves every model's forecast of that day."""
    vectors = long_vectors(pnl, range(335, 345), WINDOW, positions)
    day = pnl.index[340]
    changed = vectors.assign(pnl=vectors["pnl"].mask(vectors["date"] == day, 1.1 * vectors["pnl"]))
    ours, theirs = (t[t["date"] == day]["var"].to_numpy() for t in (on_vectors(pnl, vectors), on_vectors(pnl, changed)))
    np.testing.assert_allclose(theirs, 1.1 * ours, rtol=1e-9)
    assert (ours > 0).all()


def test_the_pnl_does_not_reach_forecasts_that_learn_from_vectors(pnl, positions):
    vectors = long_vectors(pnl, range(335, 345), WINDOW, positions)
    columns = ["date", "origin", "model", "level", "var", "es", "mean", "sigma", "status"]
    ours, theirs = on_vectors(pnl, vectors)[columns], on_vectors(3 * pnl, vectors)[columns]
    pd.testing.assert_frame_equal(ours, theirs, check_exact=True)


@pytest.fixture(scope="module")
def moving(pnl, positions) -> pd.DataFrame:
    return on_vectors(pnl, long_vectors(pnl, range(WINDOW, DAYS), WINDOW, positions))


def test_every_pair_has_a_finite_forecast_and_a_status_a_day(moving):
    assert len(moving) == len(PAIRS) * (DAYS - WINDOW) * len(LEVELS)
    assert np.isfinite(moving[["var", "es", "pit_hypothetical"]]).all(axis=None)
    assert (moving["status"] != "").all()
    assert (moving["es"] >= moving["var"]).all()
    assert (moving["origin"] < moving["date"]).all()


def test_forecasts_follow_positions_the_same_day(moving, pnl, positions):
    """Each day's VaR is that of positions of one, times the positions of the day: the moves are the same."""
    of_one = backtest.forecast(pnl, models=PAIRS, window=WINDOW, levels=LEVELS)
    both = moving.merge(of_one, on=["date", "model", "level"], suffixes=("", "_one"))
    held = pd.Series(positions, index=pnl.index).reindex(both["date"]).to_numpy()
    ratio = both["var"] / both["var_one"] / held
    fitted = both["model"].str.startswith("garch")
    np.testing.assert_allclose(ratio[~fitted], 1, rtol=1e-9)
    np.testing.assert_allclose(ratio[fitted], 1, rtol=1e-7)  # the search starts elsewhere and ends at the same optimum


def test_the_order_of_rows_and_the_number_of_workers_change_nothing(moving, pnl, positions):
    vectors = long_vectors(pnl, range(WINDOW, DAYS), WINDOW, positions).sample(frac=1, random_state=2)
    pd.testing.assert_frame_equal(on_vectors(pnl, vectors, workers=2), moving)


def test_a_desk_without_vectors_has_no_forecast(pnl):
    table = pd.concat([pnl.rename("hypothetical").rename_axis("date").reset_index().assign(desk=d) for d in ("a", "b")])
    made = on_vectors(table, long_vectors(pnl, range(WINDOW, WINDOW + 5), WINDOW, desk="a"), models=["historical"])
    assert set(made["desk"]) == {"a"}
    assert len(made) == 5 * len(LEVELS)


def test_parameters_kept_for_days_are_refused(pnl):
    vectors = long_vectors(pnl, range(335, 345), WINDOW)
    with pytest.raises(StudyError, match=r"'filtered-historical'.*found 5.*recalibrate_days = 1"):
        on_vectors(pnl, vectors, models=["historical", "filtered-historical"], recalibrate_days=5)
    assert len(on_vectors(pnl, vectors, models=["historical", "ewma-normal"], recalibrate_days=5)) == 40


@pytest.mark.parametrize(("learn_from", "given"), [("vectors", False), ("hypothetical", True), ("actual", True)])
def test_vectors_and_learn_from_go_together(pnl, learn_from, given):
    vectors = long_vectors(pnl, range(335, 345), WINDOW) if given else None
    with pytest.raises(StudyError, match="go together"):
        backtest.forecast(pnl, window=WINDOW, learn_from=learn_from, vectors=vectors)


def _without(column):
    return lambda t: t.drop(columns=column)


def _cell(column, value):
    return lambda t: t.assign(**{column: t[column].astype(object).where(t.index != 7, value)})


BROKEN = {
    "no scenario column": (_without("scenario"), r"vectors: a column is missing.*'scenario'"),
    "no rows": (lambda t: t.iloc[:0], r"vectors: the table has no rows"),
    "an unknown desk": (_cell("desk", "dusk"), r"unknown desk, found 'dusk'.*Did you mean 'desk'"),
    "an infinite value": (_cell("pnl", np.inf), r"vectors, row 7, pnl: an infinite value"),
    "an empty value": (_cell("pnl", np.nan), r"vectors, row 7, pnl: a scenario has no P&L"),
    "no number": (_cell("pnl", "1,5"), r"vectors, pnl: not a number"),
    "no date": (_cell("scenario", pd.NaT), r"vectors, row 7, scenario: a date is missing"),
    "a scenario on the target": (
        lambda t: t.assign(scenario=t["scenario"].where(t.index != 7, t["date"])),
        r"vectors, row 7, scenario: the scenario had not happened.*before the date",
    ),
    "a row twice": (
        lambda t: pd.concat([t, t.iloc[[7]]], ignore_index=True),
        r"vectors, row 50, scenario: the same date, desk and scenario stand twice",
    ),
}


@pytest.mark.parametrize("case", BROKEN)
def test_a_broken_table_is_refused_with_its_row(pnl, case):
    change, says = BROKEN[case]
    with pytest.raises(DataError, match=says):
        on_vectors(pnl, change(long_vectors(pnl, range(60, 61), 50)), window=50, models=["historical"])
