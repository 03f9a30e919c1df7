import numpy as np
import pytest
from scipy.integrate import quad
from scipy.stats import norm

from backtest.forecasting.age_weights import age_weights, weighted_rank
from backtest.forecasting.filters import Filtered
from backtest.forecasting.models import resolve
from backtest.forecasting.tail_laws import law_pit, read_laws
from backtest.forecasting.tails import apply_tail
from backtest.kernels.order import empirical_rows, rank_rows, weighted_rows
from tests.reference.datasets import sp500
from tests.reference.student_plain import standard_law, two_piece

LEVELS = np.array([0.975, 0.99])
NORMAL = np.array([0.0, 1.0, np.inf, 0.0])


# Closed forms of the unit-variance laws, computed independently and checked by quadrature. lambda is that of the loss:
# it was stated for the lower tail of returns, whose lambda is its negative (arch's partial moment at nu 5, lambda -.1).
@pytest.mark.parametrize(
    ("law", "var", "es"),
    [
        (NORMAL, (1.9599639845, 2.3263478740), (2.3378027922, 2.6652142203)),
        (standard_law(3, 0), (1.83738623, 2.62157602), (2.90960464, 4.04323130)),
        (standard_law(4, 0), (1.96324316, 2.64949191), (2.82387125, 3.69151049)),
        (standard_law(5, 0), (1.99116413, 2.60646357), (2.72780207, 3.44883676)),
        (standard_law(8, 0), (1.99705816, 2.50840746), (2.57201459, 3.10980202)),
        (standard_law(5, -0.1), (1.87100911, 2.41588053), (2.52212445, 3.15853735)),
        (standard_law(8, 0.2), (2.18320837, 2.79148452), (2.86903905, 3.51210643)),
        (standard_law(5, 0.1), (2.10169713, 2.78335318), (2.91907608, 3.72011883)),
    ],
)
def test_closed_forms_come_out(law, var, es):
    quantile, shortfall = read_laws(law[None, :], LEVELS)
    np.testing.assert_allclose(quantile[0], var, atol=1e-8)
    np.testing.assert_allclose(shortfall[0], es, atol=1e-8)


def test_at_one_fortieth_the_standardised_t3_lies_below_the_normal_and_its_shortfall_above():
    quantile, shortfall = read_laws(np.array([standard_law(3, 0), NORMAL]), np.array([0.975]))
    assert quantile[0, 0] < quantile[1, 0]
    assert shortfall[0, 0] > shortfall[1, 0]


@pytest.mark.parametrize("skew", [-0.97, -0.3, 0.0, 0.5, 0.97])
@pytest.mark.parametrize("nu", [2.05, 4.0, 500.0])
@pytest.mark.parametrize("level", [0.3, 0.6, 0.975, 0.999])
def test_the_shortfall_is_the_mean_beyond_the_quantile_by_quadrature(nu, skew, level):
    law = np.array([0.4, 1.7, nu, skew])
    quantile, shortfall = read_laws(law[None, :], np.array([level]))
    start = quantile[0, 0]

    def integrand(s: float, power: int) -> float:  # x = start + s/(1 - s)
        x = start + s / (1 - s)
        return x**power * float(np.exp(two_piece(np.float64(x), *law))) / (1 - s) ** 2

    turn = (law[0] - start) / (1 + law[0] - start) if start < law[0] else 0.5
    mass, mean = (quad(integrand, 0, 1, args=(p,), points=[turn], limit=400, epsabs=1e-11)[0] for p in (0, 1))
    assert mass == pytest.approx(1 - level, rel=1e-7)
    # At nu = 2.05 the quadrature itself is good to 1e-5 only: x f(x) falls like x^-2.05.
    assert shortfall[0, 0] == pytest.approx(mean / mass, rel=1e-4 if nu < 3 else 1e-7)


@pytest.mark.parametrize("law", [NORMAL, standard_law(4, 0), standard_law(5, -0.6), np.array([0.3, 2.0, 3.0, 0.9])])
def test_the_pit_inverts_the_quantile(law):
    levels = np.array([0.001, 0.2, 0.5, 0.9, 0.999])
    quantile, _ = read_laws(law[None, :], levels)
    np.testing.assert_allclose(law_pit(np.tile(law, (5, 1)), quantile[0]), levels, rtol=1e-10)


def test_the_pit_of_an_unknown_loss_is_unknown_and_of_an_infinite_one_certain():
    found = law_pit(np.tile(standard_law(4, 0.1), (3, 1)), np.array([np.nan, np.inf, -np.inf]))
    assert np.isnan(found[0])
    assert found[1:].tolist() == [1.0, 0.0]


def test_age_weights_sum_to_one_and_are_heaviest_last():
    weights = age_weights(500, 0.99)
    assert weights.sum() == pytest.approx(1, abs=1e-14)
    np.testing.assert_allclose(weights[1:] / weights[:-1], 1 / 0.99)


def test_the_age_weighted_value_of_the_index():
    # Computed independently: last 500 percent losses of arch.data.sp500, decay 0.99, level 0.99.
    sample = sp500().to_numpy()[None, -500:]
    quantile, shortfall = weighted_rows(sample, age_weights(500, 0.99), np.array([0.99]))
    assert (quantile[0, 0], shortfall[0, 0]) == pytest.approx((3.290023, 3.468639), abs=1e-6)


def test_age_weights_worked_by_hand():
    # Weights 1/7, 2/7, 4/7 (decay 1/2) on 3, 1, 2. From below: 1 to 2/7, 2 to 6/7, 3 to 1.
    sample, weights = np.array([[3.0, 1.0, 2.0]]), age_weights(3, 0.5)
    quantile, shortfall = weighted_rows(sample, weights, np.array([0.5, 0.9]))
    assert quantile[0].tolist() == [2, 3]
    assert shortfall[0] == pytest.approx([((6 / 7 - 0.5) * 2 + 3 / 7) / 0.5, 3])
    assert weighted_rank(sample, weights, np.array([2.0]))[0] == pytest.approx((2 / 7 + 1 / 6) / (4 / 3))


