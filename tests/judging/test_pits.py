"""The PIT as tests read it: days without one, clips, ranks, and simulated tails."""

import numpy as np
import pytest
from scipy import stats

from backtest.judging.pits import rank_steps, read_pits, simulated_tails
from tests.reference.judging_tables import sample_of


def test_days_without_a_pit_are_left_out_and_counted():
    pit = np.array([0.1, np.nan, 0.995])
    pits = read_pits(sample_of([0.0, 0.0, 2.0], pit=pit))
    assert pits.used.days == 2
    assert pits.notes == ("days without a PIT, left out: 1",)
    assert pits.depths == pytest.approx([0.5])


def test_pits_of_zero_and_one_are_moved_inside_and_counted():
    pits = read_pits(sample_of([0.0, 2.0], pit=np.array([0.0, 1.0])))
    assert pits.values.tolist() == [1e-12, 1 - 1e-12]
    assert np.all(np.isfinite(pits.scores))
    assert pits.notes == ("days with a PIT of 0 or 1, moved inside by 1e-12: 2",)


def test_pit_and_exception_that_disagree_are_said():
    assert read_pits(sample_of([0.0, 2.0], pit=0.5)).notes == (
        "days on which a PIT above the level and an exception do not agree: 1",
    )


@pytest.mark.parametrize("n", [20, 250, 500, 2500])
def test_ranks_are_recognised(n):
    ranks = (np.random.default_rng(1).integers(0, n + 1, 300) + 0.5) / (n + 1)
    steps = rank_steps(ranks, tail_is_law=False)
    assert steps is not None
    assert (n + 1) % steps == 0 or steps == n + 1
    assert any("PIT is a rank" in note for note in read_pits(sample_of(np.zeros(300), pit=ranks)).notes)


def test_a_continuous_pit_is_no_rank():
    rng = np.random.default_rng(2)
    assert all(rank_steps(rng.random(5), tail_is_law=False) is None for _ in range(300))


def test_a_fitted_tail_above_ranks_is_no_rank():
    ranks = (np.arange(100) + 0.5) / 501
    assert rank_steps(ranks, tail_is_law=True) is None
    assert read_pits(sample_of(np.zeros(100), pit=ranks, shape=0.1)).steps is None


def test_simulated_tails_are_uniform_above_the_level():
    tails = simulated_tails(2, 0.975, 50, 5000)
    assert stats.kstest(tails.depths, "uniform").pvalue > 0.001
    np.testing.assert_allclose(tails.scores, stats.norm.isf(0.025 * (1 - tails.depths)), rtol=1e-9)
    assert tails.sums(np.ones(len(tails.depths))).tolist() == tails.counts.tolist()
