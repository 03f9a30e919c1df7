"""The running e-process: values by hand, a plain second implementation, false alarms and detection."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from backtest.judging.answers import Settings
from backtest.judging.evidence import LARGEST, MARKS, METHODS, TESTS, capital, e_values
from tests.reference.hit_laws import SkewedT, capital_slow
from tests.reference.judging_laws import es_t
from tests.reference.judging_tables import sample_of

(RUNNING,) = TESTS
SETTINGS = Settings(0.05, 99, 1)
NU = 5


def path_of(seed, days=120):
    rng = np.random.default_rng(seed)
    sigma = np.exp(0.4 * np.sin(np.arange(days) / 9 + seed))
    return rng.standard_t(4, days) * 1.5 * sigma, 2.0 * sigma, 2.9 * sigma


def test_e_values_by_hand():
    losses, var, es = np.array([1.0, 2.0, 2.5, 5.0]), np.full(4, 2.0), np.full(4, 3.0)
    np.testing.assert_allclose(e_values(losses, var, es, 0.975), [0.0, 0.0, 20.0, 120.0])
    np.testing.assert_allclose(e_values(losses, var, None, 0.975), [0.0, 0.0, 40.0, 40.0])


def test_e_values_where_es_is_not_above_var():
    losses, var = np.array([1.0, 2.0, 2.1, 1.0]), np.full(4, 2.0)
    found = e_values(losses, var, np.array([2.0, 2.0, 2.0, 1.9]), 0.975)
    np.testing.assert_array_equal(found, [1.0, 1.0, np.inf, np.inf])  # 0/0 = 1; impossible; no law has ES below VaR


def test_e_values_have_mean_one_where_the_forecast_is_right_and_more_where_it_is_low():
    var, es = stats.t.ppf(0.975, NU), es_t(NU, 0.975)
    losses = stats.t.ppf((np.arange(200_000) + 0.5) / 200_000, NU)
    assert e_values(losses, np.float64(var), np.float64(es), 0.975).mean() == pytest.approx(1.0, abs=4e-3)
    assert e_values(losses, np.float64(var), None, 0.975).mean() == pytest.approx(1.0, abs=1e-3)
    assert e_values(losses, np.float64(var), np.float64(0.95 * es), 0.975).mean() > 1.1


@settings(max_examples=20, deadline=None)
@given(st.integers(0, 10_000), st.booleans())
def test_capital_against_a_plain_loop(seed, with_es):
    losses, var, es = path_of(seed)
    es = es if with_es else None
    as_were, restated = (np.array(capital_slow(losses, var, es, 0.95, restate)) for restate in (False, True))
    np.testing.assert_allclose(capital(losses, var, es, 0.95, "past e-values"), as_were, rtol=1e-9)
    np.testing.assert_allclose(capital(losses, var, es, 0.95, "past losses"), restated, rtol=1e-9)
    np.testing.assert_allclose(capital(losses, var, es, 0.95), (as_were + restated) / 2, rtol=1e-9)


@pytest.mark.parametrize("method", METHODS)
def test_later_days_change_no_earlier_capital(method):
    losses, var, es = path_of(1, 400)
    whole, early = capital(losses, var, es, 0.975, method), capital(losses[:300], var[:300], es[:300], 0.975, method)
    np.testing.assert_allclose(whole[:300], early, rtol=1e-12)
    assert whole[0] == 1.0  # nothing is bet on the first day


def test_with_constant_forecasts_both_rules_bet_alike():
    losses, _, _ = path_of(2, 300)
    var, es = np.full(300, 2.0), np.full(300, 2.9)
    np.testing.assert_allclose(capital(losses, var, es, 0.975, "past losses"),
                               capital(losses, var, es, 0.975, "past e-values"), rtol=1e-9)  # fmt: skip


def test_answer_on_var_and_es():
    losses, var, es = path_of(3, 500)
    answer = RUNNING.judge(sample_of(losses, var / 2, 0.975, es=es / 2), SETTINGS)
    path = capital(losses, var / 2, es / 2, 0.975)
    assert (answer.statistic, answer.estimate) == (path.max(), path[-1])
    assert answer.p_value == 1 / path.max()
    assert (answer.evidence, answer.direction) == ("risk-low", "act: 20 was reached")
    assert MARKS in answer.notes


def test_answer_without_es_is_on_var_alone():
    losses, var, _ = path_of(4, 500)
    answer = RUNNING.judge(sample_of(losses, var / 2, 0.975), SETTINGS)
    assert answer.statistic == capital(losses, var / 2, None, 0.975).max()
    assert answer.evidence == "var-low"
    assert "VaR alone" in answer.notes


def test_days_without_es_are_left_out_and_counted():
    losses, var, es = path_of(5, 200)
    es[10:30] = np.nan
    answer = RUNNING.judge(sample_of(losses, var, 0.975, es=es), SETTINGS)
    assert answer.used.days == 180
    assert "20 days without ES left out" in answer.notes


@pytest.mark.parametrize(
    ("days", "value", "mark"),
    [(4, 8, "below 10"), (5, 16, "look: 10 was reached"), (6, 32, "act: 20 was reached")],
)
def test_marks_by_hand(days, value, mark):
    # an e-value of 3 every day: half the capital is bet from day 2 on, which doubles it
    answer = RUNNING.judge(sample_of(np.full(days, 3.0), 2.0, 0.975, es=2.0 + 1.0 / (0.025 * 3)), SETTINGS)
    assert answer.statistic == pytest.approx(value)
    assert answer.direction == mark
    assert (answer.p_value <= 0.05) == (value >= 20)


def test_a_loss_beyond_an_es_that_equals_var_is_infinite_evidence():
    losses = np.array([0.0, 0.0, 3.0, 0.0])
    answer = RUNNING.judge(sample_of(losses, 2.0, 0.975, es=2.0), SETTINGS)
    np.testing.assert_array_equal(capital(losses, np.full(4, 2.0), np.full(4, 2.0), 0.975), [1.0, 1.0, np.inf, np.inf])
    assert (answer.statistic, answer.p_value) == (LARGEST, 1 / LARGEST)
    assert any(note.startswith("infinite since 2020-01-03: ") for note in answer.notes)


def test_es_equal_to_var_without_such_a_loss_is_no_evidence():
    answer = RUNNING.judge(sample_of(np.zeros(50), 2.0, 0.975, es=2.0), SETTINGS)
    assert (answer.statistic, answer.p_value) == (1.0, 1.0)


def test_overwhelming_evidence_stays_finite():
    answer = RUNNING.judge(sample_of(np.full(2500, 9.0), 1.0, 0.99, es=1.1), SETTINGS)
    assert answer.statistic == LARGEST
    assert answer.p_value == 1 / LARGEST


def garch_losses(rng, reviews, days, law):
    """AR(1)-GARCH(1,1) losses: mean -.05 + .3 x, variance .01 + .1 e^2 + .85 h; returns losses, means and sigmas."""
    draws = law.draw(rng, (days + 100, reviews))
    x, h, e = np.zeros(reviews), np.full(reviews, 0.2), np.zeros(reviews)
    kept = []
    for z in draws:
        h = 0.01 + 0.1 * e**2 + 0.85 * h
        mean = -0.05 + 0.3 * x
        e = np.sqrt(h) * z
        x = mean + e
        kept.append((x, mean, np.sqrt(h)))
    return np.array(kept)[100:].transpose(1, 2, 0)


def reached(mark, losses, var, es, level):
    paths = zip(losses, var, es, strict=True)
    return np.mean([capital(loss, v, e, level).max() >= mark for loss, v, e in paths])


@pytest.mark.slow
def test_published_false_alarms_and_detection():
    # Wang, Wang and Ziegel, arXiv 2209.00991, as quoted in a secondary text: 97.5%, 500 days, mark 10. ES too low by
    # 10%: 3.6% (recomputed once before: .037). Here .039, error .0025 (6,000 reviews). With true forecasts: .2%
    # (recomputed once before: .0027). That does not come out as the share that ever reached 10: here .0058, error
    # .0010; it is the share that stands at 10 on the last day, .0028. Why is open; both lie far below the bound of .1.
    law, rng = SkewedT(5, 1.5), np.random.default_rng(1)
    losses, mean, sigma = garch_losses(rng, 3000, 500, law)
    quantile, shortfall = law.tail(0.975)
    var, es = mean + sigma * quantile, mean + sigma * shortfall
    paths = np.array([capital(*day, 0.975) for day in zip(losses, var, es, strict=True)])
    assert np.mean(paths[:, -1] >= 10) == pytest.approx(0.0027, abs=0.0029)  # three errors
    assert np.mean(paths.max(axis=1) >= 10) == pytest.approx(0.0058, abs=0.0042)
    assert reached(10, losses, var, 0.9 * es, 0.975) == pytest.approx(0.0365, abs=0.0105)


@pytest.mark.slow
def test_power_of_reaching_20():
    # GARCH(1,1)-t5, sigma understated by 20%: computed .98 at 2,500 days, .01 to .08 at 250; 97.5%
    rng, sd = np.random.default_rng(2), np.sqrt(5 / 3)
    z = rng.standard_t(5, (400, 2500)) / sd
    sigma, h, e = np.empty((400, 2500)), np.ones(400), np.zeros(400)
    for t in range(2500):
        h = 0.02 + 0.08 * e**2 + 0.9 * h
        sigma[:, t] = np.sqrt(h)
        e = sigma[:, t] * z[:, t]
    var, es = (value / sd * 0.8 * sigma for value in (stats.t.ppf(0.975, 5), es_t(5, 0.975)))
    late, early = (reached(20, *(a[:, :n] for a in (sigma * z, var, es)), 0.975) for n in (2500, 250))
    assert late == pytest.approx(0.98, abs=0.025)
    assert early < 0.12
    true = reached(20, sigma * z, var / 0.8, es / 0.8, 0.975)
    assert true <= 0.02


def test_at_most_one_correct_model_in_twenty_reaches_20():
    rng = np.random.default_rng(3)
    losses = rng.standard_t(5, (300, 500))
    var, es = (np.full(losses.shape, value) for value in (stats.t.ppf(0.975, 5), es_t(5, 0.975)))
    assert reached(20, losses, var, es, 0.975) <= 0.05
    assert reached(20, losses, 0.6 * var, 0.6 * es, 0.975) > 0.9  # negative control: much too low