@pytest.mark.parametrize("n", [200, 250, 1000])
@pytest.mark.parametrize("digits", [1, 12])
def test_equal_weights_give_the_empirical_tail(n, digits):
    samples = np.round(np.random.default_rng(n).standard_t(4, (20, n)), digits)
    equal = np.full(n, 1 / n)
    for ours, plain in zip(weighted_rows(samples, equal, LEVELS), empirical_rows(samples, LEVELS), strict=True):
        np.testing.assert_allclose(ours, plain, rtol=1e-12)
    values = samples[:, 0]
    np.testing.assert_allclose(weighted_rank(samples, equal, values), rank_rows(samples, values), rtol=1e-12)


@pytest.mark.parametrize("digits", [1, 12])
def test_rolling_gives_each_row_the_weighted_tail_it_gets_alone(digits):
    x = np.round(np.random.default_rng(9).standard_t(3, 700), digits)
    samples, weights = np.ascontiguousarray(np.lib.stride_tricks.sliding_window_view(x, 250)), age_weights(250, 0.98)
    together = weighted_rows(samples, weights, LEVELS)
    alone = [weighted_rows(row[None, :], weights, LEVELS) for row in samples]
    for i in (0, 1):
        np.testing.assert_array_equal(together[i], np.concatenate([a[i] for a in alone]))


@pytest.mark.parametrize("decay", [0.9, 0.97, 0.99, 0.999])
def test_the_weighted_rank_passes_the_level_only_beyond_the_quantile(decay):
    samples = np.random.default_rng(1).standard_t(4, (300, 250))
    weights, rows = age_weights(250, decay), np.arange(300)
    values = np.sort(samples, axis=1)[rows, -1 - rows % 12]
    quantile, _ = weighted_rows(samples, weights, LEVELS)
    rank = weighted_rank(samples, weights, values)
    for j, q in enumerate(LEVELS):
        assert (values > quantile[:, j])[rank > q].all()
        assert (rank > q).any()


def tail(name: str, law: str, shape: np.ndarray, residuals: np.ndarray):
    n = len(residuals)
    filtered = Filtered(np.zeros(n), np.ones(n), residuals, np.full(n, ""), {}, law, shape)
    spec = resolve({"name": "m", "tail": name}, levels=LEVELS).tail
    return apply_tail(filtered, spec, LEVELS, np.arange(n))


RESIDUALS = np.random.default_rng(2).standard_t(5, (3, 400)) * np.sqrt(3 / 5)
OWN = np.array([[7.0, -0.2], [9.0, 0.3], [np.nan, np.nan]])


@pytest.mark.parametrize("name", ["t", "skew-t"])
def test_a_tail_takes_the_filters_own_shape_where_its_innovations_are_that_law(name):
    made = tail(name, name, OWN, RESIDUALS)
    for row in (0, 1):
        nu, skew = OWN[row]
        expected, _ = read_laws(standard_law(nu, skew if name == "skew-t" else 0.0)[None, :], LEVELS)
        np.testing.assert_allclose(made.quantile[row], expected[0], rtol=1e-12)


@pytest.mark.parametrize("name", ["t", "skew-t"])
def test_a_row_without_a_shape_and_a_filter_of_another_law_are_fitted(name):
    own, other = tail(name, name, OWN, RESIDUALS), tail(name, "normal", np.empty((0, 2)), RESIDUALS)
    np.testing.assert_allclose(own.quantile[2], other.quantile[2], rtol=1e-9)
    assert (own.quantile[:2] != other.quantile[:2]).all()


@pytest.mark.parametrize("name", ["normal", "t", "skew-t"])
def test_behind_no_filter_location_and_scale_are_fitted_too(name):
    plain, moved = (tail(name, "", np.empty((0, 2)), x) for x in (RESIDUALS, 100 + 7 * RESIDUALS))
    np.testing.assert_allclose(moved.quantile, 100 + 7 * plain.quantile, rtol=1e-9)
    np.testing.assert_allclose(moved.shortfall, 100 + 7 * plain.shortfall, rtol=1e-9)
    standard = tail(name, "normal", np.empty((0, 2)), RESIDUALS)
    assert (np.abs(standard.quantile - plain.quantile) > 1e-6).all()


def test_the_fitted_laws_find_the_true_quantile():
    rng = np.random.default_rng(3)
    size = np.abs(rng.standard_t(5, 100_000))
    x = np.where(rng.random(100_000) < 0.65, 1.3, -0.7) * size  # lambda 0.3: mass 0.65 above the mode
    law = np.array([0.0, 1.0, 5.0, 0.3])
    truth = read_laws(law[None, :], LEVELS)
    made = tail("skew-t", "", np.empty((0, 2)), x[None, :])
    np.testing.assert_allclose(made.quantile, truth[0], rtol=0.02)
    np.testing.assert_allclose(made.shortfall, truth[1], rtol=0.03)
    symmetric = tail("t", "", np.empty((0, 2)), x[None, :])
    assert (symmetric.quantile < 0.95 * truth[0]).all()


def test_the_normal_tail_behind_no_filter_is_that_of_mean_and_deviation():
    made = tail("normal", "", np.empty((0, 2)), RESIDUALS)
    expected = norm.ppf(LEVELS) * RESIDUALS.std(axis=1)[:, None] + RESIDUALS.mean(axis=1)[:, None]
    np.testing.assert_allclose(made.quantile, expected, rtol=1e-12)
