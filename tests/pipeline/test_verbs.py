"""The verbs on tables: forecast and judge, pandas in and out."""

import numpy as np
import pandas as pd
import pytest

import backtest
from backtest.errors import DataError, StudyError
from backtest.records import FORECAST_COLUMNS, RESULT_COLUMNS
from tests.reference.datasets import garch_t, pnl_series
from tests.reference.invented_studies import historical

WINDOW, LEVELS = 250, (0.975, 0.99)


@pytest.fixture(scope="module")
def losses() -> np.ndarray:
    return garch_t(500, 17)[0]


@pytest.fixture(scope="module")
def pnl(losses) -> pd.Series:
    return pnl_series(losses)


@pytest.fixture(scope="module")
def made(pnl) -> pd.DataFrame:
    return backtest.forecast(pnl, models=["historical"], levels=LEVELS, window=WINDOW)


@pytest.fixture(scope="module")
def judged(pnl, made) -> pd.DataFrame:
    return backtest.judge(pnl, made, simulations=199)


# forecast


def test_forecast_is_what_a_plain_loop_gives(losses, made):
    expected = [historical(losses[t - WINDOW : t], q) for t in range(WINDOW, 500) for q in LEVELS]
    table = made.sort_values(["date", "level"])
    np.testing.assert_allclose(table[["var", "es"]], expected, rtol=1e-12)


def test_forecast_returns_a_row_a_day_model_and_level_of_one_desk(pnl, made):
    assert tuple(made.columns) == FORECAST_COLUMNS
    assert len(made) == 250 * len(LEVELS)
    assert set(made["desk"]) == {"desk"}
    assert made["date"].min() == pnl.index[WINDOW]
    assert (made["origin"] < made["date"]).all()


def test_without_a_choice_the_four_usual_models_are_forecast_at_two_levels():
    short = pnl_series(garch_t(1003, 4)[0])
    table = backtest.forecast(short)
    assert list(table["model"].unique()) == [
        "historical",
        "filtered-historical",
        "unconditional-evt",
        "conditional-evt",
    ]
    assert table.groupby(["model", "level"]).size().tolist() == [3] * 8


def test_a_model_of_ones_own_keeps_its_window(pnl):
    mine = {"name": "mine", "filter": "ewma", "decay": 0.97, "tail": "empirical", "window": 400}
    table = backtest.forecast(pnl, models=["historical", mine], levels=LEVELS, window=WINDOW)
    assert table.groupby("model").size().to_dict() == {"historical": 500, "mine": 200}


def test_learning_from_actual_pnl_changes_the_forecast_and_not_the_pit_of_the_day(pnl):
    table = pd.DataFrame({"date": pnl.index, "desk": "d", "hypothetical": pnl.to_numpy(), "actual": 2 * pnl.to_numpy()})
    one, other = (
        backtest.forecast(table, models=["historical"], levels=LEVELS, window=WINDOW, learn_from=kind)
        for kind in ("hypothetical", "actual")
    )
    np.testing.assert_allclose(other["var"], 2 * one["var"])
    np.testing.assert_array_equal(other["pit_actual"], one["pit_hypothetical"])


def test_a_business_day_without_pnl_keeps_its_forecast_and_has_no_pit(pnl):
    gap = pnl.index[300]
    table = backtest.forecast(
        pnl.drop(gap), models=["historical"], levels=[0.99], window=WINDOW, calendar=pnl.index
    ).set_index("date")
    assert len(table) == 250
    assert np.isfinite(table.loc[gap, "var"])
    assert np.isnan(table.loc[gap, "pit_hypothetical"])
    assert table["pit_hypothetical"].isna().sum() == 1


def test_a_window_that_no_desk_reaches_is_refused_and_one_that_a_desk_reaches_is_not(pnl):
    with pytest.raises(DataError, match=r"no desk reaches the window of 250 days.*250 days with P&L, desk 'desk'"):
        backtest.forecast(pnl.iloc[:WINDOW], models=["historical"], levels=LEVELS, window=WINDOW)
    assert len(backtest.forecast(pnl.iloc[: WINDOW + 1], models=["historical"], levels=LEVELS, window=WINDOW)) == 2


def test_progress_counts_every_task(pnl):
    seen: list[tuple[str, int, int]] = []
    backtest.forecast(
        pnl, models=["historical", "volatility-scaled"], levels=LEVELS, window=WINDOW,
        progress=lambda *step: seen.append(step),
    )  # fmt: skip
    assert seen[-2:] == [("forecasting desk x filter", 1, 2), ("forecasting desk x filter", 2, 2)]


