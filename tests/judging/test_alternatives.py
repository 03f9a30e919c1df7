"""Simulated reviews under named alternatives: what is right is right, what is wrong is wrong in the way it says."""

import numpy as np
import pytest
from scipy import integrate, stats

from backtest.judging.alternatives import ALTERNATIVES, Tail, normal_tail, reviews_of, simulate, student_tail

T5 = stats.t(5, scale=np.sqrt(3 / 5))
LEVELS = pytest.mark.parametrize("level", [0.95, 0.975, 0.99])


def pooled(key, level, days=500):
    """Return losses, var, es, sigma and pit of 200 reviews as flat arrays."""
    samples = list(reviews_of(key, level, days, reviews=200, days=500, seed=3))
    return [np.concatenate([getattr(s, name) for s in samples]) for name in ("losses", "var", "es", "sigma", "pit")]


@LEVELS
@pytest.mark.parametrize(("tail", "law"), [(student_tail, T5), (normal_tail, stats.norm())])
def test_quantile_shortfall_and_shape_agree_with_quadrature(level, tail, law):
    q = law.ppf(level)
    mean, square = (
        integrate.quad(lambda x, k=k: x**k * law.pdf(x), q, np.inf, epsabs=1e-12)[0] / (1 - level) for k in (1, 2)
    )
    excess, variance = mean - q, square - mean**2
    assert tail(level) == pytest.approx(Tail(q, mean, (1 - excess**2 / variance) / 2), rel=1e-7)


@LEVELS
def test_the_gpd_of_the_shape_has_the_mean_and_the_variance_of_the_excess(level):
    q, shortfall, shape = student_tail(level)
    gpd = stats.genpareto(shape, scale=(shortfall - q) * (1 - shape))
    excesses = T5.ppf(level + (1 - level) * (np.arange(2_000_000) + 0.5) / 2_000_000) - q
    assert gpd.mean() == pytest.approx(excesses.mean(), rel=1e-3)
    assert gpd.var() == pytest.approx(excesses.var(), rel=1e-2)


def test_the_market_follows_its_recursion():
    market = simulate(2, 50, 9)
    after = 0.02 + 0.08 * market.losses[:, :-1] ** 2 + 0.90 * market.sigma[:, :-1] ** 2
    assert market.sigma[:, 1:] ** 2 == pytest.approx(after, rel=1e-12)
    assert market.pit == pytest.approx(T5.cdf(market.losses / market.sigma), rel=1e-12)


def test_longer_reviews_begin_with_the_shorter_ones():
    long, short = (next(reviews_of("right", 0.99, n, reviews=3, days=60, seed=1)) for n in (60, 20))
    assert np.array_equal(long.losses[:20], short.losses)
    assert np.array_equal(long.pit[:20], short.pit)


# 100,000 days, 2,500 or 1,000 exceptions expected: the tolerances are four standard errors of independent days
@pytest.mark.parametrize(("level", "error"), [(0.975, 0.002), (0.99, 0.0013)])
@pytest.mark.parametrize(
    ("key", "rate"),
    [("right", 1.0), ("rate-x2", 2.0), ("thin-tail", 1.0),
     ("sigma-10", lambda level: T5.sf(0.9 * T5.ppf(level)) / (1 - level)),
     ("sigma-20", lambda level: T5.sf(0.8 * T5.ppf(level)) / (1 - level))],
)  # fmt: skip
def test_exceptions_come_as_often_as_the_alternative_says(key, rate, level, error):
    losses, var, *_ = pooled(key, level)
    wanted = rate(level) if callable(rate) else rate
    assert np.mean(losses > var) == pytest.approx(wanted * (1 - level), abs=error * np.sqrt(wanted))


@pytest.mark.parametrize("level", [0.975, 0.99])
@pytest.mark.parametrize("key", ALTERNATIVES)
def test_a_pit_above_the_level_is_an_exception_and_pits_rise_with_the_loss(key, level):
    for sample in reviews_of(key, level, 500, reviews=5, days=500, seed=3):
        assert np.array_equal(sample.pit > level, sample.hits)
        assert np.all((sample.pit > 0) & (sample.pit <= 1))
        order = np.argsort(sample.losses / sample.sigma)
        assert np.all(np.diff(sample.pit[order]) >= 0)
        assert np.all(sample.es > sample.var)


def test_pits_of_right_forecasts_are_uniform_and_those_of_wrong_ones_are_not():
    chances = {key: stats.kstest(pooled(key, 0.975)[4], "uniform").pvalue for key in ALTERNATIVES}
    assert chances["right"] > 0.01
    assert max(chances[key] for key in ("rate-x2", "sigma-10", "sigma-20")) < 1e-6


def test_a_thin_tail_has_the_right_var_and_too_small_an_es():
    losses, var, es, *_ = pooled("right", 0.975)
    _, thin_var, thin_es, *_ = pooled("thin-tail", 0.975)
    assert np.array_equal(var, thin_var)
    beyond = losses > var
    assert np.mean(losses[beyond] / es[beyond]) == pytest.approx(1.0, abs=0.02)
    assert np.mean(losses[beyond] / thin_es[beyond]) > 1.1


def test_no_reaction_has_one_var_that_is_right_on_average_and_exceptions_that_cluster():
    samples = list(reviews_of("no-reaction", 0.975, 500, reviews=200, days=500, seed=3))
    assert len({float(v) for s in samples for v in s.var}) == 1
    assert np.mean([s.hits.mean() for s in samples]) == pytest.approx(0.025, abs=0.004)
    after = np.mean([np.sum(s.hits[1:] & s.hits[:-1]) for s in samples]) / np.mean(
        [np.sum(s.hits[:-1]) for s in samples]
    )
    assert after > 0.05
