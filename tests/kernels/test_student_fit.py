import numpy as np
import pytest
from scipy.optimize import minimize
from scipy.stats import t as student

from backtest.kernels import student_fit
from tests.reference.datasets import sp500
from tests.reference.student_plain import hansen, standard_law, two_piece

LOW, HIGH = 1 / 500, 1 / 2.05
NONE = np.full((1, 2), np.nan)


def fit(sample: np.ndarray, standard: bool, skewed: bool) -> tuple[np.ndarray, int]:
    laws, status = student_fit.roll_student(sample[None, :], NONE, standard, skewed, np.zeros(1, np.int64), 32)
    return laws[0], int(status[0])


def loglik(sample: np.ndarray, law: np.ndarray) -> float:
    return float(two_piece(sample, *law).sum())


def two_piece_sample(rng: np.random.Generator, nu: float, skew: float, n: int) -> np.ndarray:
    size = np.abs(rng.standard_t(nu, n))
    return np.where(rng.random(n) < 0.5 * (1 + skew), (1 + skew) * size, -(1 - skew) * size)


def invented(rng: np.random.Generator) -> np.ndarray:
    n, nu = int(rng.integers(60, 600)), rng.uniform(2.1, 12) if rng.random() < 0.8 else 1e6
    return rng.normal() + rng.uniform(0.1, 10) * two_piece_sample(rng, nu, rng.uniform(-0.5, 0.5), n)


def seeds(count: int, fast: int = 5) -> list:
    return [seed if seed < fast else pytest.param(seed, marks=pytest.mark.slow) for seed in range(count)]


def best_of_scipy(loss, starts, bounds) -> float:
    options = {"xatol": 1e-9, "fatol": 1e-10, "maxiter": 4000, "maxfev": 4000}
    found = [minimize(loss, s, method="Nelder-Mead", bounds=bounds, options=options).fun for s in starts]
    return -min(found)


def test_hansens_law_is_the_two_piece_law_at_zero_mean_and_unit_variance():
    x = invented(np.random.default_rng(0))
    assert loglik(x, standard_law(5, 0.3)) == pytest.approx(hansen(x, 5, 0.3).sum(), rel=1e-12)
    assert loglik(x, standard_law(5, -0.3)) != pytest.approx(hansen(x, 5, 0.3).sum(), rel=1e-3)


@pytest.mark.parametrize("seed", seeds(60))
def test_t_with_location_and_scale_is_never_less_likely_than_scipys_fit(seed):
    x = invented(np.random.default_rng(seed))
    law, _ = fit(x, False, False)
    nu, location, scale = student.fit(x)
    ours = loglik(x, law)
    if 2.05 <= nu <= 500:
        assert ours >= student.logpdf(x, nu, location, scale).sum() - 1e-7
    z = (x - x.mean()) / x.std()
    bounded = best_of_scipy(
        lambda p: -student.logpdf(z, 1 / p[2], p[0], np.exp(p[1])).sum() if LOW <= p[2] <= HIGH else np.inf,
        [(0.0, 0.0, 0.1)], [(-3, 3), (-9, 3), (LOW, HIGH)],
    )  # fmt: skip
    assert ours >= bounded - x.size * np.log(x.std()) - 1e-7


@pytest.mark.parametrize("seed", seeds(60))
def test_skewed_t_with_location_and_scale_is_never_less_likely_than_a_simplex_search(seed):
    x = invented(np.random.default_rng(1000 + seed))
    z = (x - x.mean()) / x.std()
    law, status = fit(z, False, True)
    assert not status & (student_fit.AS_T | student_fit.AS_NORMAL)

    def loss(p):
        return -loglik(z, np.array([p[0], np.exp(p[1]), 1 / p[2], p[3]])) if LOW <= p[2] <= HIGH else np.inf

    bounds = [(-3, 3), (-9, 3), (LOW, HIGH), (-0.99, 0.99)]
    starts = [(0.0, -0.2, 0.15, 0.0), (0.2, -0.3, 0.3, -0.3), (-0.2, -0.3, 0.3, 0.3)]
    assert loglik(z, law) >= best_of_scipy(loss, starts, bounds) - 1e-7


