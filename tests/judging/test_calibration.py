"""Nolde-Ziegel: statistics, laws from exceptions alone, the failure of chi-square, sizes and edges."""

import numpy as np
import pytest
from scipy import stats

from backtest.judging.answers import Settings
from backtest.judging.calibration import TESTS, general_null, moments, moments_null, one_sided, two_sided
from tests.reference.es_laws import (
    general_plain,
    one_sided_plain,
    right_forecasts,
    tail_losses,
    two_sided_plain,
)
from tests.reference.judging_laws import gpd_losses
from tests.reference.judging_tables import sample_of

ONE, TWO, GENERAL = TESTS
SETTINGS = Settings(0.05, 999, 1)
DAYS = 60
VAR = 2.0 + np.sin(np.arange(DAYS))
ES = VAR + np.where(np.arange(DAYS) < 30, 0.3, 2.0)
SIGMA = 1.0 + 0.3 * np.cos(np.arange(DAYS))
SHAPES = np.where(np.arange(DAYS) < 30, 0.0, 0.4)


def drawn(paths, seed=1, level=0.9):
    """Losses along the path, day by day."""
    rng = np.random.default_rng(seed)
    excess = stats.genpareto.rvs(SHAPES, scale=(ES - VAR) * (1 - SHAPES), size=(paths, DAYS), random_state=rng)
    return np.where(rng.random((paths, DAYS)) < 1 - level, VAR + excess, -5.0)


@pytest.mark.parametrize("seed", range(5))
def test_statistics_against_plain_ones_from_every_day(seed):
    losses = drawn(1, seed)[0]
    sample = sample_of(losses, VAR, 0.9, es=ES, sigma=SIGMA)
    seen = moments(sample)
    assert two_sided(seen)[0] == pytest.approx(two_sided_plain(losses, VAR, ES, 0.9))
    assert one_sided(seen)[0] == pytest.approx(one_sided_plain(losses, VAR, ES, 0.9))
    found = GENERAL.judge(sample, SETTINGS).statistic
    assert found == pytest.approx(general_plain(losses, VAR, ES, SIGMA, 0.9))


def test_laws_from_exceptions_alone_are_those_of_whole_paths():
    sample, many = sample_of(np.zeros(DAYS), VAR, 0.9, es=ES, sigma=SIGMA), Settings(0.05, 10_000, 3)
    simulated = moments_null(sample, SHAPES, many)
    losses = drawn(10_000)
    whole = [moments(sample_of(row, VAR, 0.9, es=ES)) for row in losses[:3000]]
    for statistic in (one_sided, two_sided):
        plain = [float(statistic(m)[0]) for m in whole]
        assert stats.ks_2samp(np.round(plain, 9), np.round(statistic(simulated), 9)).pvalue > 0.001
    hit = losses > VAR
    q = hit * (losses - ES) / SIGMA
    plain = np.divide(q.sum(axis=1) ** 2, (q**2).sum(axis=1), out=np.zeros(len(q)), where=hit.any(axis=1))
    assert stats.ks_2samp(plain, general_null(sample, SHAPES, many)).pvalue > 0.001


def test_a_rate_that_is_met_exactly_ties_with_simulated_ones():
    # 250 (1 - 0.98) exceptions, so shallow that the t of the rate, 0, is the larger: all simulated zeros are as extreme
    losses = np.zeros(250)
    losses[::50] = 2.01
    answer = ONE.judge(sample_of(losses, 2.0, 0.98, es=3.0, shape=0.1), SETTINGS)
    null = one_sided(moments_null(answer.used, np.full(250, 0.1), SETTINGS))
    assert answer.statistic == pytest.approx(0.0, abs=1e-12)
    assert answer.p_value == (1 + np.sum(null > -1e-9)) / 1000


def test_without_an_exception_the_two_sided_statistics_are_0_observed_and_simulated():
    quiet = sample_of(np.zeros(100), 2.0, 0.99, es=3.0, sigma=1.0)
    for test in (TWO, GENERAL):
        answer = test.judge(quiet, SETTINGS)
        assert (answer.statistic, answer.p_value) == (0.0, 1.0)
        assert "no exception: says little" in answer.notes
    none = np.mean(two_sided(moments_null(quiet, 0.1, Settings(0.05, 10_000, 1))) == 0.0)
    assert none == pytest.approx(0.99**100, abs=0.02)


