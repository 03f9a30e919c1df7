"""Scores and the Diebold-Mariano test between models."""

import numpy as np
import pytest
from scipy import stats

from backtest.judging.answers import Settings
from backtest.judging.ranking import (
    TESTS,
    long_run_variance,
    mean_difference,
    newey_west_lag,
    shared_days,
    small_sample_factor,
)
from backtest.judging.scores import fz0, score_together, tick
from tests.reference.judging_laws import newey_west_slow
from tests.reference.judging_tables import sample_of

(DIEBOLD_MARIANO,) = TESTS
SETTINGS = Settings(0.05, 99, 1)


def arrays(*values):
    return tuple(np.array([float(v)]) for v in values)


def test_tick_values():
    assert tick(*arrays(3, 2), 0.975)[0] == pytest.approx(0.9750)
    assert tick(*arrays(1, 2), 0.975)[0] == pytest.approx(0.0250)


def test_fz0_values():
    # computed twice independently at 97.5%: (v, e; L)
    assert fz0(*arrays(3, 2, 2.5), 0.975)[0] == pytest.approx(16.716291, abs=5e-7)
    assert fz0(*arrays(1, 2, 2.5), 0.975)[0] == pytest.approx(0.716291, abs=5e-7)


def test_both_scores_are_least_at_the_true_forecast():
    losses = stats.norm.ppf((np.arange(200_000) + 0.5) / 200_000)
    var = float(stats.norm.ppf(0.975))
    es = float(stats.norm.pdf(var) / 0.025)

    def mean(v, e):
        return fz0(losses, np.full(200_000, v), np.full(200_000, e), 0.975).mean()

    for dv, de in ((0.05, 0.0), (-0.05, 0.0), (0.0, 0.05), (0.0, -0.05)):
        assert mean(var + dv, es + de) > mean(var, es)
    for dv in (-0.05, 0.05):
        assert (
            tick(losses, np.full(200_000, var + dv), 0.975).mean() > tick(losses, np.full(200_000, var), 0.975).mean()
        )


def test_differences_of_fz0_have_no_unit():
    a, b = (fz0(*arrays(4, v, e), 0.975) for v, e in ((2, 2.5), (2.2, 3.1)))
    c, d = (fz0(*arrays(12, v, e), 0.975) for v, e in ((6, 7.5), (6.6, 9.3)))
    assert a - b == pytest.approx(8.649405, abs=5e-7)
    assert c - d == pytest.approx(a - b)


@pytest.mark.parametrize(
    ("days", "horizon", "factor"), [(250, 1, 0.997998), (250, 10, 0.961998), (500, 1, 0.998999)]
)  # Harvey, Leybourne and Newbold (1997), computed from their formula
def test_small_sample_factors(days, horizon, factor):
    assert small_sample_factor(days, horizon) == pytest.approx(factor, abs=5e-7)


def test_lag_at_500_days():
    assert newey_west_lag(500) == 5


def test_long_run_variance_against_a_plain_double_sum():
    series = np.random.default_rng(1).standard_normal(120).cumsum()
    assert long_run_variance(series) == pytest.approx(newey_west_slow(series, newey_west_lag(120)), rel=1e-10)


def test_mean_difference_by_its_formula():
    # five days: lag floor(4 (.05)^(2/9)) = 2
    series = np.array([0.3, -0.1, 0.4, 0.2, -0.2])
    found = mean_difference(series)
    error = np.sqrt(newey_west_slow(series, 2) / 5) / np.sqrt(4 / 5)
    assert found.statistic == pytest.approx(series.mean() / error)
    assert found.p_value == pytest.approx(2 * stats.t.sf(series.mean() / error, 4))
    assert found.high == pytest.approx(series.mean() + stats.t.ppf(0.975, 4) * error)


def test_size_oracle_and_negative_control():
    rng = np.random.default_rng(7)
    noise = rng.standard_normal((2000, 500))
    sizes = np.mean([mean_difference(row).p_value <= 0.05 for row in noise])
    assert sizes == pytest.approx(0.05, abs=0.02)  # Newey-West with lag 5 at 500 days rejects a little too often
    assert np.mean([mean_difference(row).p_value <= 0.05 for row in noise[:200] + 0.25]) > 0.99


def pair(**second):
    losses = np.random.default_rng(3).standard_t(5, 400)
    first = sample_of(losses, 2.5, 0.975, es=3.4)
    return first, sample_of(losses, **{"var": 2.0, "es": 2.9, **second}, level=0.975)


def test_fz0_where_both_have_es_else_tick():
    both = score_together(pair())
    assert (both.name, both.note) == ("FZ0", "")
    one = score_together(pair(es=np.nan))
    assert one.name == "tick"
    assert "no ES on every day" in one.note
    below = score_together(pair(es=1.0))
    assert below.note == "not FZ0: ES not positive or below VaR on 400 rows"


def test_better_and_worse_are_told_apart():
    rng = np.random.default_rng(5)
    sigma = np.exp(0.8 * np.sin(np.arange(1500) / 40))
    losses = sigma * rng.standard_normal(1500)
    good = sample_of(losses, 1.96 * sigma, 0.975, es=2.34 * sigma)
    flat = sample_of(losses, 2.6, 0.975, es=3.3)
    answer, mirror = DIEBOLD_MARIANO.judge(good, flat, SETTINGS), DIEBOLD_MARIANO.judge(flat, good, SETTINGS)
    assert answer.p_value == mirror.p_value < 0.001
    assert (answer.evidence, mirror.evidence) == ("better", "worse")
    assert answer.estimate == -mirror.estimate < 0
    assert answer.low == pytest.approx(-mirror.high)


def test_identical_forecasts_are_not_tested():
    first, _ = pair()
    answer = DIEBOLD_MARIANO.judge(first, first, SETTINGS)
    assert (answer.p_value, answer.missing) == (None, "needs score differences that vary")
    assert answer.estimate == 0.0


def test_shared_days():
    first, second = pair()
    cut = shared_days(first.on(np.arange(100, 400)), second.on(np.arange(0, 300)))
    assert [s.days for s in cut] == [200, 200]
    assert np.array_equal(cut[0].dates, cut[1].dates)
