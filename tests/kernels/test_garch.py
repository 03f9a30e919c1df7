import itertools

import numpy as np
import pytest

from backtest.kernels import garch, write_passes
from backtest.kernels import parameters as P
from backtest.kernels.likelihood import begin, evaluate
from backtest.kernels.terms import GRADIENT, HESSIAN, THETA, VALUE, aligned, new_pass
from tests.reference.datasets import bmw, dem2gbp
from tests.reference.garch_plain import log_likelihood

POINT = np.array([0.03, 0.07, 0.05, 0.06, 0.05, 0.83, 0.13, -0.11])
STARTS = {"fixed": P.SAMPLE_VARIANCE, "mean-square": P.MEAN_SQUARE, "unconditional": P.UNCONDITIONAL}
FAST = {("ar1", False, "normal"), ("ar1", True, "tails"), ("constant", True, "skew")}
"""Every mean, variance and law once; the other members, seconds of compilation each, are in the slow suite."""
MEMBERS = [
    pytest.param(member, id=" ".join(map(str, member)), marks=() if member in FAST else pytest.mark.slow)
    for member in itertools.product(("constant", "ar1"), (False, True), ("normal", "tails", "skew"))
]
DAYS, LANE = 200, 3


@pytest.fixture(scope="module")
def losses() -> np.ndarray:
    return np.random.default_rng(3).standard_t(5, (DAYS, 8))


def point(mean: str, gjr: bool, law: str) -> tuple[np.ndarray, np.ndarray]:
    """Return the parameters of a member and the indices it estimates."""
    shapes = {"normal": 0, "tails": 1, "skew": 2}[law]
    kind = P.AR1 if mean == "ar1" else P.CONSTANT_MEAN
    free = garch.member(kind, P.SAMPLE_VARIANCE, gjr=gjr, shapes=shapes).free
    theta = np.where(np.isin(np.arange(8), free), POINT, 0.0)
    theta[P.ETA] = POINT[P.ETA]
    return theta, free


def evaluated(losses, member, start, skip=0):
    mean, gjr, law = member
    theta, free = point(*member)
    x = aligned(DAYS, 8)
    x[:] = losses
    work, moments = new_pass(), np.empty((8, 6))
    flags = [True if f else None for f in (mean == "ar1", gjr, law != "normal", law == "skew")]
    work[THETA : THETA + 8] = theta[:, None]
    for lane in range(8):
        column = losses[:, lane]
        lag, y = np.concatenate([[0.0], column[:-1]])[skip:], column[skip:]
        moments[lane] = y.size, y.sum(), lag.sum(), y @ y, lag @ lag, y @ lag
        begin(work, lane, STARTS[start], 1.3, moments, *flags[2:])
    evaluate(work, x, skip, *flags)
    upper = np.triu(work[HESSIAN : HESSIAN + 64, LANE].reshape(8, 8))
    hessian = upper + np.triu(upper, 1).T
    return work[VALUE, LANE], work[GRADIENT + free, LANE], hessian[np.ix_(free, free)], theta, free


def exact_gradient(theta, free, losses, start, skip, law):
    steps = 1e-30j * np.eye(8)[free]
    return np.array([log_likelihood(theta + d, losses, start, 1.3, skip, law).imag / 1e-30 for d in steps])


@pytest.mark.parametrize("start", STARTS)
@pytest.mark.parametrize("member", MEMBERS)
def test_value_and_gradient_are_those_of_the_plain_loop(losses, member, start):
    value, gradient, _, theta, free = evaluated(losses, member, start)
    x = losses[:, LANE]
    assert value == pytest.approx(log_likelihood(theta, x, start, 1.3, 0, member[2]), rel=1e-12)
    # shapes: constants of the law are differenced in the kernel, good to about 1e-6 of the gradient's size
    tolerance = 1e-9 if member[2] == "normal" else 2e-5
    np.testing.assert_allclose(gradient, exact_gradient(theta, free, x, start, 0, member[2]), rtol=tolerance, atol=2e-4)


