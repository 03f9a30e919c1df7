"""The exact law of sums of graded days: against fractions, the normal law, published constants and simulation."""

from fractions import Fraction

import numpy as np
import pytest
from scipy import stats

from backtest.judging.graded import irwin_hall_densities, tails, upper_point
from tests.reference.pit_laws import graded_cdf, irwin_hall_cdf


@pytest.mark.parametrize("part", [0.0, 0.25, 0.875])
def test_densities_are_those_of_sums_of_uniforms(part):
    densities = irwin_hall_densities(12, part)
    for n in range(2, 12):
        for i in range(n):  # F_n(x) - F_n(x - 1) = f_(n+1)(x)
            x = Fraction(i) + Fraction(part)
            exact = irwin_hall_cdf(n, x) - irwin_hall_cdf(n, x - 1)
            assert densities[n, i] == pytest.approx(float(exact), rel=1e-13)


def test_small_tails_keep_their_digits_where_the_alternating_sum_loses_them():
    densities = irwin_hall_densities(61, 0.5)
    exact = irwin_hall_cdf(60, Fraction(41, 2))  # 2.8e-6 lies near here; the alternating sum in floats is useless
    assert densities[60, :21].sum() == pytest.approx(float(exact), rel=1e-12)


@pytest.mark.parametrize(("graded", "full"), [("1/4", "0"), ("1/20", "0"), ("1/8", "1/8"), ("1/4", "1/2")])
@pytest.mark.parametrize("x", ["0", "1/8", "1", "11/8", "3", "9/2"])
def test_tails_equal_exact_fractions(graded, full, x):
    graded, full, x = Fraction(graded), Fraction(full), Fraction(x)
    days = 7
    lower, upper = tails(float(x), days, float(graded), float(full))
    below = graded_cdf(x, days, graded, full)
    chances = [float(p) for p in (graded, full, 1 - graded - full)]
    atom = stats.multinomial.pmf([0, int(x), days - int(x)], days, chances)
    assert lower == pytest.approx(float(below), rel=1e-12)
    assert upper == pytest.approx(float(1 - below) + (atom if x == int(x) else 0.0), rel=1e-12)


def test_without_graded_days_the_law_is_binomial():
    for count in (0, 1, 4, 9):
        lower, upper = tails(float(count), 250, 1e-300, 0.01)
        assert lower == pytest.approx(stats.binom.cdf(count, 250, 0.01), rel=1e-12)
        assert upper == pytest.approx(stats.binom.sf(count - 1, 250, 0.01), rel=1e-12)


def test_tails_are_never_zero_and_never_above_one():
    assert min(tails(3.0, 3, 0.01)) > 0.0
    for total in (0.0, 0.5, 30.0, 249.5, 250.0):
        for value in (*tails(total, 250, 0.01), *tails(total, 250, 0.025, 0.025)):
            assert 0.0 < value <= 1.0


# Points of the sum of depths, by another computation of the same exact law (checked by simulation there); the
# published table of Costanzino and Curran (2015) could not be read, so that it is not what is compared with.
POINTS = {
    (0.95, 250): (9.735, 11.397, 15.076), (0.95, 500): (17.352, 19.584, 24.443), (0.95, 1000): (31.783, 34.819, 41.330),
    (0.975, 250): (5.671, 6.946, 9.837), (0.975, 500): (9.773, 11.459, 15.202), (0.975, 1000): (17.403, 19.665, 24.597),
    (0.99, 250): (2.936, 3.854, 5.999), (0.99, 500): (4.811, 5.993, 8.697), (0.99, 1000): (8.191, 9.743, 13.217),
}  # fmt: skip


@pytest.mark.parametrize(("level", "days"), list(POINTS))
def test_critical_points_of_the_sum_of_depths(level, days):
    for probability, point in zip((0.95, 0.99, 0.9999), POINTS[level, days], strict=True):
        found = upper_point(days, 1 - level, probability)
        assert found == pytest.approx(point, abs=0.00051)
        assert tails(found, days, 1 - level)[1] == pytest.approx(1 - probability, rel=1e-5)


def test_the_normal_approximation_is_not_the_law():
    # at 97.5% and 250 days the normal 95% and 99.99% points, 5.477 and 8.442, have tails of 6.2% and 0.107%
    mean, sd = 250 * 0.0125, np.sqrt(250 * 0.025 * (1 / 3 - 0.025 / 4))
    for probability, point, tail in ((0.95, 5.477, 0.062), (0.9999, 8.442, 0.00107)):
        assert mean + stats.norm.ppf(probability) * sd == pytest.approx(point, abs=0.001)
        assert tails(point, 250, 0.025)[1] == pytest.approx(tail, rel=0.01)


def test_a_point_below_the_smallest_positive_sum_is_nearly_zero():
    assert upper_point(3, 0.01, 0.95) < 1e-6  # a sum above 0 has probability 3% alone


@pytest.mark.parametrize("full", [0.0, 0.025])
def test_law_agrees_with_simulation(full):
    rng = np.random.default_rng(5)
    totals = np.clip((rng.random((20_000, 250)) - (1 - 0.025 - full)) / 0.025, 0.0, 1.0).sum(axis=1)
    for x in np.quantile(totals, [0.02, 0.3, 0.9, 0.99]):
        share = np.mean(totals <= x)
        error = np.sqrt(share * (1 - share) / len(totals))
        assert tails(float(x), 250, 0.025, full)[0] == pytest.approx(share, abs=4.5 * error)