@pytest.mark.parametrize("skewed", [False, True])
@pytest.mark.parametrize("seed", seeds(30))
def test_the_shape_of_a_standardised_law_is_never_less_likely_than_a_simplex_search(seed, skewed):
    x = invented(np.random.default_rng(2000 + seed))
    z = (x - x.mean()) / x.std()
    law, _ = fit(z, True, skewed)
    assert law == pytest.approx(standard_law(law[2], law[3]))

    def loss(p):
        return -hansen(z, 1 / p[0], p[1] if skewed else 0.0).sum() if LOW <= p[0] <= HIGH else np.inf

    starts = [(0.1, 0.0), (0.4, 0.2), (0.4, -0.2)]
    assert loglik(z, law) >= best_of_scipy(loss, starts, [(LOW, HIGH), (-0.99, 0.99)]) - 1e-7


def test_a_long_tail_of_losses_has_positive_lambda():
    law, _ = fit(two_piece_sample(np.random.default_rng(4), 6, 0.4, 2000), False, True)
    assert law[3] == pytest.approx(0.4, abs=0.05)


def rolled(samples: np.ndarray, standard: bool, skewed: bool) -> tuple[np.ndarray, np.ndarray]:
    given = np.full((len(samples), 2), np.nan)
    return student_fit.roll_student(samples, given, standard, skewed, np.arange(len(samples)), 32)


@pytest.mark.parametrize("skewed", [False, True])
@pytest.mark.parametrize("standard", [False, True])
def test_a_warm_fit_ends_where_a_cold_one_does(standard, skewed):
    x = sp500().to_numpy()[2000:2600]
    x = (x - x.mean()) / x.std()
    samples = np.ascontiguousarray(np.lib.stride_tricks.sliding_window_view(x, 400)[:64])
    warm, _ = rolled(samples, standard, skewed)
    cold = np.array([rolled(row[None, :], standard, skewed)[0][0] for row in samples])
    np.testing.assert_allclose(warm[:, [0, 1, 3]], cold[:, [0, 1, 3]], atol=1e-8)
    np.testing.assert_allclose(warm[:, 2], cold[:, 2], rtol=1e-7)


def test_a_given_shape_is_taken_over_and_a_missing_one_fitted():
    samples = np.random.default_rng(5).standard_t(5, (2, 300)) * np.sqrt(3 / 5)
    given = np.array([[6.0, -0.1], [np.nan, np.nan]])
    laws, status = student_fit.roll_student(samples, given, True, True, np.arange(2), 32)
    assert laws[0] == pytest.approx(standard_law(6, -0.1))
    assert laws[1] == pytest.approx(fit(samples[1], True, True)[0])
    assert status.tolist() == [0, 0]


HARD = {
    "constant": np.full(300, 4.2),
    "zeros": np.zeros(300),
    "two values": np.tile([-1.0, 1.0], 150),
    "two values unevenly": np.where(np.arange(300) % 10 == 0, 1.0, -1.0),
    "a third zeros": np.where(np.arange(300) % 3 == 0, 0.0, np.random.default_rng(6).standard_normal(300)),
    "nine in ten zeros": np.where(np.arange(300) % 10 == 0, np.random.default_rng(6).standard_normal(300), 0.0),
    "all zeros but one": np.where(np.arange(300) == 7, 1.0, 0.0),
    "one huge value": np.where(np.arange(300) == 7, 1e9, np.random.default_rng(6).standard_normal(300)),
    "nearly constant": 5 + 1e-12 * np.random.default_rng(6).standard_normal(300),
    "uniform": np.random.default_rng(6).random(300),
}


@pytest.mark.parametrize("skewed", [False, True])
@pytest.mark.parametrize("standard", [False, True])
@pytest.mark.parametrize("case", HARD)
def test_hard_samples_get_a_law_of_finite_numbers(case, standard, skewed):
    law, status = fit(HARD[case], standard, skewed)
    assert np.isfinite(law[[0, 1, 3]]).all()
    assert law[2] >= 2.05 - 1e-12
    assert law[1] >= 0
    assert np.isinf(law[2]) == bool(status & student_fit.AS_NORMAL)


@pytest.mark.parametrize("skewed", [False, True])
@pytest.mark.parametrize("case", ["constant", "nine in ten zeros", "all zeros but one"])
def test_a_sample_without_a_likely_scale_falls_to_the_normal_law_with_a_status(case, skewed):
    law, status = fit(HARD[case], False, skewed)
    assert status == student_fit.AS_NORMAL
    assert law[:2] == pytest.approx((HARD[case].mean(), HARD[case].std()), abs=1e-12)


def test_bounds_of_nu_are_said():
    assert fit(HARD["uniform"], False, False)[1] == student_fit.NU_CAP
    cauchy = np.random.default_rng(8).standard_cauchy(300)
    assert fit(cauchy, False, False)[1] == student_fit.NU_FLOOR