REFUSED = {
    "a level in percent": ({"levels": [99]}, StudyError, "99"),
    "a level of one": ({"levels": [1.0]}, StudyError, "1.0"),
    "no level": ({"levels": []}, StudyError, "level"),
    "an unknown model": ({"models": ["historcal"]}, StudyError, "Did you mean 'historical'?"),
    "an unknown option": ({"models": [{"name": "m", "fliter": "ewma"}]}, StudyError, "Did you mean 'filter'?"),
    "a name twice": ({"models": ["historical", "historical"]}, StudyError, "'historical'"),
    "a window too short for its tail": ({"models": ["unconditional-evt"], "window": 150}, StudyError, "15"),
    "an absent kind": ({"learn_from": "actual"}, StudyError, "'actual'"),
    "a level twice": ({"levels": [0.99, 0.99]}, StudyError, "twice"),
    "a level as text": ({"levels": ["0.99"]}, StudyError, "'0.99'"),
    "a complex level": ({"levels": [0.99j]}, StudyError, "levels"),
    "a level that is NaN": ({"levels": [float("nan")]}, StudyError, "nan"),
    "a level too large for a float": ({"levels": [10**400]}, StudyError, "levels"),
    "one level, not a list": ({"levels": 0.99}, StudyError, "[0.975, 0.99]"),
    "levels as text": ({"levels": "0.99"}, StudyError, "not a list"),
    "a short window": ({"window": 49}, StudyError, "at least 50"),
    "a window as text": ({"window": "250"}, StudyError, "'250'"),
    "a window that is no whole number": ({"window": 250.0}, StudyError, "250.0"),
    "a window that is a truth value": ({"window": True}, StudyError, "True"),
    "a window without end": ({"window": float("inf")}, StudyError, "inf"),
    "no window": ({"window": None}, StudyError, "None"),
    "a window beyond all data": ({"window": 10**30}, StudyError, "at most"),
    "never recalibrated": ({"recalibrate_days": 0}, StudyError, "recalibrate_days"),
    "recalibrated by halves": ({"recalibrate_days": 1.5}, StudyError, "1.5"),
    "no worker": ({"workers": 0}, StudyError, "workers"),
    "workers as text": ({"workers": "all"}, StudyError, "'all'"),
    "a bare name": ({"models": "historical"}, StudyError, '["historical"]'),
    "no model": ({"models": []}, StudyError, "no model"),
    "None for models": ({"models": None}, StudyError, "not a list"),
    "a number for a model": ({"models": [5]}, StudyError, "not a model"),
    "a decay of one": ({"models": [{"name": "m", "filter": "ewma", "decay": 1}]}, StudyError, "decay"),
    "a kept name": ({"models": [{"name": "m sqrt-time"}]}, StudyError, "kept"),
    "None for a kind": ({"learn_from": None}, StudyError, "learn_from"),
    "None for bands": ({"bands": None}, StudyError, "bands"),
    "horizons as text": ({"horizons": "10"}, StudyError, "not a list"),
    "a horizon that is NaN": ({"horizons": [float("nan")]}, StudyError, "nan"),
    "a seed as text": ({"seed": "1"}, StudyError, "seed"),
    "no day in the calendar": ({"calendar": []}, DataError, "no day"),
    "a calendar of numbers": ({"calendar": [1, 2, 3]}, DataError, "no date"),
    "a calendar that ends before the P&L": ({"calendar": pd.bdate_range("2010-01-04", periods=400)}, DataError, "span"),
    "a calendar with a missing day": ({"calendar": [pd.NaT]}, DataError, "missing"),
    "a list for vectors": ({"vectors": [1], "learn_from": "vectors"}, DataError, "not a table"),
    "a list for reported": ({"reported": [1], "models": [{"filter": "reported"}]}, DataError, "not a table"),
}


@pytest.mark.parametrize("case", REFUSED)
def test_forecast_refuses_what_does_not_exist_or_fit(pnl, case):
    options, error, says = REFUSED[case]
    with pytest.raises(error) as caught:
        backtest.forecast(pnl, **options)
    assert says in str(caught.value)
    assert "\n" not in str(caught.value)


@pytest.mark.parametrize("table", [None, [1.0, 2.0], 5, np.zeros(300), "pnl.csv"])
def test_what_is_no_table_is_refused_by_both_verbs(made, table):
    for verb in (lambda: backtest.forecast(table), lambda: backtest.judge(table, made)):
        with pytest.raises(DataError, match="pnl: not a table"):
            verb()


# judge


