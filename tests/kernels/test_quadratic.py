import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import minimize

from backtest.kernels.quadratic import cholesky_solve, constrained_step, null_basis

A = np.array([[-1.0, 0, 0, 0], [0, -1.0, 0, 0], [0, 0, -1.0, 0], [0, 1.0, 1.0, 0]])


@given(st.integers(0, 100_000))
@settings(max_examples=60, deadline=None)
def test_the_step_is_the_optimum_of_the_programme(seed):
    rng = np.random.default_rng(seed)
    root = rng.normal(size=(4, 6))
    Q, g = root @ root.T + 0.1 * np.eye(4), rng.normal(size=4)
    slack = np.where(rng.random(4) < 0.4, 0.0, rng.random(4))
    d, damped = constrained_step(Q, g, A, slack)
    assert not damped
    assert (A @ d <= slack + 1e-9).all()
    found = minimize(
        lambda v: 0.5 * v @ Q @ v - g @ v, np.zeros(4), jac=lambda v: Q @ v - g, method="SLSQP",
        constraints={"type": "ineq", "fun": lambda v: slack - A @ v, "jac": lambda v: -A}, options={"ftol": 1e-14},
    )  # fmt: skip
    assert g @ d - 0.5 * d @ Q @ d >= -found.fun - 1e-8


def test_negative_curvature_is_damped_and_still_goes_uphill():
    d, damped = constrained_step(np.diag([-1.0, 1, 1, 1]), np.array([1.0, 0, 0, 0]), A, np.full(4, 0.5))
    assert damped
    assert d[0] > 0


def test_curvature_is_asked_only_where_the_constraints_leave_room():
    # The negative curvature lies along the first axis, which an active bound holds.
    Q, g = np.diag([-1.0, 1, 1, 1]), np.array([-1.0, 0.1, 0.1, 0.1])
    d, damped = constrained_step(Q, g, A, np.array([0.0, 0.5, 0.5, 0.5]))
    assert not damped
    assert d == pytest.approx([0, 0.1, 0.1, 0.1])


def test_the_basis_keeps_active_rows_unchanged():
    active = np.array([False, False, True, True])
    Z = null_basis(A, active)
    assert Z.shape == (4, 2)
    np.testing.assert_allclose(A[active] @ Z, 0, atol=1e-14)


def test_an_indefinite_matrix_is_not_solved():
    assert not cholesky_solve(np.array([[1.0, 2.0], [2.0, 1.0]]), np.ones(2))
