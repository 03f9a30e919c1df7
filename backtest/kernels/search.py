"""The search for the best GARCH parameters of one past, written as a machine that is fed evaluations.

It asks for a point, receives value, gradient and Hessian there, and answers with the next point, until every start it
wants has been followed to its end. Newton steps inside the constraints omega >= floor, alpha >= 0, beta >= 0,
alpha + beta <= cap. It ends a start when the predicted gain is below TOLERANCE, taking that last step unevaluated.
"""

from typing import NamedTuple

import numpy as np

from backtest.kernels.compiled import compiled
from backtest.kernels.garch import ALPHA, BETA, OMEGA, PHI, C
from backtest.kernels.quadratic import constrained_step

BOUND_ALPHA, BOUND_PERSISTENCE, FLAT, SECOND_MODE, RESTARTED, NOT_CONVERGED, LAST_GOOD, AS_EWMA, CONSTANT = (
    1, 2, 4, 8, 16, 32, 64, 128, 256,
)  # fmt: skip
"""Bits of the status of a fit."""

TOLERANCE = 1e-8
MODE_GAP = 6.0
"""Two optima closer than this in log-likelihood are both reported."""
TIE = 1e-6

WARM, GRID, FIRST_EXTRA, STARTS = 0, 1, 2, 5
_GRID_POINTS = (
    (0.02, 0.60), (0.10, 0.80), (0.05, 0.90), (0.15, 0.95), (0.05, 0.97), (0.03, 0.985), (0.08, 0.99), (0.04, 0.999),
)  # fmt: skip
_EXTRA_POINTS = ((0.0, 0.98), (0.20, 0.85), (0.03, 0.985))
"""(alpha, alpha + beta) of the starts beside the warm one; the first seeks the optimum without reaction."""


class Search(NamedTuple):
    """Mutable state of one search; scalars live in arrays so that compiled code can change them."""

    theta: np.ndarray  # (5,) last accepted point of the current start
    trial: np.ndarray  # (5,) point to evaluate next
    direction: np.ndarray  # (5,)
    numbers: np.ndarray  # value at theta, step, slope, next variance at theta
    counts: np.ndarray  # start in hand, iterations, shrinks, has value, grid point + 1 (0: past it)
    modes: np.ndarray  # (STARTS, 8): value, next variance, theta, converged (0 not tried, 1, 2 flat, -1 failed)
    grid: np.ndarray  # best grid value, best grid index


@compiled
def new_search() -> Search:
    """Return the state of a search, to be reused from past to past."""
    return Search(
        np.empty(5), np.empty(5), np.empty(5), np.empty(4), np.empty(5, np.int64), np.zeros((STARTS, 8)), np.empty(2)
    )


@compiled
def place_point(
    search: Search, alpha: float, persistence: float, mean: np.ndarray, variance: float, cap: float
) -> None:
    """Set the trial point to (alpha, persistence) around ``mean`` (c, phi), omega aiming at ``variance``."""
    persistence = min(persistence, cap)
    trial = search.trial
    trial[C], trial[PHI] = mean[0], mean[1]
    trial[OMEGA], trial[ALPHA], trial[BETA] = variance * (1.0 - persistence), alpha, persistence - alpha


@compiled
def place_start(search: Search, number: int, mean: np.ndarray, variance: float, cap: float) -> None:
    """Make start ``number`` the start in hand and set its first trial point."""
    alpha, persistence = _EXTRA_POINTS[number - FIRST_EXTRA] if number >= FIRST_EXTRA else _GRID_POINTS[0]
    place_point(search, alpha, persistence, mean, variance, cap)
    search.counts[:] = 0
    search.counts[0] = number
    if number == GRID:
        search.counts[4] = 1
        search.grid[0], search.grid[1] = -np.inf, 0.0


@compiled
def look_around(search: Search, value: float, mean: np.ndarray, variance: float, cap: float) -> None:
    """Note the value of the grid point in hand and set the next one; after the last, the best."""
    at = search.counts[4] - 1
    if value > search.grid[0]:
        search.grid[0], search.grid[1] = value, at
    last = at + 1 == len(_GRID_POINTS)
    alpha, persistence = _GRID_POINTS[int(search.grid[1]) if last else at + 1]
    place_point(search, alpha, persistence, mean, variance, cap)
    search.counts[4] = 0 if last else at + 2


