"""Power by asking the test: shares of simulated reviews, the same for the same seed, and larger where more is wrong."""

from dataclasses import replace

import pytest
from scipy import stats

from backtest.judging.answers import Answer, SampleTest, Settings
from backtest.judging.battery import TESTS
from backtest.judging.simulated_power import beyond_right, rejections

SETTINGS = Settings(0.05, simulations=99, seed=4)
SIZE = {"reviews": 200, "days": 250}


def counting(p_value: float | None) -> SampleTest:
    return SampleTest("made up", "how often", "", lambda sample, _: Answer(statistic=1.0, p_value=p_value))


@pytest.mark.parametrize(("p_value", "rejected"), [(0.05, 200), (0.0501, 0), (None, 0)])
def test_a_review_counts_if_its_p_is_at_or_below_the_significance(p_value, rejected):
    seen = rejections(counting(p_value), "right", 0.99, 250, SETTINGS, **SIZE)
    assert seen == (rejected, 200, 99)


def test_reviews_are_those_of_the_named_alternative_level_and_length():
    found = []
    look = SampleTest("made up", "when", "", lambda sample, _: found.append(sample) or Answer())
    rejections(look, "sigma-20", 0.975, 120, SETTINGS, **SIZE)
    assert {(s.model, s.level, s.days) for s in found} == {("sigma-20", 0.975, 120)}
    assert len(found) == 200


def test_the_same_seed_gives_the_same_power_and_another_seed_other_reviews():
    first, again = (rejections(TESTS["binomial"], "sigma-20", 0.975, 250, SETTINGS, **SIZE) for _ in range(2))
    other = rejections(TESTS["binomial"], "sigma-20", 0.975, 250, replace(SETTINGS, seed=5), **SIZE)
    assert first == again != other


def test_power_grows_with_what_is_wrong():
    shares = [
        rejections(TESTS["binomial"], key, 0.975, 250, SETTINGS, **SIZE).share
        for key in ("right", "sigma-10", "sigma-20", "rate-x2")
    ]
    assert shares == sorted(shares)
    assert shares[-1] > shares[0] + 0.3


def test_one_law_for_all_reviews_rejects_right_forecasts_at_the_significance_and_agrees_with_the_exact_law():
    kupiec = TESTS["kupiec"]  # large is extreme; here its own exact p is known
    right = beyond_right(kupiec, "right", 0.975, 250, SETTINGS, **SIZE)
    assert right.share <= 0.05
    assert right.simulations == 200
    found = beyond_right(kupiec, "rate-x2", 0.975, 250, SETTINGS, **SIZE)
    own = rejections(kupiec, "rate-x2", 0.975, 250, SETTINGS, **SIZE)
    interval = stats.binomtest(own.rejected, own.reviews).proportion_ci(0.999)
    # the law's own error: its 95% point is one of 200 values of a discrete statistic
    assert interval.low - 0.15 < found.share < interval.high + 0.15


def test_reviews_without_a_statistic_are_not_rejected():
    nothing = SampleTest("made up", "when", "", lambda sample, _: Answer())
    seen = beyond_right(nothing, "sigma-20", 0.975, 250, SETTINGS, **SIZE)
    assert (seen.rejected, seen.reviews) == (0, 200)