@pytest.mark.parametrize("start", STARTS)
@pytest.mark.parametrize("member", MEMBERS)
def test_the_hessian_is_the_derivative_of_the_gradient(losses, member, start):
    _, _, hessian, theta, free = evaluated(losses, member, start)
    step = 1e-6
    near = []
    for d in step * np.eye(8)[free]:
        up, down = (exact_gradient(theta + s * d, free, losses[:, LANE], start, 0, member[2]) for s in (1, -1))
        near.append((up - down) / (2 * step))
    np.testing.assert_allclose(hessian, near, rtol=2e-4, atol=2e-3 * np.abs(hessian).max() ** 0.5)


@pytest.mark.parametrize("member", [("ar1", False, "normal"), ("ar1", True, "tails")], ids=str)
def test_a_first_day_that_only_conditions_is_left_out(losses, member):
    value, gradient, _, theta, free = evaluated(losses, member, "fixed", skip=1)
    x = losses[:, LANE]
    assert value == pytest.approx(log_likelihood(theta, x, "fixed", 1.3, 1, member[2]), rel=1e-12)
    np.testing.assert_allclose(gradient, exact_gradient(theta, free, x, "fixed", 1, member[2]), rtol=2e-5, atol=2e-4)


def test_the_written_passes_are_those_their_writer_writes():
    from pathlib import Path

    assert Path(write_passes.__file__).with_name("passes.py").read_text() == write_passes.text()


def fit(x: np.ndarray, mean: int, start: int, **options) -> garch.Rolled:
    return garch.roll(
        np.ascontiguousarray(x[None, :]), np.zeros(1, np.int64), np.ones(1, bool), garch.member(mean, start, **options)
    )


# Benchmark of Fiorentini, Calzolari & Panattoni (1996, J. Applied Econometrics 11:399-417) as printed in the TSP files
# bgfcp and bg11, data of Bollerslev & Ghysels (1996): mu, omega, alpha, beta, log-likelihood.
FCP = ([-0.006190408379994, 0.0107613978518, 0.153134061820, 0.805973670305], -1106.607881041288)
INDICES = [P.C, P.OMEGA, P.ALPHA, P.BETA]


def test_the_dem_gbp_benchmark_is_met():
    found = fit(dem2gbp(), P.CONSTANT_MEAN, P.MEAN_SQUARE)
    assert found.status[0] == 0
    np.testing.assert_allclose(found.parameters[0, INDICES], FCP[0], rtol=1e-6)
    assert found.loglik[0] == pytest.approx(FCP[1], abs=1e-6)


@pytest.mark.parametrize(
    ("start", "published", "digits"),
    [
        # Same source, columns MLNEWT1 (start at the sample variance) and MLNEWT3 (start at omega / (1 - alpha - beta)).
        (P.SAMPLE_VARIANCE, ([-0.00617319, 0.010761, 0.153132, 0.805977], -1106.60665), 5e-5),
        (P.UNCONDITIONAL, ([-0.00626932, 0.010983, 0.148700, 0.805809], -1106.94851), 5e-5),
    ],
)
def test_the_benchmark_with_other_start_ups_is_met(start, published, digits):
    found = fit(dem2gbp(), P.CONSTANT_MEAN, start)
    np.testing.assert_allclose(found.parameters[0, INDICES], published[0], rtol=digits)
    assert found.loglik[0] == pytest.approx(published[1], abs=1e-5)


# Windows of 1000 BMW percent losses before day t, computed once with an independent optimiser (L-BFGS-B on a plain
# likelihood, three starts): c, phi, omega, alpha, beta, log-likelihood, next mean, next sigma. Tolerances as computed:
# likelihood 1e-4, parameters 1e-3 relative. A: no intercept; B: with intercept; start sample-variance.
PINNED = [
    ("A", 1000, [0, 0.117821, 0.0021538, 0.017360, 0.981159], -1900.05048, -0.028291, 1.081677),
    ("A", 6145, [0, 0.107963, 0.1057780, 0.048176, 0.875354], -1579.18926, 0.044679, 1.052496),
    ("B", 3500, [-0.084354, 0.073628, 0.0721966, 0.087294, 0.882144], -1742.01003, -0.045934, 1.289062),
    ("B", 6145, [-0.045376, 0.106032, 0.1078239, 0.049074, 0.872905], -1578.42157, -0.001496, 1.056988),
]


