"""The time until the first exception against Kupiec's table and the geometric law."""

import numpy as np
import pytest
from scipy import stats

from backtest.judging.answers import Settings
from backtest.judging.first_exception import TESTS, first_exception_p, first_exception_ratio, rate_from_first
from tests.reference.judging_tables import hits_on, sample_of_hits

(FIRST,) = TESTS
SETTINGS = Settings(0.05, 99, 1)


def accepted(rate: float, level: float) -> tuple[int, int]:
    """Return the days just outside the non-rejection region of the chi-square test: V below and V above."""
    point = stats.chi2.ppf(1 - level, 1)
    days = [v for v in range(1, 1000) if first_exception_ratio(v, rate) <= point]
    return days[0] - 1, days[-1] + 1


# Kupiec (1995), FEDS working paper 95-24, Table 1: null 1%; level, region, type II error where the true rate is 2%.
# Three printed type II errors differ by one in the fourth digit from the geometric law (.7369 .6645 .6107): rounding.
TABLE_1 = [(0.05, (6, 439), 0.8857), (0.10, (11, 364), 0.8001), (0.15, (15, 319), 0.7370), (0.20, (20, 287), 0.6646),
           (0.25, (24, 262), 0.6108)]  # fmt: skip


@pytest.mark.parametrize(("level", "region", "type_two"), TABLE_1)
def test_kupiec_table_1(level, region, type_two):
    low, high = accepted(0.01, level)
    assert (low, high) == region
    missed = stats.geom.cdf(high - 1, 0.02) - stats.geom.cdf(low, 0.02)
    assert missed == pytest.approx(type_two, abs=1.6e-4)


def test_region_at_95_percent():
    # computed: at a rate of 5% the test at 5% rejects on day 1 and from day 87 on
    values = [first_exception_ratio(v, 0.05) for v in (1, 86, 87)]
    assert values == pytest.approx([5.991, 3.814, 3.894], abs=5e-4)
    assert accepted(0.05, 0.05) == (1, 87)


@pytest.mark.parametrize(("rate", "size"), [(0.01, 0.0708), (0.025, 0.0616)])
def test_true_size_of_the_chi_square_test(rate, size):
    low, high = accepted(rate, 0.05)
    found = stats.geom.cdf(low, rate) + stats.geom.sf(high - 1, rate)
    assert found == pytest.approx(size, abs=5e-5)


def test_golden_set_h1():
    answer = FIRST.judge(sample_of_hits(hits_on(250, [17, 18, 95, 170, 171, 240])), SETTINGS)
    assert answer.statistic == pytest.approx(1.925537, abs=1e-6)
    assert (answer.estimate, answer.evidence) == (1 / 17, "var-low")


@pytest.mark.parametrize("rate", [0.005, 0.01, 0.025, 0.05])
@pytest.mark.parametrize("day", [1, 2, 17, 19, 20, 21, 40, 99, 100, 101, 333, 900])
def test_exact_p_against_a_sum_over_days(day, rate):
    days = np.arange(1, 20_000)
    ratios = np.array([first_exception_ratio(int(v), rate) for v in days[:3000]])
    extreme = ratios >= first_exception_ratio(day, rate) * (1 - 1e-9)
    brute = stats.geom.pmf(days[:3000], rate)[extreme].sum() + stats.geom.sf(3000, rate)
    assert first_exception_p(day, rate) == pytest.approx(brute, rel=1e-7)


@pytest.mark.parametrize("rate", [0.01, 0.025])
def test_exact_p_never_rejects_more_often_than_stated(rate):
    days = np.arange(1, 2000)
    p_values = np.array([first_exception_p(int(v), rate) for v in days])
    for significance in (0.01, 0.05, 0.10):
        assert stats.geom.pmf(days, rate)[p_values <= significance].sum() <= significance


def test_interval_holds_the_rates_that_equal_tails_do_not_reject():
    for day in (1, 3, 17, 250):
        low, high = rate_from_first(day)
        assert stats.geom.cdf(day, low) == pytest.approx(0.025)
        assert high == 1.0 if day == 1 else stats.geom.sf(day - 1, high) == pytest.approx(0.025)


def test_without_an_exception_the_time_is_censored_and_not_tested():
    answer = FIRST.judge(sample_of_hits(np.zeros(250, dtype=bool)), SETTINGS)
    assert (answer.p_value, answer.missing) == (None, "0 exceptions, needs 1")
    assert answer.notes == ("censored: the first exception comes after day 250",)


def test_an_exception_on_the_first_day_rejects_and_a_late_one_says_too_high():
    at_once = FIRST.judge(sample_of_hits(hits_on(250, [1])), SETTINGS)
    assert at_once.statistic == pytest.approx(-2 * np.log(0.01))
    # LR(1) = 9.21 is matched on the late side only beyond day 700
    assert 0.01 < at_once.p_value < 0.012
    late = FIRST.judge(sample_of_hits(hits_on(1000, [900])), SETTINGS)
    assert late.p_value < 0.001
    assert late.evidence == "var-high"
