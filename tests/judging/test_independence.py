"""Christoffersen's tests against golden sets, published examples and brute force."""

import itertools

import numpy as np
import pytest
from scipy import stats

from backtest.judging.answers import Settings
from backtest.judging.coverage import likelihood_ratio
from backtest.judging.independence import (
    TESTS,
    clustering,
    coverage_law,
    independence_law,
    independence_ratio,
    tail,
    transitions,
)
from tests.reference.judging_laws import (
    brute_coverage_tail,
    brute_independence_p,
    likelihood_ratio_of_independence,
    likelihood_ratio_of_rate,
)
from tests.reference.judging_tables import hits_on, sample_of_hits

INDEPENDENCE, COVERAGE = TESTS
SETTINGS = Settings(0.05, 99, 1)

# golden sets, computed by two independent implementations: days of exceptions, counted from 1
H1 = hits_on(250, [17, 18, 95, 170, 171, 240])
H2 = hits_on(500, [20, 45, 46, 120, 121, 122, 230, 300, 301, 410, 411, 455, 480])


def test_golden_set_h1():
    assert transitions(H1) == (239, 4, 4, 2)
    assert likelihood_ratio(6, 250, 0.01) == pytest.approx(3.555355, abs=1e-6)
    assert independence_ratio(*transitions(H1)) == pytest.approx(8.136469, abs=1e-6)
    assert COVERAGE.judge(sample_of_hits(H1), SETTINGS).statistic == pytest.approx(11.691823, abs=1e-6)


def test_golden_set_h2():
    assert transitions(H2) == (478, 8, 8, 5)
    assert likelihood_ratio(13, 500, 0.025) == pytest.approx(0.020252, abs=1e-6)
    assert independence_ratio(*transitions(H2)) == pytest.approx(21.598321, abs=1e-6)


def test_jorion_jp_morgan_1998():
    # Jorion, Value at Risk, ch. 6: LR_ind 9.53 (from memory); the printed counts hold one transition too many
    assert independence_ratio(218, 14, 14, 6) == pytest.approx(9.5296, abs=5e-5)
    assert float(likelihood_ratio(20, 252, 0.05) + independence_ratio(218, 14, 14, 6)) == pytest.approx(13.44, abs=5e-3)
    assert independence_ratio(217, 14, 14, 6) == pytest.approx(9.4886, abs=5e-5)
    assert tail(independence_law(252, 20), 9.4886) == pytest.approx(0.0016, abs=5e-5)


def test_jorion_problem_10():
    # as quoted publicly: 25.837; with LR_uc 3.498 the sum is 29.34
    assert independence_ratio(244, 2, 2, 4) == pytest.approx(25.8374, abs=5e-5)
    assert float(likelihood_ratio(6, 252, 0.01) + independence_ratio(244, 2, 2, 4)) == pytest.approx(29.34, abs=5e-3)


def test_two_adjacent_exceptions_reject_on_their_own():
    answer = INDEPENDENCE.judge(sample_of_hits(hits_on(250, [100, 101])), SETTINGS)
    assert answer.statistic == pytest.approx(7.494, abs=5e-4)
    assert answer.p_value == pytest.approx(0.0080, abs=5e-5)
    assert answer.evidence == "clustered"
    assert stats.chi2.sf(answer.statistic, 1) == pytest.approx(0.0062, abs=5e-5)


@pytest.mark.parametrize("count", range(1, 12))
def test_conditional_law_against_all_arrangements_of_twelve_days(count):
    for places in ([*range(1, count + 1)], [*range(1, 12, 2)][:count], [12, *range(2, count + 1)]):
        if len(places) != count:
            continue
        hits = tuple(int(h) for h in hits_on(12, places))
        found = tail(independence_law(12, count), likelihood_ratio_of_independence(hits))
        assert found == pytest.approx(brute_independence_p(hits), abs=1e-10)


@pytest.mark.parametrize("rate", [0.025, 0.2])
def test_coverage_law_against_all_sequences_of_twelve_days(rate):
    values = brute_coverage_tail(12, rate)
    for hits in itertools.islice(itertools.product((0, 1), repeat=12), 0, None, 97):
        observed = likelihood_ratio_of_rate(hits, rate) + likelihood_ratio_of_independence(hits)
        brute = sum(chance for value, chance in values if value >= observed - 1e-9)
        assert tail(coverage_law(12, rate), observed) == pytest.approx(brute, abs=1e-10)


