"""Filter reported: the institution's own VaR as the scale, its own small examination."""

import numpy as np
import pandas as pd
import pytest

import backtest
from backtest.errors import DataError, StudyError
from backtest.forecasting.engine import INCOMPLETE, DeskHistory, forecast_group
from backtest.forecasting.histories import reported_scales, unscaled_days
from backtest.forecasting.models import resolve
from backtest.forecasting.windows import NO_REPORT, ReportedVar, plan, plan_scaled
from tests.reference.datasets import garch_t, pnl_series

DAYS, WINDOW, LEVELS = 380, 300, (0.975, 0.99)
TAILS = ("empirical", "t", "gpd")
MODELS = [{"name": f"reported {tail}", "filter": "reported", "tail": tail} for tail in TAILS]
INDEX = pnl_series(np.zeros(DAYS)).index


def table_of(var: np.ndarray, days=INDEX, levels=LEVELS, factor=0.8) -> pd.DataFrame:
    """A reported table of one model: ``var`` at the deepest level, ``factor`` of the next deeper at each shallower."""
    parts = [
        pd.DataFrame({"date": days, "desk": "desk", "level": level, "var": var * factor ** (len(levels) - 1 - i)})
        for i, level in enumerate(levels)
    ]
    return pd.concat(parts, ignore_index=True)


def forecast(losses, reported, models=MODELS, **options) -> pd.DataFrame:
    settings = {"levels": LEVELS, "window": WINDOW, **options}
    return backtest.forecast(pnl_series(losses), models=models, reported=reported, **settings)


def scaled(losses, var, window, levels=(0.99,)):
    """The plan of losses on consecutive weekdays with VaR (L, n), and those days."""
    days = pd.bdate_range("2020-01-06", periods=len(losses))
    known = pd.DataFrame({"date": days, "known_on": days, "loss": losses})
    calendar = days.to_numpy().astype("datetime64[D]")
    return plan_scaled(known, calendar, ReportedVar(np.array(levels), calendar, np.atleast_2d(var)), window), calendar


def all_pasts(found) -> np.ndarray:
    return np.concatenate([found.pasts(rows) for rows in found.blocks()])


@pytest.fixture(scope="module")
def losses() -> np.ndarray:
    return garch_t(DAYS, 51)[0]


@pytest.fixture(scope="module")
def var() -> np.ndarray:
    """Positions that change every day, and are halved at day 340."""
    rng = np.random.default_rng(6)
    return 2.5 * rng.uniform(0.5, 1.5, DAYS) * np.where(np.arange(DAYS) < 340, 1.0, 0.5)


@pytest.fixture(scope="module")
def made(losses, var) -> pd.DataFrame:
    return forecast(losses * var, table_of(var))


def test_every_tail_has_a_finite_row_a_day_and_level(made):
    assert len(made) == len(TAILS) * (DAYS - WINDOW) * len(LEVELS)
    assert np.isfinite(made[["var", "es", "pit_hypothetical", "var_low", "var_high"]]).all(axis=None)
    assert (made["es"] >= made["var"]).all()
    assert (made["origin"] < made["date"]).all()
    assert set(made["status"]) == {"ok", "few excesses"}


def test_the_forecast_is_the_quantile_of_the_ratios_times_the_var_of_the_target(made, losses, var):
    """Losses are VaR at 99% times independent-of-position moves; the scale is 0.8 of it, the VaR at 97.5%."""
    of_moves = forecast(losses / 0.8, None, [{"name": f"reported {t}", "filter": "none", "tail": t} for t in TAILS])
    both = made.merge(of_moves, on=["date", "model", "level"], suffixes=("", "_moves"))
    scale = 0.8 * pd.Series(var, index=INDEX).reindex(both["date"]).to_numpy()
    assert len(both) == len(made)
    for column in ("var", "es", "var_low", "es_high"):
        np.testing.assert_allclose(both[column], scale * both[f"{column}_moves"], rtol=1e-6)
    np.testing.assert_allclose(both["pit_hypothetical"], both["pit_hypothetical_moves"], atol=1e-6)
    np.testing.assert_allclose(both["sigma"], scale)
    assert (both["mean"] == 0).all()


