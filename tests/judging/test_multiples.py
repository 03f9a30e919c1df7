"""The multiple that would have sufficed, with its intervals."""

import numpy as np
import pytest
from scipy import stats

from backtest.judging.multiples import order_limits, sufficient_es_multiple, sufficient_multiple
from backtest.judging.sufficiency import multiple_results
from tests.reference.judging_tables import tables


def test_quantile_is_the_ceil_nq_th_smallest():
    losses = np.arange(1.0, 1001.0)
    found = sufficient_multiple(losses, np.full(1000, 100.0), 0.975)  # 1000 * .975 is 975 despite floating point
    assert found.estimate == 9.75


@pytest.mark.parametrize(("n", "q"), [(250, 0.975), (500, 0.99), (2500, 0.99)])
def test_order_limits_follow_the_definition(n, q):
    low, high = order_limits(n, q)
    ranks = np.arange(1, n + 1)
    assert low == ranks[stats.binom.cdf(ranks - 1, n, q) <= 0.025].max()
    assert high == ranks[stats.binom.cdf(ranks - 1, n, q) >= 0.975].min()


@pytest.mark.parametrize(("q", "first"), [(0.99, 368), (0.975, 146)])
def test_no_upper_limit_below_the_stated_length(q, first):
    assert order_limits(first - 1, q)[1] is None
    assert order_limits(first, q)[1] == first


def test_coverage_of_the_order_interval():
    rng, level, inside = np.random.default_rng(3), 0.975, 0
    true = stats.t.ppf(level, 5) / 2.0
    for _ in range(1000):
        found = sufficient_multiple(rng.standard_t(5, 500), np.full(500, 2.0), level)
        inside += found.low <= true <= found.high
    assert inside / 1000 >= 0.95 - 3 * np.sqrt(0.05 * 0.95 / 1000)


def test_es_multiple_is_the_exact_integral_of_the_step_quantile():
    losses = np.array([1.0, 2.0, 3.0, 4.0, 5.0, 6.0, 7.0, 8.0, 9.0, 10.0])
    found = sufficient_es_multiple(losses, np.full(10, 2.0), 0.85, seed=1)
    assert found.estimate == pytest.approx((10.0 * 1.0 + 9.0 * 0.5) / 1.5 / 2.0)
    assert found.low <= found.estimate <= found.high


def test_es_interval_against_plain_simulation():
    # second implementation: whole samples of a GPD tail, sorted, instead of their largest values alone
    rng, n, level = np.random.default_rng(2), 400, 0.95
    losses = rng.standard_t(5, n)
    found = sufficient_es_multiple(losses, np.full(n, 2.0), level, seed=1)
    drawn = -np.sort(-stats.genpareto.rvs(0.15, size=(20_000, n), random_state=rng), axis=1)
    true = stats.genpareto.expect(lambda x: x, (0.15,), lb=stats.genpareto.ppf(level, 0.15)) / (1 - level)

    def spread(ordered):
        top = ordered[:20]
        return np.sqrt(np.var(top) + (np.mean(top) - ordered[20]) ** 2)

    pivots = [(true - row[:20].mean()) / spread(row) for row in drawn]
    ours = np.sort(losses / 2.0)[::-1]
    low, high = ours[:20].mean() + np.quantile(pivots, [0.025, 0.975]) * spread(ours)
    assert (found.low, found.high) == pytest.approx((low, high), abs=0.02)


def test_es_interval_needs_losses_that_differ_and_enough_days():
    assert sufficient_es_multiple(np.full(300, 3.0), np.full(300, 2.0), 0.99, 1).high is None
    assert sufficient_es_multiple(np.arange(5.0), np.full(5, 2.0), 0.99, 1).high is None
    assert sufficient_es_multiple(np.arange(6.0), np.full(6, 2.0), 0.99, 1).high is not None


def test_forecasts_that_are_not_positive_are_skipped_and_counted():
    losses, var = np.arange(1.0, 11.0), np.where(np.arange(10) == 9, -1.0, 2.0)
    found = sufficient_multiple(losses, var, 0.9)
    assert (found.days, found.skipped, found.estimate) == (9, 1, 4.5)
    none = sufficient_multiple(losses, np.zeros(10), 0.9)
    assert (none.estimate, none.skipped) == (None, 10)
    assert sufficient_es_multiple(losses, np.zeros(10), 0.9, 1).estimate is None


def test_one_day():
    found = sufficient_multiple(np.array([3.0]), np.array([2.0]), 0.99)
    assert (found.estimate, found.high) == (1.5, None)
    assert sufficient_es_multiple(np.array([3.0]), np.array([2.0]), 0.99, 1).estimate == 1.5


def test_multiples_as_results():
    losses = {"A": np.random.default_rng(1).standard_t(5, 300)}
    found = multiple_results(*tables(losses, var=2.0, es=3.0, levels=(0.975,)), spans=[100, "all"], seed=1)
    assert [r.test for r in found] == ["sufficient-var-multiple", "sufficient-es-multiple"] * 4
    assert [r.days for r in found if r.model == "bank"] == [100, 100, 300, 300]
    short = found[0]
    assert (short.p_value, short.high, short.note) == (None, None, "no upper limit at this length")
    assert short.estimate == pytest.approx(np.sort(losses["A"][-100:])[97] / 2.2)


def test_the_multiple_of_es_may_say_too_low_and_never_too_high():
    losses, found = {"A": np.random.default_rng(1).standard_t(5, 300)}, {}
    for factor in (0.2, 5.0):
        given = tables(losses, var=2.0 * factor, es=3.0 * factor, levels=(0.975,))
        found |= {(row.test, factor): row for row in multiple_results(*given, spans=["all"], seed=1)[:2]}
    assert {key: row.direction for key, row in found.items()} == {
        ("sufficient-var-multiple", 0.2): "VaR too low",
        ("sufficient-es-multiple", 0.2): "ES too low",
        ("sufficient-var-multiple", 5.0): "VaR too high",
        ("sufficient-es-multiple", 5.0): "",
    }
    quiet = found["sufficient-es-multiple", 5.0]
    assert quiet.high < 1
    assert "measured coverage" in quiet.note