@pytest.mark.parametrize(
    ("rate", "point"),
    [(0.01, (5.025, 4.817, 4.738, 4.897)), (0.025, (5.057, 4.874, 5.278, 5.728))],
)  # computed; days 250, 500, 1000, 2500
def test_exact_95_percent_points_of_conditional_coverage(rate, point):
    for days, value in zip((250, 500, 1000, 2500), point, strict=True):
        values, tails = coverage_law(days, rate)
        found = values[np.flatnonzero(tails <= 0.05 + 1e-12)[0] - 1]
        assert found == pytest.approx(value, abs=6e-4)


@pytest.mark.parametrize(
    ("rate", "of_ind", "of_cc"),
    # LR_cc at 1000 days, 1%: 0.026485 here and 0.0265 by simulation; the method notes print .027, rounded twice
    [(0.01, (0.014, 0.015, 0.018, 0.018), (0.008, 0.017, 0.0265, 0.028)),
     (0.025, (0.015, 0.016, 0.019, 0.046), (0.032, 0.038, 0.039, 0.046))],
)  # fmt: skip
def test_true_sizes_of_the_chi_square_tests(rate, of_ind, of_cc):
    for days, ind, cc in zip((250, 500, 1000, 2500), of_ind, of_cc, strict=True):
        assert tail(coverage_law(days, rate), stats.chi2.ppf(0.95, 2)) == pytest.approx(cc, abs=5e-4)
        size = sum(
            stats.binom.pmf(n, days, rate) * tail(independence_law(days, n), stats.chi2.ppf(0.95, 1))
            for n in range(1, 160)
        )
        assert size == pytest.approx(ind, abs=5e-4)


def test_laws_are_whole():
    assert tail(independence_law(2500, 60), 0.0) == pytest.approx(1.0, abs=1e-9)
    assert tail(coverage_law(2500, 0.025), 0.0) == pytest.approx(1.0, abs=1e-9)


def test_no_exception_is_not_a_pass():
    clean = sample_of_hits(np.zeros(250, dtype=bool))
    answer = INDEPENDENCE.judge(clean, SETTINGS)
    assert answer.p_value is None
    assert answer.missing == "0 exceptions, needs 1"
    joint = COVERAGE.judge(clean, SETTINGS)
    assert joint.statistic == pytest.approx(5.0252, abs=5e-5)
    assert joint.evidence == "var-high"


def test_every_day_an_exception_says_nothing_about_clustering():
    answer = INDEPENDENCE.judge(sample_of_hits(np.ones(250, dtype=bool)), SETTINGS)
    assert (answer.statistic, answer.p_value) == (0.0, None)
    joint = COVERAGE.judge(sample_of_hits(np.ones(250, dtype=bool)), SETTINGS)
    assert joint.p_value < 1e-12
    assert joint.evidence == "var-low"


def test_one_exception_on_the_last_day_leaves_an_empty_row():
    answer = INDEPENDENCE.judge(sample_of_hits(hits_on(250, [250])), SETTINGS)
    assert (answer.statistic, answer.p_value, answer.estimate) == (0.0, 1.0, None)


def test_too_evenly_spread_exceptions_are_named_so():
    answer = INDEPENDENCE.judge(sample_of_hits(hits_on(40, [*range(1, 41, 2)])), SETTINGS)
    assert answer.p_value < 0.001
    assert answer.evidence == "spread"


def test_size_of_clustering_in_percentage_points():
    size = clustering(217, 14, 14, 6)
    assert size is not None
    assert size[0] == pytest.approx(100 * (6 / 20 - 14 / 231))


def test_interval_of_clustering_against_the_published_example():
    # Newcombe (1998), Statistics in Medicine 17, Table II, example (a): 56/70 against 48/80, method 10:
    # difference .2000, interval .0524 to .3339 (from memory)
    size = clustering(32, 48, 14, 56)
    assert size == pytest.approx((20.0, 5.24, 33.39), abs=5e-3)


def test_size_oracle_independent_exceptions_and_clustered_ones():
    rng = np.random.default_rng(11)
    iid = [rng.random(250) < 0.025 for _ in range(1000)]
    tested = [a for hits in iid if (a := INDEPENDENCE.judge(sample_of_hits(hits, 0.975), SETTINGS).p_value) is not None]
    joint = [COVERAGE.judge(sample_of_hits(hits, 0.975), SETTINGS).p_value for hits in iid]
    error = 3 * np.sqrt(0.05 * 0.95 / 1000)
    assert np.mean(np.array(tested) <= 0.05) <= 0.05 + error
    assert np.mean(np.array(joint) <= 0.05) <= 0.05 + error
    pairs = [np.repeat(rng.random(125) < 0.05, 2) for _ in range(100)]  # negative control: exceptions come in twos
    clustered = [INDEPENDENCE.judge(sample_of_hits(hits, 0.975), SETTINGS).p_value or 0.0 for hits in pairs]
    assert np.mean(np.array(clustered) <= 0.05) > 0.9