def test_constant_ratios_give_that_multiple(var):
    table = forecast(1.3 * var, table_of(var, levels=(0.99,)), MODELS[:2])
    scale = pd.Series(var, index=INDEX).reindex(table["date"]).to_numpy()
    assert len(table) == 2 * (DAYS - WINDOW) * len(LEVELS)
    np.testing.assert_allclose(table["var"], 1.3 * scale, rtol=1e-12)
    np.testing.assert_allclose(table["es"], 1.3 * scale, rtol=1e-12)


@pytest.mark.parametrize("c", [1e-6, 0.01, 3.0, 1e9])
def test_the_unit_of_the_money_changes_nothing_else(made, losses, var, c):
    table = forecast(c * (losses * var), table_of(c * var))
    for column in ("var", "es", "sigma"):
        np.testing.assert_allclose(table[column], c * made[column], rtol=1e-9)
    np.testing.assert_allclose(table["pit_hypothetical"], made["pit_hypothetical"], atol=1e-9)
    assert (table["status"] == made["status"]).all()


def test_a_scale_twice_too_small_gives_the_same_forecast(made, losses, var):
    """The institution's VaR is a scale: halving it doubles the multiple."""
    table = forecast(losses * var, table_of(var / 2))
    np.testing.assert_allclose(table["var"], made["var"], rtol=1e-9)
    np.testing.assert_allclose(table["sigma"], made["sigma"] / 2, rtol=1e-12)


def test_what_comes_later_does_not_reach_the_forecast(made, losses, var):
    at, rng = 350, np.random.default_rng(8)
    late, after = np.arange(DAYS) >= at, np.arange(DAYS) > at
    theirs = forecast(
        np.where(late, rng.standard_cauchy(DAYS), losses * var),
        table_of(np.where(after, rng.uniform(-1, 9, DAYS), var)),
    )
    columns = ["date", "origin", "model", "level", "var", "es", "sigma", "shape", "status"]
    ours, theirs = (t[t["date"] <= INDEX[at]].reset_index(drop=True)[columns] for t in (made, theirs))
    assert len(ours) == (at - WINDOW + 1) * len(TAILS) * len(LEVELS)
    pd.testing.assert_frame_equal(ours, theirs, check_exact=True)


def test_the_check_can_fail(made, losses, var):
    """Negative control: the VaR of the day before, and the loss of that day, move the forecast."""
    last = np.arange(DAYS) == DAYS - 2
    for x, v in ((np.where(last, 50.0, losses * var), var), (losses * var, np.where(last, 0.01, var))):
        ours, theirs = (t[t["date"] == INDEX[-1]]["es"].to_numpy() for t in (made, forecast(x, table_of(v))))
        assert (ours != theirs).all()


def test_the_order_of_rows_and_the_number_of_workers_change_nothing(made, losses, var):
    shuffled = table_of(var).sample(frac=1, random_state=3)
    pd.testing.assert_frame_equal(forecast(losses * var, shuffled, workers=2), made)


def test_a_restated_loss_is_learnt_only_once_known(losses, var):
    pnl = pd.DataFrame({"date": INDEX, "desk": "desk", "hypothetical": -losses * var, "known_on": INDEX})
    again = pnl.iloc[[350]].assign(hypothetical=-900.0, known_on=INDEX[360])
    options = {"models": MODELS[:1], "levels": LEVELS, "window": WINDOW, "reported": table_of(var)}
    table = backtest.forecast(pd.concat([pnl, again]), **options)
    first = backtest.forecast(pnl, **options)
    moved = (table["es"] != first["es"]).groupby(table["date"]).any()
    assert not moved[: INDEX[360]].any()
    assert moved[INDEX[361] :].all()


def test_a_day_without_a_positive_var_is_no_target_and_in_no_past():
    var = np.full(12, 2.0)
    var[[4, 7, 9]] = 0.0, -1.0, np.nan
    found, days = scaled(np.arange(12.0), var, 5)
    pasts = dict(zip(found.targets, all_pasts(found), strict=True))
    assert list(pasts) == [days[6], days[8], days[10], days[11]]
    assert pasts[days[6]].tolist() == [0, 0.5, 1, 1.5, 2.5]
    assert pasts[days[8]].tolist() == [0.5, 1, 1.5, 2.5, 3]
    assert pasts[days[11]].tolist() == [1.5, 2.5, 3, 4, 5]
    assert found.origins.tolist() == [d.item() for d in days[[5, 6, 8, 10]]]
    assert found.scaling.complete.all()


