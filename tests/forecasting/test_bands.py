"""Intervals from estimation error: formulas against second implementations, coverage against known truth."""

import numpy as np
import pytest
from scipy import stats

from backtest.forecasting.bands import Halves, delta_bands, empirical_halves, gpd_errors, ranks
from backtest.forecasting.filters import apply_filter
from backtest.forecasting.law_bands import normal_errors
from backtest.forecasting.models import FilterSpec, TailSpec
from backtest.forecasting.tails import apply_tail

LEVELS = np.array([0.975, 0.99])


def bands_of(samples: np.ndarray, tail: TailSpec, uncertainty: np.ndarray | None = None, filter_kind: str = "none"):
    n = len(samples)
    spec = FilterSpec(filter_kind, decay=0.94 if filter_kind == "ewma" else 0.0)
    filtered = apply_filter(samples, spec, np.arange(n), np.ones(n, dtype=bool))
    if uncertainty is not None:
        object.__setattr__(filtered, "uncertainty", uncertainty)
    tailed = apply_tail(filtered, tail, LEVELS, np.arange(n))
    return filtered, tailed, delta_bands(filtered, tailed, tail, LEVELS)


@pytest.mark.parametrize(("n", "q"), [(250, 0.975), (368, 0.99), (500, 0.95), (1000, 0.975), (1000, 0.99), (77, 0.6)])
def test_ranks_are_those_of_the_exact_interval(n, q):
    r, s = ranks(n, q)
    assert stats.binom.cdf(r - 1, n, q) <= 0.025 < stats.binom.cdf(r, n, q)
    assert stats.binom.cdf(s - 1, n, q) >= 0.975 > stats.binom.cdf(s - 2, n, q)
    assert r <= np.ceil(n * q) <= s


def test_the_upper_rank_is_out_of_reach_of_short_samples():
    assert ranks(367, 0.99)[1] == 368
    assert ranks(368, 0.99)[1] == 368
    assert ranks(145, 0.975)[1] == 146
    assert ranks(146, 0.975)[1] == 146


def plain_errors(xi: float, beta: float, k: int, share: float, q: float) -> tuple[float, float]:
    """Delta method with numerical gradients; the threshold moves along the tail, which stays where it is."""

    def read(p):
        x, b, u = p
        b = b + x * u  # scale at a threshold moved by u
        r = (1 - q) / share
        g = (r**-x - 1) / x
        return np.array([u + b * g, (u + b * g + b - x * u) / (1 - x)])

    at, step = np.array([xi, beta, 0.0]), 1e-6
    slope = np.array([(read(at + step * e) - read(at - step * e)) / (2 * step) for e in np.eye(3)])
    smith = [
        [(1 + xi) ** 2, -(1 + xi) * beta, 0],
        [-(1 + xi) * beta, 2 * (1 + xi) * beta**2, 0],
        [0, 0, beta**2 * (1 - share)],
    ]
    return tuple(np.sqrt(np.diag(slope.T @ np.array(smith) @ slope) / k))


@pytest.mark.parametrize("xi", [0.2, -0.3, 0.7, 1e-4])
def test_the_gpd_delta_method_is_that_of_numerical_gradients(xi):
    found = gpd_errors(np.array([xi]), np.array([1.7]), np.array([90]), np.array([0.09]), LEVELS)
    for j, q in enumerate(LEVELS):
        expected = plain_errors(xi, 1.7, 90, 0.09, q)
        np.testing.assert_allclose([found[0][0, j], found[1][0, j]], expected, rtol=2e-4)


def test_the_gpd_delta_method_does_not_jump_at_shape_zero():
    shapes = np.array([-1.01e-5, -0.99e-5, 0.0, 0.99e-5, 1.01e-5])
    for errors in gpd_errors(shapes, np.ones(5), np.full(5, 100), np.full(5, 0.1), LEVELS):
        np.testing.assert_allclose(errors / errors[2], 1, rtol=1e-4)


def test_the_empirical_interval_ends_at_order_statistics():
    x = np.random.default_rng(1).permutation(np.arange(1.0, 1001.0) ** 2)
    found = empirical_halves(x[None], LEVELS)
    for j, q in enumerate(LEVELS):
        r, s = ranks(1000, q)
        at = np.ceil(1000 * q) ** 2
        assert found.quantile_below[0, j] == pytest.approx(at - r**2)
        assert found.quantile_above[0, j] == pytest.approx(s**2 - at)


def test_the_empirical_es_has_its_asymptotic_variance():
    # Manistre & Hancock (2005), North American Actuarial Journal 9: [Var(x | x > q) + q (ES - VaR)^2] / (n (1 - q)).
    x = np.random.default_rng(2).standard_t(4, 1000)
    top = np.sort(x)[-25:]
    var, es = np.sort(x)[974], top.mean()
    expected = np.sqrt((top.var() + 0.975 * (es - var) ** 2) / 25)
    found = empirical_halves(x[None], LEVELS).shortfall_above[0, 0] / 1.959963984540054
    assert top.var() > (es - var) ** 2  # else the spread of an exponential law is taken
    assert found == pytest.approx(expected, rel=1e-9)


def test_beyond_a_short_sample_the_upper_limit_is_finite_and_at_least_the_largest_loss():
    x = np.random.default_rng(3).standard_t(4, (50, 100))
    _, tailed, found = bands_of(x, TailSpec("empirical"))
    assert np.isfinite(found.var_high).all()
    assert (found.var_high >= x.max(axis=1)[:, None]).all()
    assert (found.var_low < tailed.quantile).all()


