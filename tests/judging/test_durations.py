"""Duration tests against golden sets, a second fit by search, orthonormality and brute force."""

import numpy as np
import pytest
from scipy import stats

from backtest.judging.answers import Settings
from backtest.judging.durations import (
    SHAPE_RANGE,
    TESTS,
    gmm_null,
    moment_conditions,
    orthonormal,
    weibull,
    weibull_null,
)
from backtest.judging.nulls import p_upper
from tests.reference.hit_laws import all_arrangements, law_of, weibull_slow
from tests.reference.judging_tables import hits_on, sample_of_hits

WEIBULL, GMM = TESTS
SETTINGS = Settings(0.05, 999, 1)

# golden sets, computed by two independent implementations: days of exceptions, counted from 1
H1 = hits_on(250, [17, 18, 95, 170, 171, 240])
H2 = hits_on(500, [20, 45, 46, 120, 121, 122, 230, 300, 301, 410, 411, 455, 480])


def fitted(hits, level=0.99):
    return weibull(np.flatnonzero(hits)[None, :], len(hits), level)


def conditions(hits, rate, order):
    gaps = np.diff(np.flatnonzero(hits))
    return moment_conditions(gaps, np.zeros_like(gaps), 1, rate, order)[:, 0]


@pytest.mark.parametrize(
    ("hits", "level", "values"),
    [(H1, 0.99, (0.735733, 0.020790, 0.738537, 2.670008)), (H2, 0.975, (0.643750, 0.028586, 3.964351, 3.984623))],
)
def test_golden_weibull(hits, level, values):
    fit = fitted(hits, level)
    assert [float(part[0]) for part in fit] == pytest.approx(values, abs=1e-6)


def test_golden_gmm():
    found = np.cumsum(conditions(H1, 0.01, 5) ** 2)[[0, 1, 2, 4]]
    np.testing.assert_allclose(found, [1.550081, 1.931407, 2.001133, 2.023946], atol=1e-6)
    found = np.cumsum(conditions(H2, 0.025, 5) ** 2)[[0, 1, 2, 4]]
    np.testing.assert_allclose(found, [0.021368, 0.069533, 1.187803, 7.237985], atol=1e-6)
    # independence: rate one over the mean duration, first condition zero
    of_one, of_two = (conditions(hits, 1 / np.diff(np.flatnonzero(hits)).mean(), 3) for hits in (H1, H2))
    np.testing.assert_allclose(np.cumsum(of_one**2), [0.0, 0.148536, 0.151242], atol=1e-6)
    assert np.sum(of_two**2) == pytest.approx(1.428780, abs=1e-6)


def test_values_of_the_polynomials():
    # Candelon et al. (2011): formulas from memory, values at rate 1% computed
    np.testing.assert_allclose(orthonormal(1, 0.01, 5), [0.99499, 0.99, 0.98504, 0.9801, 0.97519], atol=5e-6)
    np.testing.assert_allclose(orthonormal(100, 0.01, 5), [0.0, -0.5, -0.66668, -0.62503, -0.46671], atol=5e-6)


@pytest.mark.parametrize("rate", [0.01, 0.025, 0.05])
def test_polynomials_are_orthonormal_under_the_geometric_law(rate):
    days = np.arange(1, int(60 / rate))
    values = np.vstack([np.ones(len(days)), orthonormal(days, rate, 5)])
    np.testing.assert_allclose((values * stats.geom.pmf(days, rate)) @ values.T, np.eye(6), atol=1e-9)
    other = (values * stats.geom.pmf(days, 2 * rate)) @ values.T  # negative control: another rate
    assert np.abs(other - np.eye(6)).max() > 0.1


@pytest.mark.parametrize("seed", range(12))
def test_weibull_fit_against_a_search_over_both_parameters(seed):
    hits = np.random.default_rng(seed).random(60 + 20 * seed) < 0.1
    shape, free, fixed = weibull_slow(hits)
    assert 0.3 < shape < 4.0
    fit = fitted(hits)
    assert fit.shape[0] == pytest.approx(shape, rel=1e-4)
    assert fit.independence[0] == pytest.approx(2 * (free - fixed), abs=1e-6)


@pytest.mark.parametrize("ends", [[1], [200], [1, 200]])
def test_no_duration_before_an_exception_on_the_first_day_nor_after_one_on_the_last(ends):
    hits = hits_on(200, sorted([30, 31, 90, 150, *ends]))
    _, free, fixed = weibull_slow(hits)
    assert fitted(hits).independence[0] == pytest.approx(2 * (free - fixed), abs=1e-6)


