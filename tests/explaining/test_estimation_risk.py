"""Estimation risk: known laws of the count under refitting, repeatable and resumable replicates, what is no law."""

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from scipy import stats

from backtest.errors import RecordError, StudyError
from backtest.explaining.estimation_risk import ESTIMATION_RISK_COLUMNS, STATISTICS, estimation_risk, simulate
from backtest.explaining.model_law import NOT_A_LAW, model_law
from backtest.forecasting.engine import DeskHistory, forecast_group
from backtest.forecasting.models import Model, resolve
from backtest.judging.answers import Settings
from backtest.judging.battery import TESTS
from backtest.judging.nulls import p_doubled
from backtest.judging.samples import Sample, read_book

SETTINGS = Settings(significance=0.05, simulations=199, seed=3, lagged_hits=1)
LEVEL, WINDOW, DAYS = 0.975, 50, 120
HISTORICAL = resolve("historical", levels=[LEVEL], window=WINDOW)
NORMAL = resolve({"name": "normal", "filter": "none", "tail": "normal"}, levels=[LEVEL], window=WINDOW)
EVERY = tuple(STATISTICS)


def desk_of(losses: np.ndarray, name: str = "Flax") -> DeskHistory:
    days = pd.bdate_range("2020-01-06", periods=len(losses))
    calendar = days.to_numpy().astype("datetime64[D]")
    known = pd.DataFrame({"date": days, "known_on": days, "loss": losses})
    return DeskHistory(name, known, calendar, {"hypothetical": pd.Series(losses, index=calendar)})


def samples_of(desk: DeskHistory, model: Model, spans: tuple[int | str, ...] = ("all",)) -> list[Sample]:
    forecasts, _ = forecast_group(desk, [model], [LEVEL])
    pnl = pd.DataFrame({"date": desk.known["date"], "desk": desk.desk, "hypothetical": -desk.known["loss"]})
    return list(read_book(pnl, forecasts).desks[0].samples(spans))


@pytest.fixture(scope="module")
def desk() -> DeskHistory:
    return desk_of(np.random.default_rng(11).normal(size=WINDOW + DAYS))


def counts_of(desk: DeskHistory, model: Model, replications: int, days: int = DAYS) -> np.ndarray:
    law, _ = model_law(desk, model, np.array([LEVEL]))
    assert law is not None
    columns = ((LEVEL, days, "binomial"),)
    return simulate("Flax", law, model, columns, SETTINGS, replications).of(*columns[0])


def plain_counts(window: int, days: int, largest: int, paths: int) -> np.ndarray:
    """Count days above the ``largest``-th largest of the last ``window`` uniform numbers: nothing of the package."""
    numbers = np.random.default_rng(99).random((paths, window + days))
    counts = np.zeros(paths)
    for day in range(days):
        past = numbers[:, day : day + window]
        counts += numbers[:, window + day] > np.partition(past, window - largest, axis=1)[:, window - largest]
    return counts


@pytest.fixture(scope="module")
def historical_counts(desk) -> np.ndarray:
    return counts_of(desk, HISTORICAL, 150)


def standard_errors(counts: np.ndarray, mean: float) -> float:
    return float((counts.mean() - mean) / (counts.std(ddof=1) / np.sqrt(len(counts))))


# the law of the count, where theory knows it


def test_historical_simulation_is_exceeded_with_probability_j_over_w_plus_1(historical_counts):
    # exchangeability: the 49th smallest of 50, the 2nd largest, is exceeded with probability 2/51 whatever the law
    assert abs(standard_errors(historical_counts, DAYS * 2 / 51)) < 4
    # negative control: the binomial's mean, which does not know of estimation, is far off
    assert standard_errors(historical_counts, DAYS * 0.025) > 4


def test_a_normal_model_is_exceeded_as_the_t_law_says(desk):
    # (L - mean)/s, s with ddof 1, is sqrt(1 + 1/W) times a t with W - 1 degrees of freedom; the model's s has ddof 0
    chance = stats.t.sf(stats.norm.ppf(LEVEL) * np.sqrt((WINDOW - 1) / (WINDOW + 1)), WINDOW - 1)
    assert chance == pytest.approx(0.0300, abs=5e-4)
    assert abs(standard_errors(counts_of(desk, NORMAL, 100), DAYS * chance)) < 4


def test_counts_of_historical_simulation_have_the_law_of_ranks(historical_counts):
    assert stats.ks_2samp(historical_counts, plain_counts(WINDOW, DAYS, 2, 3000)).pvalue > 1e-3
    # negative control: the binomial law of a VaR that is not estimated
    binomial = np.random.default_rng(4).binomial(DAYS, 0.025, 3000)
    assert stats.ks_2samp(historical_counts, binomial).pvalue < 1e-6


