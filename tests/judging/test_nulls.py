"""Shared random numbers and p-values from simulated laws."""

import numpy as np
import pytest
from scipy import stats

from backtest.judging.nulls import (
    exceedances,
    excess_of_mean_one,
    generator,
    p_doubled,
    p_lower,
    p_upper,
)


def test_streams_depend_on_seed_purpose_level_and_length_only():
    def first(*where):
        return generator(*where).random()

    assert first(1, "a", 0.99, 250) == first(1, "a", 0.99, 250)
    others = [(2, "a", 0.99, 250), (1, "b", 0.99, 250), (1, "a", 0.975, 250), (1, "a", 0.99, 251)]
    assert len({first(1, "a", 0.99, 250), *(first(*where) for where in others)}) == 5


def test_exceedances_are_independent_with_the_stated_chance():
    drawn = exceedances(5, 0.975, 40, 20_000)
    counts = np.diff(drawn.starts)
    observed = np.bincount(counts, minlength=6)[:6]
    expected = 20_000 * stats.binom.pmf(np.arange(6), 40, 0.025)
    assert stats.chisquare([*observed, 20_000 - observed.sum()], [*expected, 20_000 - expected.sum()]).pvalue > 0.001
    assert stats.chisquare(np.bincount(drawn.days, minlength=40)).pvalue > 0.001
    assert np.all(np.diff(drawn.starts) >= 0)
    assert drawn.starts[-1] == len(drawn.days)


def test_sums_run_over_each_path():
    drawn = exceedances(5, 0.8, 7, 30)
    by_day = np.arange(7.0) + 1
    slow = [
        sum(drawn.exponentials[k] * by_day[drawn.days[k]] for k in range(drawn.starts[i], drawn.starts[i + 1]))
        for i in range(30)
    ]
    np.testing.assert_allclose(drawn.sums(drawn.exponentials, by_day), slow, rtol=1e-12)


@pytest.mark.parametrize("shape", [-0.3, 0.0, 1e-10, 0.1, 0.4])
def test_excesses_are_gpd_with_mean_one(shape):
    draws = excess_of_mean_one(np.random.default_rng(3).standard_exponential(20_000), np.float64(shape))
    assert stats.kstest(draws, stats.genpareto(shape, scale=1 - shape).cdf).pvalue > 0.001


def test_p_counts_ties_as_extreme_and_is_never_zero():
    null = np.array([0.0, 1.0, 1.0, 2.0])
    assert (p_lower(null, 1.0), p_upper(null, 1.0)) == (4 / 5, 4 / 5)
    assert (p_lower(null, -5.0), p_upper(null, 5.0)) == (1 / 5, 1 / 5)
    assert p_upper(null, 1.0 + 1e-12) == 4 / 5
    assert (p_doubled(null, 5.0), p_doubled(null, 1.0)) == (2 / 5, 1.0)


def test_fifty_of_a_thousand():
    # check value: N = 999, 49 replicates at least as large -> p = 0.050
    assert p_upper(np.r_[np.ones(49), np.zeros(950)], 1.0) == pytest.approx(0.05)
