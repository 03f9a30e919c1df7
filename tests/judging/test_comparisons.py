"""Giacomini-White, the three zones, the half-homogeneous score, and Diebold-Mariano by another computation."""

import numpy as np
import pytest
from scipy import stats

from backtest.judging.answers import Settings
from backtest.judging.battery import judge_table
from backtest.judging.comparisons import TESTS, giacomini_white, one_sided
from backtest.judging.ranking import TESTS as RANKING
from backtest.judging.ranking import mean_difference, newey_west_lag
from backtest.judging.scores import fz0, half_homogeneous, tick
from tests.reference.comparison_paths import diebold_mariano_slow, noisy_forecasters, wald_by_regression
from tests.reference.judging_tables import sample_of, tables

GIACOMINI_WHITE, THREE_ZONE = TESTS
(DIEBOLD_MARIANO,) = RANKING
SETTINGS = Settings(0.05, 99, 1)


def arrays(*values):
    return tuple(np.array([float(v)]) for v in values)


@pytest.mark.parametrize(("loss", "score"), [(3, 0.351803), (1, 0.035576)])
def test_half_homogeneous_values(loss, score):
    # computed twice independently at 97.5%, VaR 2, ES 2.5
    assert half_homogeneous(*arrays(loss, 2, 2.5), 0.975)[0] == pytest.approx(score, abs=5e-7)


def test_half_homogeneous_is_least_at_the_true_forecast():
    losses = stats.norm.ppf((np.arange(200_000) + 0.5) / 200_000)
    var = float(stats.norm.ppf(0.975))
    es = float(stats.norm.pdf(var) / 0.025)

    def mean(v, e):
        return half_homogeneous(losses, np.full(200_000, v), np.full(200_000, e), 0.975).mean()

    for dv, de in ((0.05, 0.0), (-0.05, 0.0), (0.0, 0.05), (0.0, -0.05)):
        assert mean(var + dv, es + de) > mean(var, es)


def test_half_homogeneous_grows_with_the_root_of_the_unit():
    plain, scaled = (half_homogeneous(*arrays(4 * c, 2 * c, 2.5 * c), 0.975)[0] for c in (1, 9))
    assert scaled == pytest.approx(3.0 * plain)


def pair(seed=3, days=600, level=0.975, noise=0.2):
    losses, v1, e1, v2, e2 = noisy_forecasters(np.random.default_rng(seed), days, level, noise)
    return sample_of(losses, v1, level, es=e1), sample_of(losses, v2, level, es=e2)


def differences(first, second):
    return np.subtract(*(fz0(s.losses, s.var, s.es, s.level) for s in (first, second)))


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_diebold_mariano_by_an_independent_computation(seed):
    first, second = pair(seed)
    answer = DIEBOLD_MARIANO.judge(first, second, SETTINGS)
    statistic, p_value = diebold_mariano_slow(list(differences(first, second)), newey_west_lag(600))
    assert answer.statistic == pytest.approx(statistic, rel=1e-9)
    assert answer.p_value == pytest.approx(p_value, rel=1e-9)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_giacomini_white_is_n_r_squared_of_one_on_the_products(seed):
    first, second = pair(seed)
    answer = GIACOMINI_WHITE.judge(first, second, SETTINGS)
    statistic = wald_by_regression(differences(first, second))
    assert answer.statistic == pytest.approx(statistic, rel=1e-9)
    assert answer.p_value == pytest.approx(stats.chi2.sf(statistic, 2), rel=1e-9)
    assert any("windows of fixed length" in note for note in answer.notes)


@pytest.mark.parametrize(("level", "days", "published"), [(0.975, 1000, 0.035), (0.99, 500, 0.017)])
def test_giacomini_white_rejects_equal_forecasters_about_as_often_as_computed_before(level, days, published):
    # Sizes of the chi2 law for FZ0 and exchangeable noisy forecasters, computed before without saying how large the
    # noise was; here 20% lognormal, independent from day to day. Three standard errors of 1,000 replications.
    rng = np.random.default_rng(11)
    rejected = 0
    for _ in range(1000):
        losses, v1, e1, v2, e2 = noisy_forecasters(rng, days, level, 0.2)
        found = giacomini_white(fz0(losses, v1, e1, level) - fz0(losses, v2, e2, level))
        rejected += found[1] <= 0.05
    assert abs(rejected / 1000 - published) < 3.0 * np.sqrt(published * (1 - published) / 1000)


def test_giacomini_white_sees_a_foreseeable_difference_of_mean_zero_and_diebold_mariano_does_not():
    rng = np.random.default_rng(4)
    noise, series = rng.standard_normal(1000), np.zeros(1000)
    for t in range(1, 1000):
        series[t] = -0.5 * series[t - 1] + noise[t]
    assert giacomini_white(series)[1] < 1e-6
    assert mean_difference(series).p_value > 0.05
    assert giacomini_white(noise)[1] > 0.05  # control: nothing to foresee