def test_a_window_that_moves_on_daily_narrows_the_count(historical_counts):
    # an exception raises VaR for as long as it is in the window, so exceptions limit those that follow; by plain ranks
    # the count of 120 days at a window of 50 has 0.70 of the binomial's standard deviation at the true chance
    plain, binomial = plain_counts(WINDOW, DAYS, 2, 3000).std(ddof=1), np.sqrt(DAYS * 2 / 51 * 49 / 51)
    assert plain / binomial == pytest.approx(0.70, abs=0.04)
    # the standard deviation of 150 counts has a relative standard error of about 1/sqrt(300) = 6%
    assert historical_counts.std(ddof=1) == pytest.approx(plain, rel=4 * 0.06)
    assert historical_counts.std(ddof=1) < (1 - 3 * 0.06) * binomial


# p-values


def test_every_row_has_the_stated_columns_and_p_in_0_1(desk):
    table = estimation_risk(
        desk, samples_of(desk, NORMAL, ("all", 60)), [NORMAL], SETTINGS, tests=EVERY, replications=19
    )
    assert tuple(table.columns) == ESTIMATION_RISK_COLUMNS
    assert len(table) == 2 * len(EVERY)
    assert table["p_refitted"].between(1 / 20, 1.0).all()
    assert set(table["law"]) == {"refitted"}
    assert list(table["days"]) == 4 * [DAYS] + 4 * [60]
    assert (table["seconds"] > 0.0).all()
    assert table["binomial_mean"].iloc[0] == pytest.approx(3.0)
    assert table["binomial_sd"].iloc[0] == pytest.approx(np.sqrt(120 * 0.025 * 0.975))


def test_statistics_of_replicates_are_those_of_the_battery(desk):
    sample = samples_of(desk, NORMAL)[0]
    for key, asked in STATISTICS.items():
        observed = TESTS[key].judge(sample, SETTINGS).statistic
        assert observed == pytest.approx(asked.statistic(sample, SETTINGS), rel=1e-12), key


def test_a_forecast_that_is_far_too_low_is_found(desk):
    # negative control: the same forecasts, VaR and ES halved
    right = samples_of(desk, NORMAL)[0]
    low = Sample(**{**vars(right), "var": 0.5 * right.var, "es": 0.5 * right.es})
    options = {"tests": ("binomial", "acerbi-szekely-2"), "replications": 39}
    found = estimation_risk(desk, [low], [NORMAL], SETTINGS, **options)
    assert list(found["p_refitted"]) == [2 / 40, 2 / 40]
    assert (estimation_risk(desk, [right], [NORMAL], SETTINGS, **options)["p_refitted"] > 0.05).all()


def test_replicates_are_shared_by_spans(desk):
    samples = samples_of(desk, HISTORICAL, ("all", 60))
    both = estimation_risk(desk, samples, [HISTORICAL], SETTINGS, replications=19)
    alone = estimation_risk(desk, samples[:1], [HISTORICAL], SETTINGS, replications=19)
    columns = ["p_refitted", "count_mean", "count_sd"]
    pd.testing.assert_frame_equal(both.loc[both["days"] == DAYS, columns], alone[columns])


# repeatable and resumable


def test_the_same_seed_gives_the_same_table_and_another_seed_another(desk):
    def table(seed: int) -> pd.DataFrame:
        settings = Settings(0.05, 199, seed)
        found = estimation_risk(desk, samples_of(desk, HISTORICAL), [HISTORICAL], settings, replications=19)
        return found.drop(columns="seconds")

    pd.testing.assert_frame_equal(table(3), table(3))
    assert table(3)["count_mean"].iloc[0] != table(4)["count_mean"].iloc[0]


def test_a_simulation_goes_on_where_it_stopped(desk, tmp_path):
    samples, said = samples_of(desk, HISTORICAL), []
    options = {"folder": tmp_path, "say": said.append}
    estimation_risk(desk, samples, [HISTORICAL], SETTINGS, replications=20, **options)
    longer = estimation_risk(desk, samples, [HISTORICAL], SETTINGS, replications=30, **options)
    at_once = estimation_risk(desk, samples, [HISTORICAL], SETTINGS, replications=30)
    different = ["seconds", "note"]
    pd.testing.assert_frame_equal(longer.drop(columns=different), at_once.drop(columns=different))
    assert said[0].startswith("estimation risk, Flax, historical: 19 replicates of 50 + 120 days to make, about ")
    assert said[1].startswith("estimation risk, Flax, historical: 10 replicates of 50 + 120 days to make, about ")
    assert said[1].endswith("kept from before: 20")
    assert "replicates kept from before: 20" in longer["note"].iloc[0]
    assert len(list(tmp_path.iterdir())) == 1


