import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import minimize

from backtest.kernels.quadratic import MATRIX, RIGHT, cholesky_solve, new_sheet, solve

A = np.array([[-1.0, 0, 0, 0], [0, -1.0, 0, 0], [0, 0, -1.0, 0], [0, 1.0, 1.0, 0]])


@given(st.integers(0, 100_000))
@settings(max_examples=60, deadline=None)
def test_the_step_is_the_optimum_of_the_programme(seed):
    rng = np.random.default_rng(seed)
    root = rng.normal(size=(4, 6))
    Q, g = root @ root.T + 0.1 * np.eye(4), rng.normal(size=4)
    slack = np.where(rng.random(4) < 0.4, 0.0, rng.random(4))
    d, damped = solve(Q, g, A, slack)
    assert not damped
    assert (A @ d <= slack + 1e-9).all()
    found = minimize(
        lambda v: 0.5 * v @ Q @ v - g @ v, np.zeros(4), jac=lambda v: Q @ v - g, method="SLSQP",
        constraints={"type": "ineq", "fun": lambda v: slack - A @ v, "jac": lambda v: -A}, options={"ftol": 1e-14},
    )  # fmt: skip
    assert g @ d - 0.5 * d @ Q @ d >= -found.fun - 1e-8


def test_negative_curvature_is_damped_and_still_goes_uphill():
    d, damped = solve(np.diag([-1.0, 1, 1, 1]), np.array([1.0, 0, 0, 0]), A, np.full(4, 0.5))
    assert damped
    assert d[0] > 0


def test_curvature_is_asked_only_where_the_constraints_leave_room():
    # The negative curvature lies along the first axis, which an active bound holds.
    Q, g = np.diag([-1.0, 1, 1, 1]), np.array([-1.0, 0.1, 0.1, 0.1])
    d, damped = solve(Q, g, A, np.array([0.0, 0.5, 0.5, 0.5]))
    assert not damped
    assert d == pytest.approx([0, 0.1, 0.1, 0.1])


def test_of_two_constraints_that_hold_the_one_that_pulls_inwards_is_released():
    # d_2 >= 0 and d_1 + d_2 <= 0 hold at the start; the answer is g with (-0.4, 1.0) projected on d_1 + d_2 = 0.
    g = np.array([0.3, -0.4, 1.0, 0.5])
    d, damped = solve(np.eye(4), g, A, np.array([1.0, 1.0, 0.0, 0.0]))
    assert not damped
    assert d == pytest.approx([0.3, -0.7, 0.7, 0.5])


def test_an_indefinite_matrix_is_not_solved():
    sheet = new_sheet()
    sheet[MATRIX : MATRIX + 2, :2], sheet[RIGHT, :2] = [[1.0, 2.0], [2.0, 1.0]], 1.0
    assert not cholesky_solve(sheet, 2)


def test_a_definite_system_is_solved_in_place():
    sheet = new_sheet()
    matrix = np.array([[4.0, 2.0, 0.4], [2.0, 3.0, 0.5], [0.4, 0.5, 1.0]])
    sheet[MATRIX : MATRIX + 3, :3], sheet[RIGHT, :3] = matrix, [1.0, 2.0, 3.0]
    assert cholesky_solve(sheet, 3)
    np.testing.assert_allclose(matrix @ sheet[RIGHT, :3], [1.0, 2.0, 3.0])
