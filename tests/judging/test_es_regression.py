"""Bayer-Dimitriadis: regressions against plain ones, the rebuilt distribution, laws, sizes and edges."""

import numpy as np
import pytest
from scipy import stats

from backtest.judging.answers import Settings
from backtest.judging.es_line import es_line, quantile_line, wald
from backtest.judging.es_regression import TESTS, deepest, intercept, intercept_null
from backtest.judging.relative_tail import relative_tail
from tests.reference.es_laws import fz0_line, quantile_line_by_programme, quantile_loss, right_forecasts
from tests.reference.judging_tables import sample_of

INTERCEPT, AUXILIARY = TESTS
SETTINGS = Settings(0.05, 199, 1)
SIGMA = np.exp(0.5 * np.sin(np.arange(250) / 25))
VAR5, ES5 = right_forecasts(5, 0.975)


def t5_sample(seed, *, es=1.0, sigma=SIGMA, pit=True):
    """A sample of t5 losses with the right VaR, the right ES times ``es``, no shape."""
    z = np.random.default_rng(seed).standard_t(5, len(sigma))
    known = {"pit": stats.t.cdf(z, 5)} if pit else {}
    return sample_of(sigma * z, sigma * VAR5, 0.975, es=sigma * ES5 * es, sigma=sigma, **known)


def test_intercept_by_hand():
    tops = np.array([[4.0, 1.0, 1.0, -0.5]])  # the three largest of 100 days at 97%, and the next
    e = 2.0
    squares = (np.var([4.0, 1.0, 1.0]) / 0.03 + 0.97 * (e + 0.5) ** 2 / 0.03) / 100
    assert intercept(tops, 100, 0.97)[0] == pytest.approx(e / np.sqrt(squares))
    assert deepest(np.arange(100.0), np.zeros(100), 0.97).tolist() == [[99.0, 98.0, 97.0, 96.0]]
    assert intercept(np.ones((1, 4)), 100, 0.97)[0] == 0.0


def test_quantile_line_is_as_good_as_the_linear_programmes():
    rng = np.random.default_rng(1)
    x = 1.0 + rng.random(120)
    losses = x * rng.standard_t(5, (3, 120))
    ours = quantile_line(losses, x, 0.9)
    for row, fit in zip(losses, ours, strict=True):
        best = quantile_loss(row, quantile_line_by_programme(row, x, 0.9), 0.9)
        assert quantile_loss(row, fit, 0.9) == pytest.approx(best, rel=1e-8)


def test_es_line_minimises_the_loss_given_the_quantile_line():
    sample = t5_sample(3)
    line, _ = es_line(sample.losses[None], sample.var, sample.es, 0.9)
    fit = quantile_line(sample.losses[None], sample.var, 0.9)[0]
    assert line[0] == pytest.approx(fz0_line(sample.losses, fit, sample.es, 0.9), abs=1e-5)


def test_robust_covariance_is_that_of_many_samples():
    rng, paths = np.random.default_rng(2), 300
    sigma = np.exp(0.5 * np.sin(np.arange(2000) / 25))
    losses = sigma * rng.standard_normal((paths, 2000))
    var, es = right_forecasts(np.inf, 0.9)
    line, covariance = es_line(losses, sigma * var, sigma * es, 0.9)
    assert line.mean(axis=0) == pytest.approx([0.0, 1.0], abs=4 * np.max(line.std(axis=0)) / np.sqrt(paths) + 0.01)
    assert np.std(line[:, 1]) == pytest.approx(np.sqrt(np.median(covariance[:, 1, 1])), rel=0.15)
    rejected = np.mean(wald(line, covariance, np.array([0.0, 1.0])) > stats.chi2.isf(0.05, 2))
    assert 0.02 < rejected < 0.12  # chi-square nearly holds with 200 days beyond VaR


def test_rebuilt_distribution_is_the_one_the_pairs_came_from():
    sample = t5_sample(4, sigma=np.tile(SIGMA, 8))
    tail, pits = relative_tail(sample, 0.2), np.linspace(0.02, 0.97, 96)
    truth = (stats.t.ppf(pits, 5) - VAR5) / (ES5 - VAR5)
    np.testing.assert_allclose(tail.quantile(pits, np.zeros(96, dtype=int)), truth, atol=0.15)
    deep = np.array([0.98, 0.99, 0.999])
    excess = stats.genpareto.ppf((deep - 0.975) / 0.025, 0.2, scale=0.8)
    np.testing.assert_allclose(tail.quantile(deep, np.zeros(3, dtype=int)), excess)


@pytest.mark.parametrize("shape", [0.0, 0.3, -0.2])
def test_chance_beyond_undoes_the_quantile(shape):
    sample = t5_sample(4)
    tail, pits = relative_tail(sample, shape), np.linspace(0.05, 0.9999, 250)
    relative = tail.quantile(pits, slice(None))
    np.testing.assert_allclose(tail.chance_beyond(relative), 1 - pits, rtol=1e-6)


