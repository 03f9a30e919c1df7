"""The steps of the bridge: which forecasts stand between a reported VaR and the last challenger."""

import datetime as dt

import numpy as np
import pandas as pd
import pytest

from backtest.errors import StudyError
from backtest.explaining import steps
from backtest.explaining.steps import Method, choose_window, desk_steps, perform_again, resolve_windows
from backtest.forecasting.engine import DeskHistory, forecast_group, groups, joined
from backtest.forecasting.models import Model, resolve, resolve_all
from backtest.records import FORECAST_COLUMNS, REPORTED_STATUS
from tests.reference.datasets import garch_t
from tests.reference.invented_studies import historical

LEVELS = (0.975, 0.99)
DAYS = pd.bdate_range("2020-01-06", periods=900)
NO_ROWS = pd.DataFrame({column: pd.Series(dtype="float64") for column in FORECAST_COLUMNS})


def history(losses: np.ndarray) -> DeskHistory:
    days = DAYS[: len(losses)]
    known = pd.DataFrame({"date": days, "known_on": days, "loss": losses})
    calendar = days.to_numpy().astype("datetime64[D]")
    return DeskHistory("Wool", known, calendar, {"hypothetical": pd.Series(losses, index=calendar)})


def forecasts(desk: DeskHistory, models: list[Model]) -> pd.DataFrame:
    return joined([forecast_group(desk, group, LEVELS)[0] for group in groups(models)], FORECAST_COLUMNS)


def method(since: str, window: int, **options: object) -> Method:
    return Method(dt.date.fromisoformat(since), resolve({"name": since, "window": window, **options}, levels=LEVELS))


@pytest.fixture(scope="module")
def losses() -> np.ndarray:
    return garch_t(900, 23)[0]


@pytest.fixture(scope="module")
def desk(losses) -> DeskHistory:
    return history(losses)


@pytest.fixture(scope="module")
def reported(desk) -> pd.DataFrame:
    """Return a bank's historical simulation over 100 days, rows as reported."""
    rows = forecasts(desk, [resolve({"name": "HS-100", "window": 100}, levels=LEVELS)])
    return rows.assign(status=REPORTED_STATUS, origin=pd.NaT)


def build(desk: DeskHistory, reported: pd.DataFrame = NO_ROWS, made: pd.DataFrame = NO_ROWS, **options: object):
    settings = {"subject": "HS-100", "methods": (), "ready": (), "levels": LEVELS} | options
    return desk_steps(desk, reported, made, **settings)


# the window


@pytest.mark.parametrize(("days", "window"), [(900, 500), (751, 500), (750, 500), (749, None), (500, None)])
def test_the_window_is_the_longest_that_leaves_250_shared_days(losses, days, window):
    assert choose_window(history(losses[:days]), []) == window


@pytest.mark.parametrize(("days", "window"), [(1250, 1000), (1249, 750), (1000, 750), (999, 500)])
def test_longer_windows_are_tried_first(days, window):
    long = pd.bdate_range("2015-01-05", periods=days)
    known = pd.DataFrame({"date": long, "known_on": long, "loss": 1.0})
    calendar = long.to_numpy().astype("datetime64[D]")
    full = DeskHistory("Wool", known, calendar, {"hypothetical": pd.Series(1.0, index=calendar)})
    assert choose_window(full, []) == window


def test_only_days_with_a_reported_var_and_a_pnl_are_shared(losses, desk, reported):
    late = reported[reported["date"] >= DAYS[651]]
    assert choose_window(desk, [reported]) == 500
    assert choose_window(desk, [late]) is None  # 249 days
    assert choose_window(desk, [reported[reported["date"] >= DAYS[650]]]) == 500
    empty = reported.assign(var=reported["var"].where(reported["date"] >= DAYS[651]))
    assert choose_window(desk, [empty]) is None
    gone = losses.copy()
    gone[700] = np.nan
    assert choose_window(history(gone[:751]), []) == 500
    assert choose_window(history(gone[:750]), []) is None


# the subject performed again


def test_a_method_performed_again_is_the_plain_loop(losses, desk):
    again = perform_again(desk, [method("2019-01-01", 250)], LEVELS)
    expected = [historical(losses[t - 250 : t], q) for t in range(250, 900) for q in LEVELS]
    np.testing.assert_allclose(again.sort_values(["date", "level"])[["var", "es"]], expected, rtol=1e-12)


def test_each_day_is_performed_by_the_method_in_force(losses, desk):
    change = 600
    blocks = [method("2020-01-01", 500), method(f"{DAYS[change]:%Y-%m-%d}", 100)]
    again = perform_again(desk, blocks, LEVELS)
    at_99 = again[again["level"] == 0.99].set_index("date")["var"]
    assert not again.duplicated(["date", "level"]).any()
    assert at_99.index.min() == DAYS[500]
    assert at_99[DAYS[change - 1]] == pytest.approx(historical(losses[change - 501 : change - 1], 0.99)[0], rel=1e-12)
    assert at_99[DAYS[change]] == pytest.approx(historical(losses[change - 100 : change], 0.99)[0], rel=1e-12)


