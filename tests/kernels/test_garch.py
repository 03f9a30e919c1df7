import numpy as np
import pytest

from backtest.kernels import garch, past, rolling
from tests.reference.datasets import bmw, dem2gbp
from tests.reference.garch_plain import log_likelihood

THETA = np.array([0.03, 0.07, 0.05, 0.09, 0.85])
STARTS = {"fixed": garch.SAMPLE_VARIANCE, "mean-square": garch.MEAN_SQUARE, "unconditional": garch.UNCONDITIONAL}


def prepared(x: np.ndarray, mean: int, start: int, skip: int = 0) -> past.Past:
    made = past.new_past(x.size)
    assert past.prepare(made, x, mean, start, skip)
    made.x[:] = x  # undo the scaling: derivatives are compared in the units of x
    made.numbers[1] = 1.3
    lag = np.concatenate([[0.0], x[:-1]])[skip:]
    y = x[skip:]
    made.moments[:] = [y.size, y.sum(), lag.sum(), y @ y, lag @ lag, y @ lag]
    return made


def evaluated(x: np.ndarray, start: str, skip: int = 0) -> tuple[float, float, np.ndarray, np.ndarray]:
    p = prepared(x, past.AR1, STARTS[start], skip)
    gradient, hessian = np.empty(5), np.empty((5, 5))
    value, after = garch.evaluate(p.x, skip, THETA, STARTS[start], 1.3, p.moments, gradient, hessian)
    return value, after, gradient, hessian


@pytest.fixture
def losses() -> np.ndarray:
    return np.random.default_rng(3).standard_t(5, 300)


@pytest.mark.parametrize("skip", [0, 1])
@pytest.mark.parametrize("start", STARTS)
def test_the_likelihood_is_that_of_the_plain_loop(losses, start, skip):
    value, *_ = evaluated(losses, start, skip)
    assert value == pytest.approx(log_likelihood(THETA, losses, start, 1.3, skip), rel=1e-12)


@pytest.mark.parametrize("skip", [0, 1])
@pytest.mark.parametrize("start", STARTS)
def test_the_gradient_is_exact(losses, start, skip):
    _, _, gradient, _ = evaluated(losses, start, skip)
    steps = 1e-30j * np.eye(5)
    exact = [log_likelihood(THETA + d, losses, start, 1.3, skip).imag / 1e-30 for d in steps]
    np.testing.assert_allclose(gradient, exact, rtol=1e-9)


@pytest.mark.parametrize("skip", [0, 1])
@pytest.mark.parametrize("start", STARTS)
def test_the_hessian_is_the_derivative_of_the_gradient(losses, start, skip):
    _, _, _, hessian = evaluated(losses, start, skip)

    def gradient(theta):
        return np.array([log_likelihood(theta + d, losses, start, 1.3, skip).imag / 1e-30 for d in 1e-30j * np.eye(5)])

    step = 1e-5
    near = np.array([(gradient(THETA + d) - gradient(THETA - d)) / (2 * step) for d in step * np.eye(5)])
    np.testing.assert_allclose(hessian, near, rtol=2e-5, atol=1e-3)


def test_the_filter_repeats_the_likelihood_and_the_next_variance_of_the_evaluation(losses):
    value, after, _, _ = evaluated(losses, "mean-square")
    p = prepared(losses, past.AR1, garch.MEAN_SQUARE)
    residuals = np.empty(losses.size)
    again, mean, variance = garch.filter_past(p.x, 0, THETA, garch.MEAN_SQUARE, 1.3, p.moments, residuals)
    assert again == pytest.approx(value, rel=1e-13)
    assert variance == pytest.approx(after, rel=1e-13)
    assert mean == pytest.approx(THETA[0] + THETA[1] * losses[-1])


def fit_whole(x: np.ndarray, start: int) -> tuple[np.ndarray, float]:
    parameters, numbers, status, _ = rolling.roll_garch(
        x[None, :], np.zeros(1, np.int64), np.ones(1, bool), np.array([0, 2, 3, 4]), past.CONSTANT_MEAN, start, False
    )
    assert status[0] == 0
    return parameters[0, [0, 2, 3, 4]], numbers[0, 0]


# Benchmark of Fiorentini, Calzolari & Panattoni (1996, J. Applied Econometrics 11:399-417) as printed in the TSP files
# bgfcp and bg11, data of Bollerslev & Ghysels (1996): mu, omega, alpha, beta, log-likelihood.
FCP = ([-0.006190408379994, 0.0107613978518, 0.153134061820, 0.805973670305], -1106.607881041288)


def test_the_dem_gbp_benchmark_is_met():
    parameters, value = fit_whole(dem2gbp(), garch.MEAN_SQUARE)
    np.testing.assert_allclose(parameters, FCP[0], rtol=1e-6)
    assert value == pytest.approx(FCP[1], abs=1e-6)


@pytest.mark.parametrize(
    ("start", "published", "digits"),
    [
        # Same source, columns MLNEWT1 (start at the sample variance) and MLNEWT3 (start at omega / (1 - alpha - beta)).
        (garch.SAMPLE_VARIANCE, ([-0.00617319, 0.010761, 0.153132, 0.805977], -1106.60665), 5e-5),
        (garch.UNCONDITIONAL, ([-0.00626932, 0.010983, 0.148700, 0.805809], -1106.94851), 5e-5),
    ],
)
def test_the_benchmark_with_other_start_ups_is_met(start, published, digits):
    parameters, value = fit_whole(dem2gbp(), start)
    np.testing.assert_allclose(parameters, published[0], rtol=digits)
    assert value == pytest.approx(published[1], abs=1e-5)


# Windows of 1000 BMW percent losses before day t, computed once with an independent optimiser (L-BFGS-B on a plain
# likelihood, three starts): c, phi, omega, alpha, beta, log-likelihood, next mean, next sigma. Tolerances as computed:
# likelihood 1e-4, parameters 1e-3 relative. A: no intercept, start mean square of the window; B: with intercept, start
# variance of the window.
PINNED = [
    ("A", 1000, [0, 0.117821, 0.0021538, 0.017360, 0.981159], -1900.05048, -0.028291, 1.081677),
    ("A", 6145, [0, 0.107963, 0.1057780, 0.048176, 0.875354], -1579.18926, 0.044679, 1.052496),
    ("B", 3500, [-0.084354, 0.073628, 0.0721966, 0.087294, 0.882144], -1742.01003, -0.045934, 1.289062),
    ("B", 6145, [-0.045376, 0.106032, 0.1078239, 0.049074, 0.872905], -1578.42157, -0.001496, 1.056988),
]


@pytest.mark.parametrize(("variant", "t", "theta", "value", "mean", "sigma"), PINNED)
def test_pinned_windows_come_out(variant, t, theta, value, mean, sigma):
    x = bmw().to_numpy()[t - 1000 : t]
    free = np.array([1, 2, 3, 4] if variant == "A" else [0, 1, 2, 3, 4])
    kind = past.AR1_NO_INTERCEPT if variant == "A" else past.AR1
    parameters, numbers, _, _ = rolling.roll_garch(
        x[None, :], np.zeros(1, np.int64), np.ones(1, bool), free, kind, garch.SAMPLE_VARIANCE, False
    )
    fitted = np.where(np.isin(np.arange(5), free), parameters[0], 0.0)
    np.testing.assert_allclose(fitted, theta, rtol=1e-3, atol=1e-12)
    assert numbers[0, 0] == pytest.approx(value, abs=1e-4)
    assert numbers[0, 1] == pytest.approx(mean, abs=2e-5)
    assert numbers[0, 2] == pytest.approx(sigma, rel=1e-4)