def test_a_day_without_pnl_keeps_its_forecast():
    losses = np.arange(12.0)
    losses[8] = np.nan
    found, days = scaled(losses, np.full(12, 2.0), 5)
    pasts = dict(zip(found.targets, all_pasts(found), strict=True))
    assert pasts[days[8]].tolist() == [1.5, 2, 2.5, 3, 3.5]
    assert pasts[days[9]].tolist() == [1.5, 2, 2.5, 3, 3.5]


def test_the_level_is_the_lowest_reported_on_every_day_of_the_past():
    deep, low = np.full(14, 4.0), np.full(14, 2.0)
    low[3] = np.nan
    found, days = scaled(np.arange(14.0), [low, deep], 5, LEVELS)
    level = dict(zip(found.targets, found.scaling.level, strict=True))
    assert [level[d] for d in days[5:9]] == [0.99] * 4  # day 3 is in the past, and was reported at 99% alone
    assert [level[d] for d in days[9:]] == [0.975] * 5
    pasts = all_pasts(found)
    assert pasts[3].tolist() == [0.75, 1, 1.25, 1.5, 1.75]
    assert pasts[4].tolist() == [2, 2.5, 3, 3.5, 4]
    assert found.scaling.var.tolist() == [4.0] * 4 + [2.0] * 5
    assert found.scaling.complete.all()


def test_a_level_that_comes_and_goes_never_mixes_its_ratios_with_anothers():
    """Positions in two levels' series may run on from one day to the next although the series differ."""
    low, deep = np.full(40, 2.0), np.full(40, 8.0)
    low[10], deep[20] = np.nan, np.nan
    found, _ = scaled(np.full(40, 8.0), [low, deep], 6, LEVELS)
    expected = np.where(found.scaling.level == 0.975, 4.0, 1.0)
    assert (all_pasts(found) == expected[:, None]).all()
    assert set(found.scaling.level) == {0.975, 0.99}
    assert len(found.targets) == 34


def test_a_level_that_is_not_reported_for_the_target_is_not_used():
    low, deep = np.full(10, 2.0), np.full(10, 4.0)
    low[8] = np.nan
    found, days = scaled(np.arange(10.0), [low, deep], 5, LEVELS)
    assert dict(zip(found.targets, found.scaling.level, strict=True))[days[8]] == 0.99


def test_where_no_level_is_complete_the_lowest_stands_with_a_status():
    low, deep = np.full(9, 2.0), np.full(9, 4.0)
    low[3], deep[4] = np.nan, np.nan
    found, days = scaled(np.arange(9.0), [low, deep], 5, LEVELS)
    assert not found.scaling.complete.any()
    assert all_pasts(found)[0].tolist() == [0, 0.5, 1, 2, 2.5]
    assert found.targets[0] == days[6]


def test_the_status_and_the_fits_table_say_the_level(losses, var):
    known = pd.DataFrame({"date": INDEX, "known_on": INDEX, "loss": losses * var})
    days = INDEX.to_numpy().astype("datetime64[D]")
    low, deep = 0.8 * var, var.copy()
    low[320], deep[330] = np.nan, np.nan
    report = ReportedVar(np.array(LEVELS), days, np.array([low, deep]))
    history = DeskHistory("d", known, days, {}, None, report)
    forecasts, fits = forecast_group(history, [resolve(MODELS[0], levels=LEVELS, window=50)], LEVELS)
    kinds = fits.set_index("date")["filter"]
    assert kinds[INDEX[319]] == "reported at 0.975"
    assert kinds[INDEX[321]] == "reported at 0.99"
    assert kinds[INDEX[375]] == "reported at 0.975"
    assert (fits["status"] == INCOMPLETE).sum() == 41  # day 330 lacks 99%, 331 to 370 have both gaps in their past
    status = forecasts.set_index("date")["status"]
    assert set(status[INDEX[330] : INDEX[370]]) == {INCOMPLETE}
    assert set(status[INDEX[371] :]) == {"ok"}