def test_giacomini_white_names_no_winner_where_the_mean_does_not():
    losses = np.random.default_rng(8).standard_normal(1500)
    turns = np.where(np.arange(1500) % 2, 1.5, 0.7)  # each is the better one every other day
    first = sample_of(losses, 1.96 * turns, 0.975, es=2.34 * turns)
    second = sample_of(losses, 1.96 * turns[::-1], 0.975, es=2.34 * turns[::-1])
    answer = GIACOMINI_WHITE.judge(first, second, SETTINGS)
    assert answer.low < 0.0 < answer.high
    assert answer.p_value <= 0.05
    assert answer.evidence == "unequal"


def test_differences_that_never_change_are_not_tested():
    assert giacomini_white(np.full(50, 0.3)) is None
    assert giacomini_white(np.zeros(50)) is None
    first, _ = pair()
    for test in TESTS:
        assert test.judge(first, first, SETTINGS).missing == "needs score differences that vary"


def good_and_flat():
    rng = np.random.default_rng(5)
    sigma = np.exp(0.8 * np.sin(np.arange(1500) / 40))
    losses = sigma * rng.standard_normal(1500)
    return sample_of(losses, 1.96 * sigma, 0.975, es=2.34 * sigma), sample_of(losses, 2.6, 0.975, es=3.3)


def test_three_zones_in_both_directions():
    good, flat = good_and_flat()
    answer, mirror = THREE_ZONE.judge(good, flat, SETTINGS), THREE_ZONE.judge(flat, good, SETTINGS)
    assert answer.direction == "the other at least as good: rejected"
    assert mirror.direction == "this model at least as good: rejected"
    assert (answer.evidence, mirror.evidence) == ("better", "worse")
    assert THREE_ZONE.judge(*pair(), SETTINGS).direction == "neither rejected"


def test_one_sided_p_values_add_to_one_and_their_double_is_that_of_diebold_mariano():
    first, second = pair()
    answer = THREE_ZONE.judge(first, second, SETTINGS)
    this, other = one_sided(answer.statistic, first.days)
    assert this + other == pytest.approx(1.0)
    assert this == pytest.approx(stats.t.sf(answer.statistic, 599))
    assert answer.p_value == pytest.approx(DIEBOLD_MARIANO.judge(first, second, SETTINGS).p_value)


def test_the_middle_zone_keeps_nineteen_in_twenty_equal_pairs_and_loses_unequal_ones():
    pairs = [pair(seed, 1000) for seed in range(400)]
    left = np.mean([THREE_ZONE.judge(*p, SETTINGS).direction != "neither rejected" for p in pairs])
    assert left < 0.05 + 3 * np.sqrt(0.05 * 0.95 / 400)
    assert THREE_ZONE.judge(*good_and_flat(), SETTINGS).direction != "neither rejected"


def test_three_zones_say_the_verdict_by_the_half_homogeneous_score_too():
    answer = THREE_ZONE.judge(*good_and_flat(), SETTINGS)
    assert any(
        n.startswith("by the half-homogeneous score: the other at least as good: rejected") for n in answer.notes
    )
    without = [sample_of(s.losses, s.var, s.level) for s in pair()]
    assert not any("half-homogeneous" in note for note in THREE_ZONE.judge(*without, SETTINGS).notes)


def test_without_es_the_comparison_is_by_tick():
    first, second = (sample_of(s.losses, s.var, s.level) for s in pair())
    answer = GIACOMINI_WHITE.judge(first, second, SETTINGS)
    expected = np.subtract(*(tick(s.losses, s.var, s.level) for s in (first, second)))
    assert answer.statistic == pytest.approx(wald_by_regression(expected), rel=1e-9)


def test_no_colour_is_named():
    words = str([THREE_ZONE.judge(*p, SETTINGS) for p in (pair(), good_and_flat())])
    assert not any(colour in words for colour in ("green", "yellow", "amber", "red zone"))


def test_a_new_version_of_the_reported_model_is_set_beside_the_one_under_review():
    losses = {"A": np.random.default_rng(6).standard_t(5, 400)}
    pnl, forecasts = tables(losses, models=("HS-250", "HS-250 new", "historical"), levels=(0.99,), var=2.5, es=3.4)
    forecasts["var"] *= np.exp(0.1 * np.random.default_rng(7).standard_normal(len(forecasts)))
    rows = judge_table(pnl, forecasts, tests=["giacomini-white", "three-zone"], subject="HS-250")
    assert {(r.model, r.against) for r in rows} == {("HS-250 new", "HS-250"), ("historical", "HS-250")}
    alone = judge_table(pnl, forecasts[forecasts["model"] != "HS-250"], tests=["three-zone"], subject="HS-250")
    assert {(r.model, r.against) for r in alone} == {("HS-250 new", "historical")}
