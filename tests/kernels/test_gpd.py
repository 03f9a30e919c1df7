import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from scipy.stats import genpareto

from backtest.kernels import gpd
from tests.reference.datasets import bmw, dow_jones, rain


def sample_of_quantiles(xi: float, n: int = 100) -> np.ndarray:
    p = (np.arange(n) + 0.5) / n
    return -np.log1p(-p) if xi == 0 else ((1 - p) ** -xi - 1) / xi


# Coles (2001), An Introduction to Statistical Modeling of Extreme Values, sections 4.4.1, 4.4.2 (values from memory).
@pytest.mark.parametrize(
    ("data", "u", "excesses", "scale", "shape"),
    [(rain, 30, 152, (7.44, 0.005), (0.184, 0.0006)), (dow_jones, 2, 37, (0.495, 0.0006), (0.288, 0.0006))],
)
def test_the_fits_of_coles_come_out(data, u, excesses, scale, shape):
    x = data()
    y = x[x > u] - u
    xi, beta, _ = gpd.fit_ml(y, np.nan)
    assert y.size == excesses
    assert beta == pytest.approx(scale[0], abs=scale[1])
    assert xi == pytest.approx(shape[0], abs=shape[1])


# Computed with an independent optimiser (profile likelihood on a grid, polished): shape, scale.
@pytest.mark.parametrize(("xi", "shape", "scale"), [(0.2, 0.182925, 1.012907), (0.0, -0.019392, 1.015884)])
def test_samples_of_quantiles_have_known_fits(xi, shape, scale):
    fitted = gpd.fit_ml(sample_of_quantiles(xi), np.nan)
    assert fitted[:2] == pytest.approx((shape, scale), abs=2e-6)


def test_zhang_stephens_on_a_sample_of_quantiles():
    # Zhang & Stephens (2009), formula; value computed independently.
    assert gpd.fit_zhang_stephens(sample_of_quantiles(0.2)) == pytest.approx((0.215376, 0.980905), abs=2e-6)


# Hosking & Wallis (1987), formula; value computed independently.
def test_probability_weighted_moments_on_a_sample_of_quantiles():
    assert gpd.fit_pwm(sample_of_quantiles(0.2)) == pytest.approx((0.193482, 0.997096), abs=2e-6)


def test_probability_weighted_moments_beyond_the_end_point_are_refused():
    # Half of the mass at 1 and one value far out: the fitted end point lies short of the largest value.
    y = np.concatenate([np.linspace(0.9, 1.0, 60), [2.5]])
    n, p = y.size, (np.arange(1, y.size + 1) - 0.35) / y.size
    a0, a1 = y.mean(), np.mean((1 - p) * y)
    xi, beta = 2 - a0 / (a0 - 2 * a1), 2 * a0 * a1 / (a0 - 2 * a1)
    assert n == 61
    assert xi < 0
    assert y.max() > beta / -xi
    assert np.isnan(gpd.fit_pwm(y.copy())).all()
    fitted = gpd.fit(y.copy(), gpd.BY_PWM, np.nan)
    assert fitted[3] == gpd.ZHANG_STEPHENS
    assert fitted[:2] == pytest.approx(gpd.fit_zhang_stephens(y))


def excesses(sample, k, bound):
    work = np.empty((2, sample.size))
    threshold, count = gpd.excesses(sample, k, bound, work)
    return threshold, work[1, :count]


def test_the_bmw_tail():
    # Computed independently (profile likelihood): threshold, shape, scale, VaR and ES at 0.99 of the whole series.
    x = bmw().to_numpy()
    threshold, y = excesses(x, 100, np.nan)
    xi, beta, _ = gpd.fit_ml(y, np.nan)
    var, es = gpd.quantile_and_shortfall(threshold, xi, beta, 0.01 * x.size / 100)
    assert (threshold, xi, beta) == pytest.approx((3.42151, 0.197230, 1.201891), abs=1e-5)
    assert (var, es) == pytest.approx((4.035577, 5.683624), abs=2e-5)


# McNeil & Frey (2000), Table 3: u = 1.215, xi = .224, beta = .568, a tenth of the sample above u; printed to two
# decimals. Second value: the same formula computed independently.
@pytest.mark.parametrize(
    ("q", "printed", "ratio"), [(0.95, 1.52, 1.520991), (0.99, 1.42, 1.418932), (0.995, 1.39, 1.393400)]
)
def test_ratios_of_es_to_var_of_table_3(q, printed, ratio):
    var, es = gpd.quantile_and_shortfall(1.215, 0.224, 0.568, (1 - q) / 0.1)
    assert es / var == pytest.approx(printed, abs=0.005)
    assert es / var == pytest.approx(ratio, abs=1e-6)


@pytest.mark.parametrize(
    ("xi", "q", "var", "es"),
    [
        (0.25, 0.975, 6.05946744, 9.41262325), (0.25, 0.99, 8.64911064, 12.86548085),
        (0.0, 0.975, 3.68887945, 4.68887945), (-0.25, 0.975, 2.40945854, 2.72756683),
    ],
)  # fmt: skip
def test_quantile_and_shortfall_of_the_unit_law(xi, q, var, es):
    assert gpd.quantile_and_shortfall(0.0, xi, 1.0, 1 - q) == pytest.approx((var, es), abs=1e-8)


def test_quantile_is_continuous_where_the_shape_vanishes():
    at, near = (gpd.quantile_and_shortfall(0.0, xi, 1.0, 0.02) for xi in (0.0, 2e-8))
    assert near == pytest.approx(at, rel=1e-6)