def test_a_desk_for_which_nothing_is_reported_has_no_forecast(losses, var):
    pnl = pd.concat([pd.DataFrame({"date": INDEX, "desk": d, "hypothetical": -losses}) for d in ("desk", "other")])
    table = backtest.forecast(pnl, models=["historical", MODELS[0]], window=WINDOW, reported=table_of(var))
    counts = table.groupby(["desk", "model"]).size()
    assert ("other", "reported empirical") not in counts
    assert counts["desk", "reported empirical"] == counts["other", "historical"] == 160


def test_days_left_out_are_remarked_with_their_reasons(losses, var):
    gone = var.copy()
    gone[[100, 310, 330]] = np.nan, 0.0, np.nan
    days = INDEX.to_numpy().astype("datetime64[D]")
    known = pd.DataFrame({"date": INDEX, "known_on": INDEX, "loss": losses})
    histories = [
        DeskHistory(name, known, days, {}, None, report)
        for name, report in (("a", ReportedVar(np.array([0.99]), days, gone[None, :])), ("b", NO_REPORT))
    ]
    models = [resolve(m, levels=LEVELS, window=WINDOW) for m in (MODELS[0], "historical")]
    first, second = unscaled_days(histories, models)
    assert (first.desk, first.count, first.first, first.last) == ("a", 3, str(days[300]), str(days[330]))
    assert (
        "of them 1 before 300 ratios to the reported VaR are known and 2 without a positive reported VaR" in first.text
    )
    assert (second.desk, second.count) == ("b", 80)
    assert len(plan(known, days, WINDOW).targets) == 80
    assert len(plan_scaled(known, days, NO_REPORT, WINDOW).targets) == 0
    assert unscaled_days(histories, models[1:]) == []


def reported_by(*names) -> pd.DataFrame:
    return pd.concat([table_of(np.full(DAYS, 2.0 + i)).assign(model=name) for i, name in enumerate(names)])


def test_the_scale_is_that_of_the_subject_else_of_the_only_model():
    models = [resolve(MODELS[0], levels=LEVELS)]
    both = reported_by("HS", "SVaR")
    assert reported_scales(models, both, "SVaR")["desk"].var[1, 0] == 3.0
    assert reported_scales(models, both[both["model"] == "HS"], None)["desk"].var[1, 0] == 2.0
    assert reported_scales([resolve("historical", levels=LEVELS)], both, None) == {}


def test_several_reported_models_without_a_subject_are_refused(losses):
    with pytest.raises(StudyError, match=r"'reported empirical'.*VaR of one reported model, found 'HS, SVaR'.*subject"):
        forecast(losses, reported_by("HS", "SVaR"))


def test_a_model_that_scales_by_nothing_reported_is_refused(losses):
    with pytest.raises(StudyError, match=r"'reported empirical'.*Supply data.reported \(in Python: reported=\)"):
        forecast(losses, None)


def _without(column):
    return lambda t: t.drop(columns=column)


def _cell(column, value):
    return lambda t: t.assign(**{column: t[column].astype(object).where(t.index != 7, value)})


BROKEN = {
    "no level": (_without("level"), r"reported: a column is missing, found 'level'"),
    "no VaR column": (_without("var"), r"reported: a column is missing, found 'var'"),
    "a level in percent": (_cell("level", 99.0), r"reported, row 7, level: not a level, found 99"),
    "no level in a row": (_cell("level", np.nan), r"reported, row 7, level: not a level"),
    "an infinite VaR": (_cell("var", np.inf), r"reported, row 7, var: an infinite value"),
    "no number": (_cell("var", "1,5"), r"reported, var: not a number"),
    "no date": (_cell("date", "soon"), r"reported, row 7, date: not a date"),
    "an unknown desk": (_cell("desk", "dusk"), r"unknown desk, found 'dusk'.*Did you mean 'desk'"),
    "a row twice": (lambda t: pd.concat([t, t.iloc[[7]]], ignore_index=True), r"reported, row 760: .*stand twice"),
}


@pytest.mark.parametrize("case", BROKEN)
def test_a_broken_reported_table_is_refused_with_its_row(losses, var, case):
    change, says = BROKEN[case]
    with pytest.raises(DataError, match=says):
        forecast(losses, change(table_of(var)))
