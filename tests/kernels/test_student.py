import numpy as np
import pytest
from scipy.special import digamma, gammaln, polygamma
from scipy.stats import t as student

from backtest.kernels.student import digamma_trigamma, evaluate, evaluate_t, log_constant, standardise

SAMPLE = np.random.default_rng(3).standard_t(4, 200)
AT = np.array([0.13, 0.2, 0.2, 0.15])


def derivatives(at: np.ndarray, standard: bool) -> tuple[float, np.ndarray, np.ndarray]:
    gradient, hessian = np.empty(4), np.empty((4, 4))
    return evaluate(SAMPLE, at.copy(), standard, gradient, hessian), gradient, hessian


@pytest.mark.parametrize("x", [0.5, 1.02, 3.0, 9.99, 40.0, 250.0])
def test_digamma_and_trigamma_are_those_of_scipy(x):
    assert digamma_trigamma(x) == pytest.approx((digamma(x), float(polygamma(1, x))), rel=1e-12)


@pytest.mark.parametrize("nu", [2.05, 3.0, 8.0, 100.0, 500.0])
def test_the_constant_is_the_density_at_the_mode(nu):
    value, slope, _ = log_constant(1 / nu)
    assert value == pytest.approx(gammaln(nu / 2 + 0.5) - gammaln(nu / 2) - 0.5 * np.log(np.pi * nu), abs=1e-12)
    d = 1e-4 / nu
    assert slope == pytest.approx((log_constant(1 / nu + d)[0] - log_constant(1 / nu - d)[0]) / (2 * d), rel=1e-4)


def test_the_likelihood_is_that_of_two_halves_of_students_t():
    side = np.where(SAMPLE >= 0.13, 1.15, 0.85) * np.exp(0.2)
    expected = (student.logpdf((SAMPLE - 0.13) / side, 5) - 0.2).sum()
    assert derivatives(AT, False)[0] == pytest.approx(expected, rel=1e-13)


@pytest.mark.parametrize(("standard", "i"), [*((False, i) for i in range(4)), (True, 2), (True, 3)])
def test_gradient_and_hessian_are_the_slopes_of_value_and_gradient(standard, i):
    step = 1e-6 * np.eye(4)[i]
    (up, g_up, _), (down, g_down, _) = derivatives(AT + step, standard), derivatives(AT - step, standard)
    _, gradient, hessian = derivatives(AT, standard)
    first = 2 if standard else 0
    assert gradient[i] == pytest.approx((up - down) / 2e-6, rel=1e-6)
    np.testing.assert_allclose(hessian[i, first:], (g_up - g_down)[first:] / 2e-6, rtol=1e-6)


@pytest.mark.parametrize(("nu", "skew"), [(2.3, 0.4), (5.0, 0.1), (8.0, -0.2), (40.0, -0.9)])
def test_the_standardised_law_has_zero_mean_and_unit_variance(nu, skew):
    at = np.array([0.0, 0.0, 1 / nu, skew])
    standardise(at, np.empty((2, 2)), np.empty((2, 2, 2)))
    # Moments of two halves of Student's t: E|T| = 2 f(0) nu/(nu - 1), E T^2 = nu/(nu - 2).
    half = student.pdf(0, nu) * nu / (nu - 1)
    first = half * ((1 + skew) ** 2 - (1 - skew) ** 2)
    second = 0.5 * nu / (nu - 2) * ((1 + skew) ** 3 + (1 - skew) ** 3)
    mode, tau = at[0], np.exp(at[1])
    assert mode + tau * first == pytest.approx(0, abs=1e-12)
    assert tau**2 * (second - first**2) == pytest.approx(1, rel=1e-12)


def test_a_huge_value_does_not_overflow_the_product_of_terms():
    wild = np.concatenate([SAMPLE, np.full(100, 1e30)])
    value = evaluate_t(wild, AT.copy(), np.empty(4), np.empty((4, 4)))
    side = np.where(wild >= 0.13, 1.15, 0.85) * np.exp(0.2)
    assert value == pytest.approx((student.logpdf((wild - 0.13) / side, 5) - 0.2).sum(), rel=1e-12)