def test_many_paths_are_fitted_as_each_alone():
    rng = np.random.default_rng(3)
    paths = np.stack([np.sort(rng.choice(250, 5, replace=False)) for _ in range(300)])
    together = weibull(paths, 250, 0.99)
    alone = [weibull(path[None, :], 250, 0.99) for path in paths]
    np.testing.assert_allclose(together.independence, [fit.independence[0] for fit in alone], rtol=1e-10, atol=1e-12)
    np.testing.assert_allclose(together.shape, [fit.shape[0] for fit in alone], rtol=1e-7)


def test_a_likelihood_that_rises_without_end_stops_at_the_end_of_the_range():
    answer = WEIBULL.judge(sample_of_hits(hits_on(250, [10, 200])), SETTINGS)  # the complete duration is the longest
    assert fitted(hits_on(250, [10, 200])).shape[0] == SHAPE_RANGE[1]
    assert any("b stands at an end of its range" in note for note in answer.notes)
    assert answer.statistic < 10.0
    assert answer.p_value > 0.05


def test_permutation_law_of_weibull_against_all_arrangements():
    settings = Settings(0.05, 40_000, 2)
    values = np.array([fitted(hits).independence[0] for hits in all_arrangements(14, 4)])
    null = weibull_null(14, 4, settings)
    for share in (0.02, 0.1, 0.5, 0.9, 0.97):
        observed = np.quantile(values, share, method="nearest")
        exact = np.mean(values >= observed * (1 - 1e-8))
        error = 4 * np.sqrt(exact * (1 - exact) / 40_000) + 1e-4
        assert p_upper(null, observed * (1 - 1e-8)) == pytest.approx(exact, abs=error)


def test_law_of_gmm_against_all_sequences():
    settings = Settings(0.05, 40_000, 2)
    values, chances = law_of(
        lambda hits: float(np.sum(conditions(hits, 0.2, 3) ** 2)) if hits.sum() > 1 else 0.0, 12, 0.2
    )
    null = gmm_null(0.8, 12, settings)
    for share in (0.05, 0.3, 0.6, 0.9, 0.99):
        observed = np.quantile(values, share, method="nearest")
        exact = chances[values >= observed * (1 - 1e-8)].sum()
        error = 4 * np.sqrt(exact * (1 - exact) / 40_000) + 1e-4
        assert p_upper(null, observed * (1 - 1e-8)) == pytest.approx(exact, abs=error)


@pytest.mark.parametrize("test", TESTS)
def test_fewer_than_two_exceptions_are_not_tested(test):
    for count in (0, 1):
        answer = test.judge(sample_of_hits(np.arange(250) < count), SETTINGS)
        assert (answer.p_value, answer.missing) == (None, f"{count} exceptions, needs 2")


def test_all_exceptions():
    every = sample_of_hits(np.ones(250, dtype=bool))
    assert WEIBULL.judge(every, SETTINGS).missing == "every day is an exception, needs a day without"
    answer = GMM.judge(every, SETTINGS)
    assert answer.p_value == 1 / 1000
    assert answer.evidence == "var-low"


def test_what_a_rejection_is_evidence_of():
    clustered = hits_on(500, [50, 51, 52, 53, 54, 55, 300, 301, 302, 303, 304, 305])
    even = hits_on(500, list(range(20, 500, 40)))
    for test in TESTS:
        together, apart = (test.judge(sample_of_hits(hits, 0.975), SETTINGS) for hits in (clustered, even))
        assert together.p_value <= 0.05
        assert together.evidence == "clustered"
        assert apart.evidence == "spread"
    assert WEIBULL.judge(sample_of_hits(even, 0.975), SETTINGS).p_value <= 0.01


def test_size_oracle_independent_exceptions_and_clustered_ones():
    rng = np.random.default_rng(13)
    iid = [rng.random(250) < 0.025 for _ in range(600)]
    bursts = [(rng.random(250) < 0.3) & (np.arange(250) % 125 < 25) for _ in range(60)]  # negative control
    error = 3 * np.sqrt(0.05 * 0.95 / 600)
    for test in TESTS:
        p_values = [test.judge(sample_of_hits(hits, 0.975), SETTINGS).p_value for hits in iid]
        assert np.mean([p is not None and p <= 0.05 for p in p_values]) <= 0.05 + error
        caught = [test.judge(sample_of_hits(hits, 0.975), SETTINGS).p_value for hits in bursts]
        assert np.mean([p is not None and p <= 0.05 for p in caught]) > 0.7