def test_before_the_first_method_nothing_is_performed(desk):
    again = perform_again(desk, [method(f"{DAYS[700]:%Y-%m-%d}", 100)], LEVELS)
    assert again["date"].min() == DAYS[700]


# the steps


def test_with_a_method_there_are_five_steps_in_order(desk, reported):
    found = build(desk, reported, methods=[method("2019-01-01", 100)])
    assert [(s.name, s.model, s.window) for s in found.steps] == [
        ("reported", "HS-100", 100),
        ("re-performed", "HS-100 re-performed", 100),
        ("longer window", "historical 500", 500),
        ("plus filter", "filtered-historical 500", 500),
        ("plus tail", "conditional-evt 500", 500),
    ]


def test_a_reported_method_performed_again_gives_what_was_reported(desk, reported):
    found = build(desk, reported, methods=[method("2019-01-01", 100)])
    columns = ["date", "level", "var", "es"]
    first, second = (s.forecasts[columns].reset_index(drop=True) for s in found.steps[:2])
    pd.testing.assert_frame_equal(first, second)


def test_without_a_method_the_reported_window_is_not_known_and_there_is_no_second_step(desk, reported):
    found = build(desk, reported)
    assert [s.name for s in found.steps] == ["reported", "longer window", "plus filter", "plus tail"]
    assert found.steps[0].window is None


def test_without_a_subject_the_bridge_starts_at_historical(desk):
    found = build(desk, subject=None)
    assert [(s.name, s.model) for s in found.steps] == [
        ("longer window", "historical 500"),
        ("plus filter", "filtered-historical 500"),
        ("plus tail", "conditional-evt 500"),
    ]


def test_a_step_holds_the_forecasts_of_its_model_alone(desk):
    for step in build(desk, subject=None).steps:
        assert set(step.forecasts["model"]) == {step.model}
        assert step.forecasts.groupby("level").size().tolist() == [400, 400]
        plain = forecasts(desk, [resolve(step.model.removesuffix(" 500"), levels=LEVELS, window=500)])
        np.testing.assert_array_equal(step.forecasts["var"], plain["var"])


def test_forecasts_already_made_are_used_and_not_made_again(desk):
    ready = resolve_all(["conditional-evt", "historical"], levels=LEVELS, window=500)
    made = forecasts(desk, list(ready))
    found = build(desk, made=made, ready=ready, subject=None)
    assert [s.model for s in found.steps] == ["historical", "filtered-historical 500", "conditional-evt"]
    assert set(found.extra["model"]) == {"filtered-historical 500"}


def test_a_model_of_another_window_does_not_stand_in(desk):
    ready = resolve_all(["historical"], levels=LEVELS, window=300)
    found = build(desk, made=forecasts(desk, list(ready)), ready=ready, subject=None)
    assert found.steps[0].model == "historical 500"


def test_the_same_pair_under_a_name_of_the_users_does_stand_in(desk):
    mine = {"name": "mine", "filter": "none", "tail": "empirical", "window": 500}
    ready = resolve_all([mine], levels=LEVELS)
    found = build(desk, made=forecasts(desk, list(ready)), ready=ready, subject=None)
    assert found.steps[0].model == "mine"


def test_a_name_that_another_model_bears_is_not_taken(desk):
    mine = {"name": "historical 500", "filter": "ewma", "window": 300}
    ready = resolve_all([mine], levels=LEVELS)
    found = build(desk, made=forecasts(desk, list(ready)), ready=ready, subject=None)
    assert found.steps[0].model == "historical 500 (bridge)"
    assert found.steps[0].forecasts["sigma"].isna().all()


def test_what_was_forecast_for_the_bridge_alone_is_handed_on_once(desk, reported):
    found = build(desk, reported, methods=[method("2019-01-01", 100)])
    assert set(found.extra["model"]) == {s.model for s in found.steps[1:]}
    assert not found.extra.duplicated(["date", "model", "level"]).any()


@pytest.mark.parametrize("days", [749, 400])
def test_a_desk_with_too_little_history_has_no_steps(losses, days):
    found = build(history(losses[:days]), subject=None)
    assert (found.steps, len(found.extra)) == ((), 0)


def test_a_desk_that_the_subject_does_not_report_has_no_steps(desk):
    assert build(desk).steps == ()


def test_the_bridge_looks_no_further_than_the_evening_before(losses, desk, reported):
    changed = losses.copy()
    changed[700:] = np.random.default_rng(1).standard_cauchy(200)
    options = {"methods": [method("2019-01-01", 100)]}
    for one, other in zip(
        build(desk, reported, **options).steps, build(history(changed), reported, **options).steps, strict=True
    ):
        ours, theirs = (
            s.forecasts[s.forecasts["date"] <= DAYS[700]][["date", "level", "var", "es"]] for s in (one, other)
        )
        assert len(ours) >= 402
        pd.testing.assert_frame_equal(ours, theirs, check_exact=True)


def test_a_level_out_of_reach_of_the_last_step_is_refused_before_any_data():
    assert set(resolve_windows(LEVELS)) == set(steps.WINDOWS) == {1000, 750, 500}
    with pytest.raises(StudyError, match=r"0\.85"):
        resolve_windows([0.85, 0.99])
