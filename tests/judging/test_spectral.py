"""Kernels over levels: published moments, exact law of the window, score pair of the normal tail."""

import numpy as np
import pytest
from scipy import integrate, optimize, stats

from backtest.judging.answers import Settings
from backtest.judging.graded import tails
from backtest.judging.nulls import p_upper
from backtest.judging.spectral import (
    TESTS,
    probit_null,
    probit_statistic,
    score_covariance,
    uniform_moments,
    window_sum,
)
from backtest.judging.tail_shape import tail_ratio_null
from tests.reference.judging_tables import sample_of
from tests.reference.pit_laws import censored_log_likelihood

SETTINGS = Settings(0.05, 1999, 7)
JUDGE = {test.key: test.judge for test in TESTS}


def of_pits(pits, level=0.99):
    return sample_of(np.asarray(pits), level, level, pit=np.asarray(pits))


# Moments of the uniform kernel of Gordy and McNeil (2020), computed apart from this package.
@pytest.mark.parametrize(
    ("low", "high", "mean", "sd"),
    [(0.975, 1.0, 0.0125, 0.090427), (0.95, 0.995, 0.0275, 0.138722), (0.985, 0.995, 0.01, 0.090738)],
)
def test_moments_of_the_uniform_kernel(low, high, mean, sd):
    # the weight of [low, high] is one there
    found = [moment / (high - low) for moment in uniform_moments(low, high)]
    assert found == pytest.approx([mean, sd], abs=6e-7)


def test_window_counts_losses_between_its_ends_in_part():
    assert window_sum(np.array([0.5, 0.98, 0.985, 0.99, 0.999, 1.0]), 0.99) == pytest.approx(0.5 + 3.0)


def test_window_has_its_exact_law_and_moments():
    pits = np.full(250, 0.4)
    pits[[10, 60, 110]] = [0.985, 0.9875, 0.999]
    answer = JUDGE["spectral-window"](of_pits(pits), SETTINGS)
    assert answer.statistic == pytest.approx(2.25)
    lower, upper = tails(2.25, 250, 0.01, 0.01)
    assert (answer.p_value, answer.law) == (pytest.approx(2 * min(lower, upper)), "exact")
    assert "levels from 0.98 to 0.99 weighed alike: a loss between counts in part" in answer.notes
    deviations = (2.25 - 3.75) / np.sqrt(250 * (0.01 * (1 + 1 / 3) - 0.015**2))
    assert any(f"{deviations:.3g} standard deviations" in note for note in answer.notes)


@pytest.mark.parametrize(("pit", "side"), [(0.4, "var-high"), (0.992, "var-low")])
def test_window_sees_too_few_and_too_many(pit, side):
    answer = JUDGE["spectral-window"](of_pits(np.r_[np.full(590, 0.4), np.full(18, pit)]), SETTINGS)
    assert answer.p_value < 0.01
    assert answer.evidence == side
    assert answer.low <= answer.estimate <= answer.high


def test_scores_are_the_slope_of_the_censored_likelihood():
    z, level = np.random.default_rng(4).standard_normal(300), 0.95
    slope = optimize.approx_fprime([0.0, 1.0], lambda x: censored_log_likelihood(x[0], x[1], z, level), 1e-7)
    tail = z[z > stats.norm.ppf(level)]
    found = probit_statistic(len(tail), float(tail.sum()), float(tail @ tail), 300, level)
    assert found == pytest.approx(slope @ np.linalg.solve(score_covariance(level), slope) / 300, rel=1e-5)


@pytest.mark.parametrize("level", [0.9, 0.975, 0.99])
def test_covariance_of_the_scores_is_their_integral(level):
    c = stats.norm.ppf(level)
    below = -stats.norm.pdf(c) / level * np.array([1.0, c])
    for i, j in ((0, 0), (0, 1), (1, 1)):

        def product(z, i=i, j=j):
            score = (z, z * z - 1.0)
            return score[i] * score[j] * stats.norm.pdf(z)

        whole = integrate.quad(product, c, 40.0, epsabs=1e-14)[0] + level * below[i] * below[j]
        assert score_covariance(level)[i, j] == pytest.approx(whole, rel=1e-8)
    mean = integrate.quad(lambda z: z * stats.norm.pdf(z), c, 40.0)[0] + level * below[0]
    assert mean == pytest.approx(0.0, abs=1e-9)


def test_score_pair_has_the_mean_of_chi_square_and_is_close_to_the_likelihood_ratio():
    null = probit_null(7, 0.975, 1000, 9999)
    assert null.mean() == pytest.approx(2.0, abs=0.15)
    ratios = tail_ratio_null(7, 0.975, 1000, 9999)
    assert stats.spearmanr(null, ratios).statistic > 0.9


def test_score_pair_is_defined_without_exceptions():
    answer = JUDGE["spectral-probit"](of_pits(np.full(900, 0.4)), SETTINGS)
    assert answer.statistic > 0.0
    assert answer.p_value == p_upper(probit_null(7, 0.99, 900, 1999), answer.statistic)
    assert (answer.estimate, answer.evidence) == (None, "tail-heavy")


def test_a_thin_tail_is_rejected_and_a_right_one_keeps_the_size():
    rng, null = np.random.default_rng(15), probit_null(7, 0.975, 250, 9999)

    def share(draw):
        z, c = draw((800, 250)), stats.norm.ppf(0.975)
        found = probit_statistic(*((np.where(z > c, z**power, 0.0)).sum(axis=1) for power in (0, 1, 2)), 250, 0.975)
        return np.mean([p_upper(null, statistic) <= 0.05 for statistic in found])

    assert share(rng.standard_normal) == pytest.approx(0.05, abs=0.028)
    # the normal scores of a t5 loss under the normal law of its variance
    assert share(lambda shape: rng.standard_t(5, shape) * np.sqrt(3 / 5)) > 0.2
