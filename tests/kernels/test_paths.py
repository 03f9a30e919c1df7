import numpy as np
import pytest

from backtest.kernels import paths

NONE = np.full((1, 3), np.nan)


def simulate(
    pool, motion, ahead=(0.0, 1.0), horizons=(1,), count=200_000, upper=NONE, lower=NONE, as_normal=False, key=7
):
    return paths.simulate_sums(
        np.asarray(pool, dtype=float)[None], upper, lower, as_normal, np.array([ahead], dtype=float),
        np.array([motion], dtype=float), np.array([key], dtype=np.uint64), np.array(horizons), count,
    )[0]  # fmt: skip


def test_the_generator_is_splitmix64():
    # Outputs for seed 1234567, as published with the reference implementation (Vigna; also Rosetta Code).
    published = [6457827717110365317, 3203168211198807973, 9817491932198370423, 4593380528125082431]
    state = np.uint64(1234567)
    with np.errstate(over="ignore"):
        for expected in published:
            state = state + paths._STEP
            assert paths.uniform(state) == ((expected >> 11) + 0.5) * 2.0**-53


def test_innovations_are_the_residuals_each_as_often():
    values, counts = np.unique(simulate([-2.0, 0.5, 1.0, 7.0], (0, 0, 1, 0, 0, 0)), return_counts=True)
    assert values.tolist() == [-2.0, 0.5, 1.0, 7.0]
    np.testing.assert_allclose(counts / counts.sum(), 0.25, atol=0.005)


def test_residuals_beyond_a_threshold_are_drawn_from_the_tails():
    pool = np.linspace(-1, 1, 201)
    found = simulate(pool, (0, 0, 1, 0, 0, 0), upper=np.array([[0.2, 0.5, 0.8]]), lower=np.array([[0.0, 0.3, 0.9]]))[0]
    excess, fall = found[found > 0.8] - 0.8, -0.9 - found[found < -0.9]
    assert excess.size / found.size == pytest.approx(20 / 201, abs=0.003)
    assert fall.size / found.size == pytest.approx(10 / 201, abs=0.003)
    assert excess.mean() == pytest.approx(0.5 / 0.8, rel=0.03)  # beta / (1 - xi)
    assert fall.mean() == pytest.approx(0.3, rel=0.03)
    assert np.isin(np.round(found[(found <= 0.8) & (found >= -0.9)], 9), np.round(pool, 9)).all()


def test_normal_innovations_are_standard_normal():
    z = simulate([0.0], (0, 0, 1, 0, 0, 0), as_normal=True)[0]
    assert z.mean() == pytest.approx(0, abs=0.01)
    assert z.std() == pytest.approx(1, abs=0.01)
    assert (z > 1.959964).mean() == pytest.approx(0.025, abs=0.0015)


@pytest.mark.parametrize(("gamma", "alpha"), [(0.0, 0.1), (0.1, 0.05)])
def test_the_variance_of_the_sum_is_that_of_the_recursion(gamma, alpha):
    omega, beta, h, total = 0.05, 0.85, 2.0, 0.0
    for _ in range(10):
        total += h
        h = omega + (alpha + gamma / 2 + beta) * h
    found = simulate([0.0], (0, 0, omega, alpha, gamma, beta), (0.0, np.sqrt(2)), (1, 10), as_normal=True)
    assert found[0].var() == pytest.approx(2.0, rel=0.02)
    assert found[1].var() == pytest.approx(total, rel=0.02)


def test_a_reaction_to_losses_alone_skews_the_sum_to_losses():
    up = simulate([0.0], (0, 0, 0.05, 0.0, 0.3, 0.8), horizons=(10,), as_normal=True)[0]
    assert (up**3).mean() > 5 * abs(
        (simulate([0.0], (0, 0, 0.05, 0.15, 0, 0.8), horizons=(10,), as_normal=True)[0] ** 3).mean()
    )


def test_the_mean_follows_the_last_loss():
    # Sum of three days of x_t = 1 + 0.5 x_{t-1} + e_t from a first mean of 4: 4 + 3 + 2.5; weights of e: 1.75, 1.5, 1.
    found = simulate([0.0], (1.0, 0.5, 1.0, 0, 0, 0), (4.0, 1.0), (3,), as_normal=True)[0]
    assert found.mean() == pytest.approx(9.5, abs=0.02)
    assert found.var() == pytest.approx(1.75**2 + 1.5**2 + 1, rel=0.02)


def test_a_past_rebuilt_from_its_residuals_in_order_is_the_past():
    c, phi, omega, alpha, gamma, beta = motion = (0.1, 0.2, 0.05, 0.05, 0.1, 0.8)
    rng = np.random.default_rng(1)
    z, x, h, last = rng.standard_normal(50), [], omega + (alpha + gamma / 2 + beta) * 1.3, 0.0
    for value in z:
        e = np.sqrt(h) * value
        last = c + phi * last + e
        x.append(last)
        h = omega + (alpha + gamma * (e > 0)) * e * e + beta * h
    out = np.empty((1, 50))
    paths.rebuild(z, np.arange(50)[None], np.array(motion), 1.3, out)
    np.testing.assert_allclose(out[0], x, rtol=1e-12)