def test_shortfall_is_infinite_from_shape_one():
    assert gpd.quantile_and_shortfall(0.0, 1.0, 1.0, 0.02)[1] == np.inf


def test_the_likelihood_is_never_below_scipy():
    rng = np.random.default_rng(1)
    compared = 0
    for _ in range(60):
        y = genpareto.rvs(rng.uniform(-0.3, 0.8), size=rng.integers(30, 200), random_state=rng)
        xi, beta, _ = gpd.fit_ml(y, np.nan)
        shape, _, scale = genpareto.fit(y, floc=0)
        if not np.isnan(xi):
            compared += 1
            ours, theirs = (genpareto.logpdf(y, a, 0, b).sum() for a, b in ((xi, beta), (shape, scale)))
            assert ours >= theirs - 1e-7
    assert compared >= 50


def test_no_regular_maximum_gives_nan_not_a_number_from_nowhere():
    assert np.isnan(gpd.fit_ml(np.array([1.0, 2.0, 3.0]), np.nan)[0])


@given(st.integers(0, 10_000), st.sampled_from([1e-6, 0.01, 3.0, 1e9]))
@settings(max_examples=40, deadline=None)
def test_scale_changes_beta_and_nothing_else(seed, c):
    y = np.random.default_rng(seed).standard_exponential(100) ** 1.2
    xi, beta, _ = gpd.fit_ml(y, np.nan)
    again, scaled, _ = gpd.fit_ml(c * y, np.nan)
    assert again == pytest.approx(xi, abs=1e-9)
    assert scaled == pytest.approx(c * beta, rel=1e-9)


@given(st.integers(0, 10_000))
@settings(max_examples=40, deadline=None)
def test_a_warm_guess_ends_where_a_cold_start_ends(seed):
    rng = np.random.default_rng(seed)
    y = rng.standard_exponential(100) * (1 + rng.random())
    cold = gpd.fit_ml(y, np.nan)
    warm = gpd.fit_ml(y, rng.uniform(-0.5, 2.0))
    assert warm == pytest.approx(cold, rel=1e-8, abs=1e-9, nan_ok=True)


def roll(samples: np.ndarray, k: int = 100, by: int = gpd.BY_ML):
    return gpd.roll_gpd(samples, np.array([0.975, 0.99]), k, np.arange(len(samples)), 32, by)


def test_ties_at_the_threshold_are_dropped_from_the_excesses():
    sample = np.concatenate([np.zeros(850), np.full(100, 1.0), np.linspace(1.5, 4.0, 50)])
    threshold, y = excesses(sample, 100, np.nan)
    assert threshold == 1.0
    assert y.size == 50
    assert y.min() > 0


def test_too_few_strict_excesses_are_refused_with_a_status():
    sample = np.concatenate([np.zeros(990), np.full(10, 1.0)])[None, :]
    quantile, _, _, status = roll(sample)
    assert status[0] == gpd.REFUSED
    assert np.isnan(quantile).all()


def test_a_law_without_regular_likelihood_falls_to_zhang_stephens_with_a_status():
    uniform = np.random.default_rng(5).random((1, 1000)) ** 0.05
    quantile, shortfall, tail, status = roll(uniform)
    assert status[0] & gpd.ZHANG_STEPHENS
    assert np.isfinite(quantile).all()
    assert (shortfall >= quantile).all()
    assert tail[0, 0] < 0


def test_the_pit_above_the_threshold_inverts_the_quantile():
    sample = np.random.default_rng(2).standard_t(4, (1, 1000))
    quantile, _, tail, _ = roll(sample)
    for j, q in enumerate((0.975, 0.99)):
        assert gpd.pit_rows(sample, tail, quantile[:, j])[0] == pytest.approx(q, abs=1e-12)


@given(st.integers(0, 10_000), st.floats(-3, 3), st.booleans())
@settings(max_examples=60, deadline=None)
def test_a_guess_of_the_threshold_changes_nothing(seed, bound, rounded):
    sample = np.random.default_rng(seed).standard_t(4, 500)
    sample = np.round(sample, 1) if rounded else sample
    threshold, y = excesses(sample, 50, bound)
    assert threshold == np.sort(sample)[-51]
    np.testing.assert_array_equal(y, sample[sample > threshold] - threshold)


@pytest.mark.parametrize("by", [gpd.BY_ML, gpd.BY_ZHANG_STEPHENS, gpd.BY_PWM])
def test_rolling_gives_each_row_what_it_gets_alone(by):
    x = bmw().to_numpy()[2000:2700]
    samples = np.ascontiguousarray(np.lib.stride_tricks.sliding_window_view(x, 500)[::3])
    together = roll(samples, 50, by)
    for i, row in enumerate(samples):
        alone = roll(row[None, :], 50, by)
        np.testing.assert_allclose(together[0][i], alone[0][0], rtol=1e-10)
        np.testing.assert_allclose(together[1][i], alone[1][0], rtol=1e-10)


@given(st.integers(0, 10_000), st.sampled_from([1e-4, 5e-3, 0.019, 0.021, 0.3]), st.booleans())
@settings(max_examples=60, deadline=None)
def test_products_keep_the_digits_of_the_logarithm(seed, size, below):
    y = np.random.default_rng(seed).standard_exponential(100) / 3
    theta = -size if below else size
    assume(theta * y.max() > -1.0)  # beyond it there is no such law
    moments = float(y.mean()), float((y**2).mean()), float((y**3).mean())
    mean = np.log1p(theta * y).mean()
    assert gpd.mean_log(y, theta) == pytest.approx(mean, rel=1e-13)
    assert gpd.slope(y, theta, moments)[2] == pytest.approx(mean, rel=1e-13)
