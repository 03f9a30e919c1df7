"""Dynamic quantile and Ljung-Box tests against golden sets, plain second implementations and brute force."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from backtest.judging.answers import Settings
from backtest.judging.dependence import (
    TESTS,
    dynamic_quantile,
    dynamic_quantile_null,
    ljung_box,
    ljung_box_null,
    observed_moments,
)
from backtest.judging.nulls import p_upper
from tests.reference.hit_laws import all_arrangements, dynamic_quantile_slow, law_of, ljung_box_slow
from tests.reference.judging_tables import hits_on, sample_of, sample_of_hits

QUANTILE, BOX = TESTS
SETTINGS = Settings(0.05, 999, 1)
FOUR = Settings(0.05, 999, 1, 4)

# golden sets, computed by two independent implementations: days of exceptions, counted from 1
H1 = hits_on(250, [17, 18, 95, 170, 171, 240])
H2 = hits_on(500, [20, 45, 46, 120, 121, 122, 230, 300, 301, 410, 411, 455, 480])


def sample_with(hits, var, level):
    return sample_of(np.where(hits, var + 1.0, var - 1.0), var, level)


def quantile(sample, lags):
    return float(dynamic_quantile(observed_moments(sample, lags), sample.var, sample.level).sum())


@pytest.mark.parametrize(
    ("hits", "level", "one", "four"), [(H1, 0.99, 64.384878, 75.874325), (H2, 0.975, 70.426222, 74.675475)]
)
def test_golden_dynamic_quantile_with_a_constant_var(hits, level, one, four):
    sample = sample_of_hits(hits, level)
    assert quantile(sample, 1) == pytest.approx(one, abs=1e-6)
    assert quantile(sample, 4) == pytest.approx(four, abs=1e-6)


@pytest.mark.parametrize(("hits", "first", "five"), [(H1, 25.399514, 26.035163), (H2, 68.169034, 70.640293)])
def test_golden_ljung_box(hits, first, five):
    days = len(hits)
    statistic, correlations = ljung_box(np.flatnonzero(hits)[None, :], days)
    assert statistic[0] == pytest.approx(five, abs=1e-6)
    assert days * (days + 2) * correlations[0, 0] ** 2 / (days - 1) == pytest.approx(first, abs=1e-6)


@given(st.integers(12, 80), st.integers(0, 2**32 - 1), st.sampled_from([1, 4]), st.sampled_from([0.1, 0.5]))
def test_dynamic_quantile_against_the_matrix_written_out(days, seed, lags, share):
    rng = np.random.default_rng(seed)
    hits, var = rng.random(days) < share, np.exp(rng.standard_normal(days))
    assert quantile(sample_with(hits, var, 0.9), lags) == pytest.approx(
        dynamic_quantile_slow(hits, var, 0.9, lags), rel=1e-7, abs=1e-9
    )


@pytest.mark.parametrize("hits", [np.zeros(30), np.ones(30), hits_on(30, [30]), hits_on(30, [1]), hits_on(30, [1, 2])])
@pytest.mark.parametrize("lags", [1, 4])
def test_singular_columns_add_nothing(hits, lags):
    hits = hits.astype(bool)
    for var in (np.ones(30), np.arange(30) + 1.0, 1.0 + hits_on(30, [2])):
        sample = sample_with(hits, var, 0.975)
        assert quantile(sample, lags) == pytest.approx(dynamic_quantile_slow(hits, var, 0.975, lags), rel=1e-8)


def test_what_is_left_out_is_said():
    constant = QUANTILE.judge(sample_of_hits(H1), SETTINGS)
    assert "VaR does not vary and is left out" in constant.notes
    clean = QUANTILE.judge(sample_of_hits(np.zeros(250, dtype=bool)), SETTINGS)
    assert "lagged exceptions all alike are left out" in clean.notes
    assert clean.statistic == pytest.approx(249 * 0.01 / 0.99)
    assert clean.evidence == "var-high"


@given(st.integers(7, 60), st.data())
def test_ljung_box_against_plain_sums(days, data):
    hits = hits_on(days, data.draw(st.lists(st.integers(1, days), unique=True, min_size=1, max_size=days - 1)))
    statistic, _ = ljung_box(np.flatnonzero(hits)[None, :], days)
    assert statistic[0] == pytest.approx(ljung_box_slow(hits, 5), rel=1e-9)
    assert ljung_box(np.flatnonzero(~hits)[None, :], days)[0][0] == pytest.approx(statistic[0], rel=1e-9)


@pytest.mark.parametrize("count", [2, 3, 9])
def test_permutation_law_of_ljung_box_against_all_arrangements(count):
    settings = Settings(0.05, 40_000, 2)
    values = np.array([ljung_box_slow(hits, 5) for hits in all_arrangements(12, count)])
    null = ljung_box_null(12, count, settings)
    for observed in np.unique(np.round(values, 9)):
        exact = np.mean(values >= observed * (1 - 1e-8))
        error = 4 * np.sqrt(exact * (1 - exact) / 40_000) + 1e-4
        assert p_upper(null, observed * (1 - 1e-8)) == pytest.approx(exact, abs=error)


def test_law_of_dynamic_quantile_against_all_sequences():
    var, settings = 1.0 + np.arange(10) % 3, Settings(0.05, 40_000, 2)
    values, chances = law_of(lambda hits: dynamic_quantile_slow(hits, var, 0.8, 1), 10, 0.2)
    null = dynamic_quantile_null(sample_with(np.zeros(10, dtype=bool), var, 0.8), settings)
    for share in (0.01, 0.05, 0.2, 0.5, 0.9):
        point = np.sort(values)[int(share * len(values))]
        exact = chances[values >= point * (1 - 1e-8)].sum()
        error = 4 * np.sqrt(exact * (1 - exact) / 40_000) + 1e-4
        assert p_upper(null, point * (1 - 1e-8)) == pytest.approx(exact, abs=error)


def test_one_null_serves_several_desks_and_repeats():
    var = np.linspace(1, 2, 250)
    first = dynamic_quantile_null(sample_with(H1, var, 0.99), SETTINGS)
    np.testing.assert_array_equal(first, dynamic_quantile_null(sample_with(H1[::-1], var, 0.99), SETTINGS))
    assert not np.array_equal(first, dynamic_quantile_null(sample_with(H1, var, 0.99), FOUR))


def test_four_lags_see_a_return_after_three_days():
    days = [20, 23, 90, 93, 160, 163, 220, 223]
    sample = sample_with(hits_on(250, days), np.ones(250), 0.975)
    assert QUANTILE.judge(sample, SETTINGS).p_value > 0.05
    answer = QUANTILE.judge(sample, FOUR)
    assert answer.p_value < 0.05
    assert answer.evidence == "clustered"  # though none follows the day after: pi11 - pi01 is negative
    assert answer.estimate < 0


def test_exceptions_that_come_with_a_large_var_are_named_so():
    var = np.where(np.arange(500) % 50 < 5, 3.0, 1.0)
    hits = (np.arange(500) % 50) == 2
    answer = QUANTILE.judge(sample_with(hits, var, 0.975), SETTINGS)
    assert answer.p_value <= 0.01
    assert answer.evidence == "with-var"


def test_days_and_exceptions_that_do_not_suffice():
    assert QUANTILE.judge(sample_of_hits(H1[:2]), SETTINGS).missing == "needs 3 days, has 2"
    assert BOX.judge(sample_of_hits(H1[:5]), SETTINGS).missing == "needs 6 days, has 5"
    for hits, missing in (
        (0 * H1, "0 exceptions, needs 1"),
        (H1 | True, "every day is an exception, needs a day without"),
    ):
        answer = BOX.judge(sample_of_hits(hits.astype(bool)), SETTINGS)
        assert (answer.statistic, answer.p_value, answer.missing) == (0.0, None, missing)


def test_chi_square_is_wrong_for_four_lags_at_99_percent_and_the_simulated_law_is_not():
    # size of chi2(6) at nominal 5%, T = 250, 99%: .099, computed with volatile VaR paths
    var = np.exp(0.3 * np.sin(np.arange(250) / 20))
    null = dynamic_quantile_null(sample_with(H1, var, 0.99), Settings(0.05, 20_000, 5, 4))
    assert np.mean(null > stats.chi2.ppf(0.95, 6)) == pytest.approx(0.099, abs=0.02)
    fresh = dynamic_quantile_null(sample_with(H1, var, 0.99), Settings(0.05, 20_000, 6, 4))
    error = 4 * np.sqrt(2 * 0.05 * 0.95 / 20_000)
    assert np.mean(fresh > np.quantile(null, 0.95)) <= 0.05 + error


def test_size_oracle_independent_exceptions_and_clustered_ones():
    rng, var = np.random.default_rng(12), np.exp(0.3 * np.sin(np.arange(250) / 20))
    iid = [rng.random(250) < 0.025 for _ in range(600)]
    pairs = [np.repeat(rng.random(125) < 0.025, 2) for _ in range(100)]  # negative control: exceptions come in twos
    error = 3 * np.sqrt(0.05 * 0.95 / 600)
    for test in TESTS:
        p_values = [test.judge(sample_with(hits, var, 0.975), SETTINGS).p_value for hits in iid]
        assert np.mean([p is not None and p <= 0.05 for p in p_values]) <= 0.05 + error
        caught = [test.judge(sample_with(hits, var, 0.975), SETTINGS).p_value for hits in pairs]
        assert np.mean([p is not None and p <= 0.05 for p in caught]) > 0.8