@pytest.mark.parametrize(("variant", "t", "theta", "value", "mean", "sigma"), PINNED)
def test_pinned_windows_come_out(variant, t, theta, value, mean, sigma):
    kind = P.AR1_NO_INTERCEPT if variant == "A" else P.AR1
    found = fit(bmw().to_numpy()[t - 1000 : t], kind, P.SAMPLE_VARIANCE)
    fitted = found.parameters[0, [P.C, P.PHI, P.OMEGA, P.ALPHA, P.BETA]]
    np.testing.assert_allclose(fitted, theta, rtol=1e-3, atol=1e-12)
    assert found.loglik[0] == pytest.approx(value, abs=1e-4)
    assert found.mean[0] == pytest.approx(mean, abs=2e-5)
    assert found.sigma[0] == pytest.approx(sigma, rel=1e-4)


def test_residuals_and_the_next_day_follow_the_recursion():
    x = bmw().to_numpy()[:500]
    found = fit(x, P.AR1, P.MEAN_SQUARE, gjr=True)
    c, phi, omega, alpha, gamma, beta = found.parameters[0, :6]
    e = x - c - phi * np.concatenate([[0.0], x[:-1]])
    h = omega + (alpha + gamma / 2 + beta) * np.mean(e * e)
    expected = []
    for value in e:
        expected.append(value / np.sqrt(h))
        h = omega + (alpha + gamma * (value > 0)) * value**2 + beta * h
    np.testing.assert_allclose(found.residuals[0], expected, rtol=1e-10)
    assert found.sigma[0] == pytest.approx(np.sqrt(h), rel=1e-10)
    assert found.mean[0] == pytest.approx(c + phi * x[-1], rel=1e-10)


# Full sample of the S&P 500 in arch.data (5030 percent log returns), constant mean, computed with arch 8.0:
# GARCH-normal, GARCH-t (nu 6.509), GJR-skewed t (nu 8.124, lambda -.1278 of returns). Start ewma-75 is arch's own.
FULL_SAMPLE = [(False, 0, -6941.53908), (False, 1, -6834.47920), (True, 2, -6725.85923)]


@pytest.mark.parametrize(("gjr", "shapes", "value"), FULL_SAMPLE)
def test_full_sample_likelihoods_of_the_family(gjr, shapes, value):
    from tests.reference.datasets import sp500

    found = fit(sp500().to_numpy(), P.CONSTANT_MEAN, P.EWMA_75, gjr=gjr, shapes=shapes)
    assert found.loglik[0] == pytest.approx(value, abs=2e-3)
    assert found.loglik[0] > value - 1e-4
    if shapes == 2:
        assert 1 / found.parameters[0, P.ETA] == pytest.approx(8.124, abs=0.02)
        assert found.parameters[0, P.LAMBDA] == pytest.approx(0.1278, abs=0.001)  # of losses


def test_the_uncertainty_of_the_next_sigma_is_what_simulated_fits_show():
    """Oracle: across samples of a known Gaussian process, sigma's error at the true path has this variance."""
    from tests.reference.datasets import garch_t

    ratios = []
    for seed in range(60):
        losses, sigma = garch_t(1001, seed, nu=60.0)
        found = fit_uncertain(losses[:1000])
        ratios.append((found.sigma[0] - sigma[1000]) ** 2 / found.uncertainty[0, 1])
    assert 0.5 < np.median(ratios) / 0.4549 < 2.0  # 0.4549: median of a chi-square with one degree of freedom


def fit_uncertain(x: np.ndarray) -> garch.Rolled:
    member = garch.member(P.CONSTANT_MEAN, P.SAMPLE_VARIANCE)
    return garch.roll(np.ascontiguousarray(x[None, :]), np.zeros(1, np.int64), np.ones(1, bool), member, uncertain=True)