@pytest.mark.parametrize("swing", [0.5, 1.5])
def test_intercept_null_is_that_of_whole_paths(swing):
    # with a swing of 1.5 the calmest days' ordinary losses compete with the wildest days' exceptions
    sample = t5_sample(5, sigma=np.exp(swing * np.sin(np.arange(250) / 25)))
    ours = intercept_null(sample, 0.2, Settings(0.05, 5000, 3))
    tail, rng = relative_tail(sample, 0.2), np.random.default_rng(9)
    whole = sample.var + (sample.es - sample.var) * np.stack(
        [tail.quantile(rng.random(250), slice(None)) for _ in range(5000)]
    )
    plain = [intercept(deepest(row, sample.es, 0.975), 250, 0.975)[0] for row in whole]
    assert stats.ks_2samp(plain, ours).pvalue > 0.001


def test_intercept_null_does_not_depend_on_how_many_days_are_turned_into_losses(monkeypatch):
    sample = t5_sample(5)
    few = intercept_null(sample, 0.2, SETTINGS)
    monkeypatch.setattr("backtest.judging.es_regression._passed_by", lambda tail, gap, expected: -1e3)
    np.testing.assert_allclose(intercept_null(sample, 0.2, SETTINGS), few, rtol=1e-12)


def rejections(test, seeds, **more):
    return np.mean([test.judge(t5_sample(seed, **more), SETTINGS).p_value <= 0.05 for seed in seeds])


def test_intercept_holds_its_size_and_rejects_understated_es():
    assert rejections(INTERCEPT, range(200)) <= 0.05 + 3 * np.sqrt(0.05 * 0.95 / 200)
    longer = np.exp(0.5 * np.sin(np.arange(1000) / 25))
    assert rejections(INTERCEPT, range(30), es=0.8, sigma=longer) > 0.4


@pytest.mark.slow
def test_auxiliary_holds_its_size_where_chi_square_fails():
    statistics, p_values = [], []
    for seed in range(200):
        answer = AUXILIARY.judge(t5_sample(seed), SETTINGS)
        statistics.append(answer.statistic)
        p_values.append(answer.p_value)
    error = 3 * np.sqrt(0.05 * 0.95 / 200)
    assert np.mean(np.array(p_values) <= 0.05) <= 0.05 + error
    assert np.mean(np.array(statistics) > stats.chi2.isf(0.05, 2)) > 0.05 + error  # the negative control


@pytest.mark.slow
@pytest.mark.parametrize(("factor", "least", "evidence"), [(0.5, 0.8, "es-low"), (1.5, 0.5, "es-high")])
def test_auxiliary_sees_gross_errors_of_scale(factor, least, evidence):
    # Measured, 1,000 days: half the risk 15 of 15, 1.5 times 13 of 15, but 0.7 times 1 of 15 only (p .05 to .12):
    # samples that lack deep losses have small standard errors, so that the law has a long tail on the other side.
    sigma, answers = np.exp(0.5 * np.sin(np.arange(1000) / 25)), []
    for seed in range(15):
        z = np.random.default_rng(seed).standard_t(5, 1000)
        pit, scale = stats.t.cdf(z / factor, 5), factor * sigma
        sample = sample_of(sigma * z, scale * VAR5, 0.975, es=scale * ES5, sigma=scale, pit=pit, shape=0.2)
        answers.append(AUXILIARY.judge(sample, SETTINGS))
    rejected = [a for a in answers if a.p_value <= 0.05]
    assert len(rejected) >= least * len(answers)
    assert {a.evidence for a in rejected} == {evidence}


def test_what_is_missing_is_named():
    for test in TESTS:
        assert test.judge(t5_sample(1, pit=False), SETTINGS).missing == "needs pit"
        assert test.judge(sample_of(np.zeros(250), 2.0), SETTINGS).missing == "needs es"
        few = t5_sample(1, sigma=SIGMA[:30])
        assert "needs pit on 50 days below VaR" in test.judge(few, SETTINGS).missing
    flat = t5_sample(1, sigma=np.ones(250))
    assert AUXILIARY.judge(flat, SETTINGS).missing == "needs VaR and ES that vary from day to day"
    assert AUXILIARY.judge(t5_sample(1, sigma=SIGMA[:79]), SETTINGS).missing == "needs 80 days, has 79"
    same = sample_of(np.zeros(250), 2.0, 0.975, es=3.0, pit=0.5)
    assert INTERCEPT.judge(same, SETTINGS).missing == "needs L - ES that differ from one another"


@pytest.mark.parametrize("test", TESTS, ids=lambda t: t.key)
@pytest.mark.parametrize("scale", [8.0, 3.7, 1e-6])
def test_the_unit_of_the_losses_changes_nothing(test, scale):
    plain = t5_sample(7)
    scaled = sample_of(scale * plain.losses, scale * plain.var, 0.975, es=scale * plain.es, pit=plain.pit)
    one, other = test.judge(plain, SETTINGS), test.judge(scaled, SETTINGS)
    assert one.statistic == pytest.approx(other.statistic, rel=1e-9)
    assert one.p_value == other.p_value