def test_replicates_of_another_law_are_not_taken_up(desk, tmp_path):
    other = desk_of(2.0 + np.random.default_rng(12).normal(size=WINDOW + DAYS))
    said: list[str] = []
    for one in (desk, other):
        estimation_risk(
            one, samples_of(one, HISTORICAL), [HISTORICAL], SETTINGS, replications=19, folder=tmp_path, say=said.append
        )
    assert said[1].endswith("kept from before: 0")


def test_kept_replicates_that_come_out_otherwise_now_are_dropped(desk, tmp_path):
    samples, said = samples_of(desk, HISTORICAL), []
    run = {"replications": 20, "folder": tmp_path, "say": said.append}
    before = estimation_risk(desk, samples, [HISTORICAL], SETTINGS, **run)
    path = next(tmp_path.iterdir())
    np.save(path, np.load(path) + 1.0)
    after = estimation_risk(desk, samples, [HISTORICAL], SETTINGS, **run)
    assert said[1].endswith("kept from before: 0, dropped, since the first comes out otherwise now: 20")
    assert list(after["count_mean"]) == list(before["count_mean"])


def test_a_broken_file_of_replicates_is_an_error_with_its_place(desk, tmp_path):
    samples = samples_of(desk, HISTORICAL)
    estimation_risk(desk, samples, [HISTORICAL], SETTINGS, replications=20, folder=tmp_path)
    path = next(tmp_path.iterdir())
    path.write_bytes(b"nothing of the kind")
    with pytest.raises(RecordError, match=f"{path.name}.*Delete the file"):
        estimation_risk(desk, samples, [HISTORICAL], SETTINGS, replications=20, folder=tmp_path)


# what is not defined


def test_a_model_that_is_no_law_says_so_and_keeps_its_usual_p(desk):
    reported = [Sample(**{**vars(s), "model": "in house"}) for s in samples_of(desk, HISTORICAL)]
    table = estimation_risk(desk, reported, [HISTORICAL], SETTINGS)
    assert set(table["note"]) == {NOT_A_LAW}
    assert table["p_refitted"].isna().all()
    assert table["p_value"].notna().all()
    assert set(table["law"]) == {""}


def test_a_sample_without_a_day_says_what_it_needs(desk):
    empty = samples_of(desk, HISTORICAL)[0].on(np.array([], dtype=np.intp))
    table = estimation_risk(desk, [empty], [HISTORICAL], SETTINGS, tests=("binomial",))
    assert table["p_refitted"].isna().all()
    assert table["note"].iloc[0] == "needs a day with both P&L and VaR"


def test_an_unknown_test_is_refused_with_the_near_miss(desk):
    with pytest.raises(StudyError, match="Did you mean 'binomial'"):
        estimation_risk(desk, [], [], SETTINGS, tests=("binomal",))


def test_too_few_replications_are_refused(desk):
    with pytest.raises(StudyError, match="too few replications"):
        estimation_risk(desk, [], [], SETTINGS, replications=9)


def test_a_history_that_grows_beyond_all_numbers_has_no_statistic(desk):
    law, _ = model_law(desk, NORMAL, np.array([LEVEL]))
    assert law is not None
    wild = replace(law, motion=np.array([0.0, 0.0, 1.0, 1e6, 0.0, 0.0]))
    assert np.isnan(simulate("Flax", wild, NORMAL, ((LEVEL, DAYS, "binomial"),), SETTINGS, 19).values).all()


# size


@pytest.mark.slow
def test_the_refitted_p_holds_its_size_where_the_usual_one_does_not(desk):
    # the law of counts of historical simulation is the same for every continuous law of losses: one null for all desks
    days = 400
    null = counts_of(desk, HISTORICAL, 499, days)
    counts = plain_counts(WINDOW, days, 2, 2000)
    refitted = np.array([p_doubled(null, float(count)) for count in counts])
    law = stats.binom(days, 0.025)
    usual = np.minimum(1.0, 2 * np.minimum(law.cdf(counts), law.sf(counts - 1)))
    # a share of 5% of 2000 desks has a standard error of 0.5%; the null, of 499 replicates, adds another 1%
    assert np.mean(refitted <= 0.05) < 0.05 + 4 * 0.011
    assert np.mean(refitted <= 0.05) > 0.005
    assert np.mean(usual <= 0.05) > 0.05 + 4 * 0.011
