"""Exact power of the binomial test."""

import numpy as np
import pytest
from scipy import stats

from backtest.judging.power import two_sided_power, upper_power


# computed twice independently: one-sided exact test at 5%, true rate twice the nominal
@pytest.mark.parametrize(
    ("level", "days", "power"),
    [(0.99, 250, 0.38), (0.99, 500, 0.54), (0.99, 1000, 0.85), (0.99, 2500, 0.99),
     (0.975, 250, 0.60), (0.975, 500, 0.91), (0.975, 1000, 0.99), (0.975, 2500, 1.0)],
)  # fmt: skip
def test_power_against_twice_the_nominal_rate(level, days, power):
    assert upper_power(days, level) == pytest.approx(power, abs=0.005)


@pytest.mark.parametrize("days", [1, 20, 250, 1000])
def test_power_by_enumeration(days):
    counts = np.arange(days + 1)
    upper = stats.binom.sf(counts - 1, days, 0.01)
    doubled = np.minimum(1.0, 2 * np.minimum(upper, stats.binom.cdf(counts, days, 0.01)))
    chances = stats.binom.pmf(counts, days, 0.02)
    assert upper_power(days, 0.99) == pytest.approx(chances[upper <= 0.05].sum(), abs=1e-10)
    assert two_sided_power(days, 0.99) == pytest.approx(chances[doubled <= 0.05].sum(), abs=1e-10)


def test_power_at_the_nominal_rate_is_the_size():
    assert upper_power(250, 0.99, factor=1.0) == pytest.approx(0.0412, abs=5e-5)