def test_an_exception_of_exactly_mean_depth_leaves_the_rate_alone():
    losses = np.zeros(100)
    losses[7] = 3.0  # equals ES: v1 and v2 move in step
    seen = moments(sample_of(losses, 2.0, 0.98, es=3.0))
    assert two_sided(seen)[0] == pytest.approx((100 * 0.02 - 1) ** 2 / (99 * 0.02**2 + 0.98**2))


# Share of right forecasts that chi-square(2) rejects at 5%: METHODS of the house (GARCH-t5, 97.5% and 99%, T = 250)
@pytest.mark.parametrize(("level", "share"), [(0.975, 0.264), (0.99, 0.497)])
def test_negative_control_chi_square_rejects_right_forecasts_far_too_often(level, share):
    var, es = right_forecasts(5, level)
    losses = tail_losses(np.random.default_rng(5), 5, level, (2000, 250))
    found = np.array([two_sided(moments(sample_of(row, var, level, es=es)))[0] for row in losses])
    found = found[(losses > var).any(axis=1)]
    quiet = 1 - len(found) / 2000
    rejected = np.mean(found > stats.chi2.isf(0.05, 2)) * (1 - quiet)
    assert rejected > 0.15
    # their figure counts a path without exception (Omega singular, statistic T) as a rejection
    assert rejected + quiet == pytest.approx(share, abs=0.08)


@pytest.mark.parametrize("test", TESTS, ids=lambda t: t.key)
def test_size_holds_where_chi_square_fails(test):
    # t5 losses at 97.5%, whose excesses are no exact GPD: shape 0.1 assumed
    var, es = right_forecasts(5, 0.975)
    losses = tail_losses(np.random.default_rng(6), 5, 0.975, (400, 250))
    samples = [sample_of(row, var, 0.975, es=es, sigma=1.0) for row in losses]
    p_values = np.array([test.judge(sample, SETTINGS).p_value for sample in samples])
    assert np.mean(p_values <= 0.05) <= 0.05 + 3 * np.sqrt(0.05 * 0.95 / 400)


def test_one_sided_asymptotic_p_hardly_ever_rejects():
    # METHODS of the house: .001 to .012; Hommel's combination of the two normal p
    var, es = right_forecasts(5, 0.975)
    null = moments_null(sample_of(np.zeros(250), var, 0.975, es=es), 0.2, Settings(0.05, 20_000, 1))
    t = np.sort(np.stack([-null.v1 / np.sqrt(null.v11), null.v2 / np.sqrt(null.v22)]), axis=0)
    p_values = 1.5 * np.minimum(stats.norm.sf(t[1]) * 2, stats.norm.sf(t[0]))
    assert np.mean(p_values <= 0.05) < 0.02


@pytest.mark.parametrize("test", TESTS, ids=lambda t: t.key)
def test_understated_es_is_rejected_and_named(test):
    losses = gpd_losses(np.random.default_rng(3), (60, 1000), var=2.0, es=6.0, xi=0.1, level=0.975)
    answers = [test.judge(sample_of(row, 2.0, 0.975, es=3.0, sigma=1.0), SETTINGS) for row in losses]
    rejected = [a for a in answers if a.p_value <= 0.05]
    assert len(rejected) > 0.6 * len(answers)
    assert {a.evidence for a in rejected} <= {"risk-low", "es-low"}


def test_overstated_risk_is_named_so():
    losses = gpd_losses(np.random.default_rng(3), (1000,), var=2.0, es=2.2, xi=0.1, level=0.975)
    sample = sample_of(losses, 2.0, 0.975, es=4.0, sigma=1.0)
    assert GENERAL.judge(sample, SETTINGS).evidence == "es-high"
    assert TWO.judge(sample, SETTINGS).evidence == "risk-high"
    assert ONE.judge(sample, SETTINGS).p_value > 0.05


def test_what_is_missing_is_named():
    losses = np.where(np.arange(250) % 20 == 0, 3.5, 0.0)
    assert [t.judge(sample_of(losses, 2.0), SETTINGS).missing for t in TESTS] == ["needs es"] * 3
    assert GENERAL.judge(sample_of(losses, 2.0, es=3.0), SETTINGS).missing == "needs sigma"
