"""Graded exceptions: the sum of depths and its zones, and depths that follow one another."""

import numpy as np
import pytest
from scipy import stats

from backtest.judging.answers import Settings
from backtest.judging.es_zones import TESTS, clustered_depths, clustered_depths_null, zone
from backtest.judging.graded import tails
from backtest.judging.nulls import p_upper
from tests.reference.judging_tables import sample_of
from tests.reference.pit_laws import depth_autocorrelation

SETTINGS = Settings(0.05, 1999, 7)
JUDGE = {test.key: test.judge for test in TESTS}


def of_pits(pits, level=0.99, **more):
    """Return a sample whose losses are its PITs and whose VaR is the level, so that exceptions agree with them."""
    return sample_of(np.asarray(pits), level, level, pit=np.asarray(pits), **more)


def quiet(days, *tail):
    """Return PITs of ``days`` quiet days with a tail of given PITs on days far apart."""
    pits = np.full(days, 0.4)
    pits[np.arange(len(tail)) * 20 + 3] = tail
    return pits


def test_statistic_is_the_sum_of_depths():
    answer = JUDGE["es-zones"](of_pits(quiet(250, 0.995, 0.9925, 0.99)), SETTINGS)
    assert answer.statistic == pytest.approx(0.75)
    lower, upper = tails(0.75, 250, 0.01)
    assert answer.p_value == pytest.approx(2 * min(lower, upper))
    assert answer.law == "exact"


def test_no_exception_is_defined_and_can_be_evidence_of_too_much():
    # P(no exception in 500 days at 99%) = .00657: twice it is below 5%
    answer = JUDGE["es-zones"](of_pits(quiet(500)), SETTINGS)
    assert answer.statistic == 0.0
    assert answer.p_value == pytest.approx(2 * 0.99**500)
    assert answer.evidence == "risk-high"


def test_zones_change_at_the_critical_points():
    assert [zone(x, 250, 0.025) for x in (0.0, 5.66, 5.68, 9.83, 9.85)] == ["green", "green", "yellow", "yellow", "red"]
    assert zone(0.0, 1, 0.01) == "green"


def test_zone_and_one_sided_p_stand_in_the_note():
    notes = "; ".join(JUDGE["es-zones"](of_pits(quiet(250, *[0.9999] * 7)), SETTINGS).notes)
    assert "zone red: yellow from 2.936, red from 5.999" in notes
    assert "informational" in notes
    assert "one-sided p for too low below 0.0001" in notes


def test_size_is_the_multiple_of_es_where_es_is_known():
    pits = quiet(250, 0.995)
    assert JUDGE["es-zones"](of_pits(pits), SETTINGS).estimate is None
    assert JUDGE["es-zones"](of_pits(pits, es=0.995), SETTINGS).estimate is not None


def test_unconditional_statistic_is_that_of_du_and_escanciano():
    # standard deviations of one day's depth: .090427 at a = .025 and .057518 at a = .01 (Du and Escanciano's variance)
    for a, sd in ((0.025, 0.090427), (0.01, 0.057518)):
        assert np.sqrt(a * (1 / 3 - a / 4)) == pytest.approx(sd, abs=5e-7)
        depths = np.maximum(np.random.default_rng(1).random(400_000) - (1 - a), 0.0) / a
        assert depths.std() == pytest.approx(sd, rel=0.02)


def test_clustered_depths_equal_plain_loops():
    pits = np.random.default_rng(2).random(400)
    pits[[50, 51, 53, 200, 204]] = [0.99, 0.999, 0.98, 0.985, 0.997]
    grades = np.maximum(pits - 0.975, 0.0) / 0.025
    assert clustered_depths(grades, 0.025)[0] == pytest.approx(depth_autocorrelation(list(pits), 0.975), rel=1e-12)


def test_simulated_law_of_clustered_depths_is_that_of_uniform_pits():
    sparse = clustered_depths_null(3, 0.9, 60, 4000)
    rng = np.random.default_rng(11)
    grades = np.maximum(rng.random((4000, 60)) - 0.9, 0.0) / 0.1
    dense = np.array([clustered_depths(row, 0.1)[0] if row.any() else 0.0 for row in grades])
    assert stats.ks_2samp(sparse, dense).pvalue > 0.001
    assert np.mean(sparse == 0.0) == pytest.approx(0.9**60, abs=0.003)


def test_sums_over_sparse_paths_equal_the_statistic_of_each_path():
    from backtest.judging.pits import simulated_tails

    tails_, null = simulated_tails(3, 0.9, 40, 200), clustered_depths_null(3, 0.9, 40, 200)
    for path in range(200):
        mine = slice(tails_.drawn.starts[path], tails_.drawn.starts[path + 1])
        grades = np.zeros(40)
        grades[tails_.drawn.days[mine]] = tails_.depths[mine]
        expected = clustered_depths(grades, 0.1)[0] if grades.any() else 0.0
        assert null[path] == pytest.approx(expected, rel=1e-9)


def test_chi_square_would_over_reject_and_the_simulated_law_does_not():
    # size of chi-square 5% at T = 250: .117 at 97.5% and .173 at 99%
    for level, size in ((0.975, 0.117), (0.99, 0.173)):
        null = clustered_depths_null(3, level, 250, 9999)
        with_known_mean = np.where(null == 0.0, 1250.0, null)  # that figure counts paths without any exception too
        assert np.mean(with_known_mean > stats.chi2.ppf(0.95, 5)) == pytest.approx(size, abs=0.02)
        assert np.mean([p_upper(null, x) <= 0.05 for x in null[:2000]]) == pytest.approx(0.05, abs=0.015)


def test_clustered_exceptions_are_seen():
    pits = np.full(500, 0.4)
    pits[[100, 101, 102, 103, 300]] = 0.999
    answer = JUDGE["du-escanciano-conditional"](of_pits(pits), SETTINGS)
    assert answer.p_value < 0.01
    assert answer.evidence == "clustered"
    assert answer.low <= answer.estimate <= answer.high


def test_clustering_needs_an_exception_and_six_days():
    conditional = JUDGE["du-escanciano-conditional"]
    none = conditional(of_pits(quiet(250)), SETTINGS)
    assert (none.missing, none.statistic, none.p_value) == ("0 exceptions, needs 1", 0.0, None)
    assert conditional(of_pits([0.999] * 5), SETTINGS).missing == "needs 6 days with a PIT, has 5"


def test_without_pit_nothing_is_tested():
    for judge in JUDGE.values():
        assert judge(sample_of(np.zeros(10)), SETTINGS).missing == "needs pit"