@compiled
def end_start(search: Search, converged: int) -> None:
    """Keep where the current start ended."""
    mode = search.modes[search.counts[0]]
    mode[0], mode[1], mode[7] = search.numbers[0], search.numbers[3], converged
    mode[2:7] = search.theta


@compiled
def newton_step(
    theta: np.ndarray,
    gradient: np.ndarray,
    hessian: np.ndarray,
    free: np.ndarray,
    floor: float,
    cap: float,
    direction: np.ndarray,
) -> tuple[float, float, bool, bool]:
    """Fill ``direction`` with the constrained step; return predicted gain, slope, whether capped, whether damped."""
    n = free.size
    Q, g, A, slack = np.empty((n, n)), np.empty(n), np.zeros((4, n)), np.empty(4)
    for a in range(n):
        g[a] = gradient[free[a]]
        for b in range(n):
            Q[a, b] = -hessian[free[a], free[b]]
        A[0, a] = -1.0 if free[a] == OMEGA else 0.0
        A[1, a] = -1.0 if free[a] == ALPHA else 0.0
        A[2, a] = -1.0 if free[a] == BETA else 0.0
        A[3, a] = 1.0 if free[a] >= ALPHA else 0.0
    slack[0], slack[1], slack[2] = theta[OMEGA] - floor, theta[ALPHA], theta[BETA]
    slack[3] = cap - theta[ALPHA] - theta[BETA]
    d, damped = constrained_step(Q, g, A, np.maximum(slack, 0.0))
    direction[:] = 0.0
    for a in range(n):
        direction[free[a]] = d[a]
    scale = 1.0
    for i in (ALPHA, BETA):
        if abs(direction[i]) > 0.3:
            scale = min(scale, 0.3 / abs(direction[i]))
    if -direction[OMEGA] > 0.95 * theta[OMEGA] and theta[OMEGA] > 2.0 * floor:
        scale = min(scale, 0.95 * theta[OMEGA] / -direction[OMEGA])
    slope, bend = 0.0, 0.0
    for a in range(n):
        slope += g[a] * d[a]
        for b in range(n):
            bend += Q[a, b] * d[a] * d[b]
    direction *= scale
    return scale * slope - 0.5 * scale * scale * bend, scale * slope, scale < 1.0, damped


@compiled
def take(search: Search, length: float, floor: float, cap: float) -> None:
    """Set ``trial`` to theta + length * direction, kept on the right side of the bounds against rounding."""
    trial = search.trial
    for i in range(5):
        trial[i] = search.theta[i] + length * search.direction[i]
    trial[OMEGA] = max(trial[OMEGA], floor)
    trial[ALPHA] = max(trial[ALPHA], 0.0)
    trial[BETA] = max(trial[BETA], 0.0)
    excess = trial[ALPHA] + trial[BETA] - cap
    if excess > 0.0:
        trial[BETA] = max(trial[BETA] - excess, 0.0)


@compiled
def receive(
    search: Search,
    value: float,
    next_variance: float,
    gradient: np.ndarray,
    hessian: np.ndarray,
    free: np.ndarray,
    floor: float,
    cap: float,
) -> bool:
    """Digest an evaluation at ``trial``; return True when the current start has come to its end."""
    numbers, counts = search.numbers, search.counts
    if counts[3] and not value >= numbers[0] + 1e-4 * numbers[1] * numbers[2] - 1e-10:
        counts[2] += 1
        if counts[2] > 20:
            end_start(search, -1)
            return True
        numbers[1] *= 0.3
        take(search, numbers[1], floor, cap)
        return False
    if not np.isfinite(value):
        numbers[0], numbers[3] = -np.inf, next_variance
        end_start(search, -1)
        return True
    search.theta[:] = search.trial
    numbers[0], numbers[3], counts[2], counts[3] = value, next_variance, 0, 1
    gain, slope, capped, damped = newton_step(search.theta, gradient, hessian, free, floor, cap, search.direction)
    counts[1] += 1
    if gain < TOLERANCE and not capped:
        take(search, 1.0, floor, cap)
        search.theta[:] = search.trial
        numbers[0] += max(gain, 0.0)
        end_start(search, 2 if damped else 1)
        return True
    if counts[1] > 80:
        end_start(search, -1)
        return True
    numbers[1], numbers[2] = 1.0, slope
    take(search, 1.0, floor, cap)
    return False