def test_judge_returns_the_columns_of_results(judged):
    assert tuple(judged.columns) == RESULT_COLUMNS
    assert not judged.duplicated(["desk", "model", "pnl_kind", "level", "test"]).any()


def test_judge_counts_what_can_be_counted(losses, made, judged):
    for level in LEVELS:
        var = made.loc[made["level"] == level, "var"].to_numpy()
        rows = judged[(judged["level"] == level) & (judged["test"] == "binomial")]
        assert rows["exceptions"].tolist() == [int((losses[WINDOW:] > var).sum())]
        assert rows["days"].tolist() == [250]


def test_judge_takes_any_table_with_var_and_says_what_a_test_lacks(pnl, made):
    bare = backtest.judge(pnl, made[["date", "desk", "model", "level", "var"]], simulations=199)
    binomial = bare[bare["test"] == "binomial"]
    assert set(binomial["decision"]) <= {"rejected", "not rejected"}
    assert len(binomial) == 2
    lacking = bare[bare["test"].isin(["mcneil-frey", "acerbi-szekely-2"])]
    assert len(lacking) == 4
    assert set(lacking["decision"]) == {"not tested"}
    assert lacking["phrase"].str.startswith("not tested: needs ").all()


def test_judge_looks_back_over_the_spans_asked_for(pnl, made):
    table = backtest.judge(pnl, made, tests=["binomial"], days=[125, "all"])
    assert table["days"].tolist() == [125, 250] * 2
    assert table["from"].tolist() == [f"{pnl.index[375]:%Y-%m-%d}", f"{pnl.index[250]:%Y-%m-%d}"] * 2


def test_judge_judges_a_restated_day_on_its_latest_value(pnl, made):
    table = pd.DataFrame({"date": pnl.index, "desk": "desk", "hypothetical": pnl.to_numpy(), "known_on": pnl.index})
    again = table.iloc[[400]].assign(hypothetical=-1e6, known_on=pnl.index[420])
    before, after = (backtest.judge(t, made, tests=["binomial"]) for t in (table, pd.concat([table, again])))
    assert (after["exceptions"] - before["exceptions"]).tolist() == [1, 1]


def test_the_seed_moves_simulated_p_values_alone(pnl, made, judged):
    same, other = (backtest.judge(pnl, made, simulations=199, seed=seed) for seed in (1, 2))
    pd.testing.assert_frame_equal(same, judged)
    moved = same["p_value"].fillna(-1) != other["p_value"].fillna(-1)
    assert moved.any()
    assert set(same.loc[moved, "law"]) <= {"simulated", "permutation"}


def test_significance_moves_decisions_alone(pnl, made):
    strict, loose = (backtest.judge(pnl, made, simulations=199, significance=a) for a in (0.001, 0.499))
    pd.testing.assert_series_equal(strict["p_value"], loose["p_value"])
    tested = strict["p_value"].notna()
    assert (loose.loc[tested, "decision"] == "rejected").tolist() == (loose.loc[tested, "p_value"] <= 0.499).tolist()
    assert (strict.loc[tested, "decision"] == "rejected").sum() < (loose.loc[tested, "decision"] == "rejected").sum()


REFUSED_BY_JUDGE = {
    "an unknown test": ({"tests": ["kupeic"]}, StudyError, "Did you mean 'kupiec'?"),
    "a span of zero": ({"days": [0]}, StudyError, "0"),
    "one span, not a list": ({"days": 250}, StudyError, "not a list"),
    "a bare word": ({"days": "all"}, StudyError, "not a list"),
    "a span twice": ({"days": [250, 250]}, StudyError, "twice"),
    "too few simulations": ({"simulations": 9}, StudyError, "at least 99"),
    "simulations by halves": ({"simulations": 99.5}, StudyError, "99.5"),
    "a seed below zero": ({"seed": -1}, StudyError, "seed"),
    "a significance of one half": ({"significance": 0.5}, StudyError, "significance"),
    "no tests": ({"tests": None}, StudyError, "judge.tests"),
    "a number for a test": ({"tests": [5]}, StudyError, "judge.tests"),
}


@pytest.mark.parametrize("case", REFUSED_BY_JUDGE)
def test_judge_refuses_what_does_not_exist(pnl, made, case):
    options, error, says = REFUSED_BY_JUDGE[case]
    with pytest.raises(error, match=says.replace("?", r"\?")):
        backtest.judge(pnl, made, **options)


def test_judge_refuses_a_forecast_that_stands_twice(pnl, made):
    with pytest.raises(DataError, match="twice"):
        backtest.judge(pnl, pd.concat([made, made.iloc[[7]]]))
