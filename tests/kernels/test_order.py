import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from backtest.kernels import order
from backtest.kernels.ewma import roll_ewma

SAMPLES = arrays(np.float64, st.integers(20, 80), elements=st.floats(-1e6, 1e6, width=32))


@given(SAMPLES, st.integers(1, 20))
@settings(deadline=None)
def test_largest_is_the_head_of_the_sorted_sample(sample, k):
    np.testing.assert_array_equal(order.largest(sample, k), np.sort(sample)[::-1][:k])


@given(SAMPLES, st.integers(1, 20))
@settings(deadline=None)
def test_the_kth_largest_is_that_of_the_sorted_sample(sample, k):
    assert order.kth_largest(sample.copy(), k) == np.sort(sample)[-k]


@given(arrays(np.float64, st.integers(1, 900), elements=st.integers(-5, 5)))
@settings(deadline=None)
def test_sorting_is_that_of_numpy(sample):
    expected = np.sort(sample)
    order.sort_ascending(sample)
    np.testing.assert_array_equal(sample, expected)


@given(SAMPLES, st.floats(-1e6, 1e6))
@settings(deadline=None)
def test_the_rank_counts_what_is_strictly_below(sample, value):
    assert order.share_below(sample, value) == ((sample < value).sum() + 0.5) / (sample.size + 1)


def test_the_quantile_is_the_ceil_nq_th_smallest():
    sample = np.random.default_rng(0).permutation(np.arange(1.0, 1001.0))[None, :]
    quantile, _ = order.empirical_rows(sample, np.array([0.975, 0.99, 0.9995]))
    assert quantile[0].tolist() == [975.0, 990.0, 1000.0]


def test_the_shortfall_is_the_integral_of_the_step_function():
    # n = 250, q = .99: nq = 247.5, k = 248: [x249 + x250 + 0.5 x248] / 2.5, worked by hand.
    sample = np.arange(1.0, 251.0)[None, :]
    quantile, shortfall = order.empirical_rows(sample, np.array([0.99]))
    assert quantile[0, 0] == 248
    assert shortfall[0, 0] == pytest.approx((249 + 250 + 0.5 * 248) / 2.5)


def test_ewma_repeats_the_recursion():
    x = np.array([1.0, -2.0, 0.5])
    h = np.mean(x**2)
    expected = []
    for value in x:
        expected.append(value / np.sqrt(h))
        h = 0.94 * h + 0.06 * value**2
    sigma, residuals = roll_ewma(x[None, :], 0.94)
    np.testing.assert_allclose(residuals[0], expected, rtol=1e-14)
    assert sigma[0] == pytest.approx(np.sqrt(h))


def test_a_past_of_zeros_has_sigma_zero_and_zero_residuals():
    sigma, residuals = roll_ewma(np.zeros((1, 30)), 0.94)
    assert sigma[0] == 0
    assert not residuals.any()