def test_the_errors_of_a_fitted_normal_law_are_its_own_where_losses_are_normal():
    x = np.random.default_rng(4).standard_normal((1, 200_000)) * 3 + 1
    law = np.array([[x.mean(), x.std(), np.inf, 0.0]])
    z = stats.norm.ppf(LEVELS)
    depth = stats.norm.pdf(z) / (1 - LEVELS)
    for errors, at in zip(normal_errors(x, law, LEVELS), (z, depth), strict=True):
        np.testing.assert_allclose(errors[0], 3 * np.sqrt((1 + at**2 / 2) / 200_000), rtol=0.02)


@pytest.mark.parametrize("kind", ["t", "skew-t"])
def test_the_errors_of_a_fitted_t_law_are_the_spread_of_its_estimates(kind):
    x = np.random.default_rng(5).standard_t(4, (400, 500))
    _, tailed, found = bands_of(x, TailSpec(kind))
    for estimates, low, high in (
        (tailed.quantile, found.var_low, found.var_high), (tailed.shortfall, found.es_low, found.es_high),
    ):  # fmt: skip
        claimed = np.median(high - low, axis=0) / (2 * 1.959963984540054)
        np.testing.assert_allclose(estimates.std(axis=0) / claimed, 1, atol=0.15)


def test_a_standard_normal_law_has_no_error_of_its_own():
    _, _, found = bands_of(np.random.default_rng(6).standard_normal((3, 300)), TailSpec("normal"), None, "ewma")
    np.testing.assert_array_equal(found.var_low, found.var_high)
    np.testing.assert_array_equal(found.es_low, found.es_high)


def test_errors_of_filter_and_tail_add_in_squares():
    x = np.random.default_rng(7).standard_normal((2, 300))
    tail = TailSpec("gpd", 0.1, "ml")
    uncertainty = np.array([[0.04, 0.09, -0.01], [0.01, 0.0, 0.0]])
    filtered, tailed, without = bands_of(x, tail, None, "ewma")
    _, _, found = bands_of(x, tail, uncertainty, "ewma")
    q, s = tailed.quantile, tailed.shortfall
    for at, name in ((q, "var_high"), (s, "es_high")):
        centre = filtered.sigma[:, None] * at
        v_mean, v_sigma, both = uncertainty[:, 0, None], uncertainty[:, 1, None], uncertainty[:, 2, None]
        own = getattr(without, name) - centre
        added = 1.959963984540054**2 * (v_mean + 2 * at * both + at * at * v_sigma)
        np.testing.assert_allclose(getattr(found, name) - centre, np.sqrt(own**2 + added), rtol=1e-12)


def test_a_tail_without_a_regular_likelihood_takes_the_empirical_width():
    rng = np.random.default_rng(8)
    bounded = rng.beta(2, 1.2, (4, 300))  # a generalized Pareto shape near -1/1.2
    by_moments = rng.standard_t(4, (4, 300))
    for x, tail in ((bounded, TailSpec("gpd", 0.1, "zhang-stephens")), (by_moments, TailSpec("gpd", 0.1, "pwm"))):
        filtered, tailed, found = bands_of(x, tail)
        rows = (tailed.tail[:, 0] <= -0.5) | (tail.fit == "pwm")
        assert rows.any()
        halves: Halves = empirical_halves(filtered.residuals, LEVELS)
        np.testing.assert_allclose((found.var_high - tailed.quantile)[rows], halves.quantile_above[rows])
        np.testing.assert_allclose((found.es_high - tailed.shortfall)[rows], halves.shortfall_above[rows])


def coverage(repeats: int, shrink: float = 1.0) -> tuple[float, float]:
    """How often VaR at 99% and ES at 97.5% of a t4 law lie in the interval: 1,000 losses, 100 excesses."""
    x = np.random.default_rng(9).standard_t(4, (repeats, 1000))
    _, tailed, found = bands_of(x, TailSpec("gpd", 0.1, "ml"))
    var = stats.t.ppf(0.99, 4)
    at = stats.t.ppf(0.975, 4)
    es = stats.t.pdf(at, 4) / 0.025 * (4 + at * at) / 3
    hits = []
    for centre, low, high, truth in (
        (tailed.quantile[:, 1], found.var_low[:, 1], found.var_high[:, 1], var),
        (tailed.shortfall[:, 0], found.es_low[:, 0], found.es_high[:, 0], es),
    ):
        hits.append(np.mean((centre - shrink * (centre - low) <= truth) & (truth <= centre + shrink * (high - centre))))
    return float(hits[0]), float(hits[1])


@pytest.mark.slow
def test_intervals_cover_as_often_as_they_are_said_to():
    # 92% and 87.5% by an independent simulation of 400 samples; three standard errors of that and of this.
    var, es = coverage(2000)
    error = np.sqrt(0.9 * 0.1 * (1 / 400 + 1 / 2000))
    assert var == pytest.approx(0.92, abs=3 * error)
    assert es == pytest.approx(0.875, abs=3 * error)


@pytest.mark.slow
def test_the_check_of_coverage_can_fail():
    """Negative control: intervals of two thirds the width are found out."""
    var, es = coverage(2000, shrink=0.67)
    error = np.sqrt(0.9 * 0.1 * (1 / 400 + 1 / 2000))
    assert var < 0.92 - 3 * error
    assert es < 0.875 - 3 * error
