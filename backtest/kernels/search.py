"""The search for the best parameters of a past, written as a machine that is fed evaluations, one a lane.

It asks for a point, receives value, gradient and Hessian there, and answers with the next point, until the start in
hand has been followed to its end: Newton steps inside linear constraints, until the predicted gain is below TOLERANCE;
that last step is taken unevaluated.
"""

import math
from typing import NamedTuple

import numpy as np

from backtest.kernels.compiled import compiled
from backtest.kernels.lanes import WIDTH
from backtest.kernels.parameters import ALPHA, BETA, COUNT, ETA, GAMMA, LAMBDA, OMEGA, PHI, C
from backtest.kernels.quadratic import constrained_step
from backtest.kernels.terms import Pass

TOLERANCE = 1e-8
WARM, GRID, FIRST_EXTRA, STARTS = 0, 1, 2, 5
_GRID_POINTS = (
    (0.02, 0.60), (0.10, 0.80), (0.05, 0.90), (0.15, 0.95), (0.05, 0.97), (0.03, 0.985), (0.08, 0.99), (0.04, 0.999),
)  # fmt: skip
_EXTRA_POINTS = ((0.0, 0.98), (0.20, 0.85), (0.03, 0.985))
"""(reaction, persistence) of the starts beside the warm one; the first seeks the optimum without reaction."""
_FIRST_ETA, LOWEST_ETA, HIGHEST_ETA, WIDEST_LAMBDA = 0.12, 0.002, 1.0 / 2.05, 0.95
UNTRIED, FAILED, CONVERGED, FLAT_END = 0, -1, 1, 2
"""How a start ended; flat: the curvature had to be helped in the last step."""
_ROWS = 9


class Search(NamedTuple):
    """Mutable state of eight searches; the point to evaluate next stands in the pass itself."""

    theta: np.ndarray  # (lanes, COUNT) last accepted point of the start in hand
    direction: np.ndarray  # (lanes, COUNT)
    numbers: np.ndarray  # (lanes, 4) value at theta, step length, slope, next variance at theta
    counts: np.ndarray  # (lanes, 5) start in hand, iterations, shrinks, has a value, grid point + 1 (0: past it)
    best: np.ndarray  # (lanes, 2) best grid value, its index
    ends: np.ndarray  # (lanes, STARTS, COUNT) where each start ended
    values: np.ndarray  # (lanes, STARTS)
    variances: np.ndarray  # (lanes, STARTS) next day's variance there
    fates: np.ndarray  # (lanes, STARTS)
    spreads: np.ndarray  # (lanes, STARTS, 3) variances of next mean and next variance, and their covariance


def new_search() -> Search:
    """Return the state of eight searches, to be reused."""
    tried = (WIDTH, STARTS)
    return Search(
        np.zeros((WIDTH, COUNT)), np.zeros((WIDTH, COUNT)), np.zeros((WIDTH, 4)), np.zeros((WIDTH, 5), np.int64),
        np.zeros((WIDTH, 2)), np.zeros((*tried, COUNT)), np.zeros(tried), np.ones(tried), np.zeros(tried, np.int64),
        np.zeros((*tried, 3)),
    )  # fmt: skip


@compiled
def persistence(theta: np.ndarray, lane: int) -> float:
    """Return alpha + gamma / 2 + beta."""
    return theta[lane, ALPHA] + 0.5 * theta[lane, GAMMA] + theta[lane, BETA]


@compiled
def place(
    p: Pass, lane: int, reaction: float, total: float, mean: np.ndarray, variance: float, cap: float, gjr: bool
) -> None:
    """Set the trial point: least-squares mean, reaction and persistence, omega aiming at ``variance``."""
    theta, total = p.theta, min(total, cap)
    for i in range(COUNT):
        theta[i, lane] = 0.0
    theta[C, lane], theta[PHI, lane] = mean[lane, 0], mean[lane, 1]
    theta[ALPHA, lane] = 0.5 * reaction if gjr else reaction
    theta[GAMMA, lane] = reaction if gjr else 0.0
    theta[OMEGA, lane], theta[BETA, lane] = variance * (1.0 - total), total - reaction
    theta[ETA, lane] = _FIRST_ETA


@compiled
def begin_start(
    s: Search, p: Pass, lane: int, number: int, mean: np.ndarray, variance: float, cap: float, gjr: bool
) -> None:
    """Make start ``number`` the one in hand and set its first trial point."""
    reaction, total = _EXTRA_POINTS[number - FIRST_EXTRA] if number >= FIRST_EXTRA else _GRID_POINTS[0]
    place(p, lane, reaction, total, mean, variance, cap, gjr)
    for i in range(5):
        s.counts[lane, i] = 0
    s.counts[lane, 0] = number
    if number == GRID:
        s.counts[lane, 4] = 1
        s.best[lane, 0], s.best[lane, 1] = -np.inf, 0.0


@compiled
def look_around(s: Search, p: Pass, lane: int, mean: np.ndarray, variance: float, cap: float, gjr: bool) -> None:
    """Note the value of the grid point in hand and set the next one; after the last, the best."""
    at = s.counts[lane, 4] - 1
    if p.value[0, lane] > s.best[lane, 0]:
        s.best[lane, 0], s.best[lane, 1] = p.value[0, lane], at
    last = at + 1 == len(_GRID_POINTS)
    reaction, total = _GRID_POINTS[int(s.best[lane, 1]) if last else at + 1]
    place(p, lane, reaction, total, mean, variance, cap, gjr)
    s.counts[lane, 4] = 0 if last else at + 2


@compiled
def constraints(
    theta: np.ndarray, lane: int, free: np.ndarray, floor: float, cap: float, A: np.ndarray, slack: np.ndarray
) -> None:
    """Fill the rows A d <= slack of the free parameters; a row without a free parameter never binds."""
    for i in range(_ROWS):
        slack[i] = 1.0
        for a in range(free.size):
            A[i, a] = 0.0
    gjr = False
    for a in range(free.size):
        gjr = gjr or free[a] == GAMMA
    for a in range(free.size):
        i = free[a]
        if i == OMEGA:
            A[0, a], slack[0] = -1.0, theta[lane, OMEGA] - floor
        elif i == ALPHA:
            A[1, a], slack[1], A[4, a] = -1.0, theta[lane, ALPHA], 1.0
            A[2, a] = -1.0 if gjr else 0.0
        elif i == GAMMA:
            A[2, a], A[4, a] = -1.0, 0.5
        elif i == BETA:
            A[3, a], slack[3], A[4, a] = -1.0, theta[lane, BETA], 1.0
        elif i == ETA:
            A[5, a], A[6, a] = -1.0, 1.0
            slack[5], slack[6] = theta[lane, ETA] - LOWEST_ETA, HIGHEST_ETA - theta[lane, ETA]
        elif i == LAMBDA:
            A[7, a], A[8, a] = -1.0, 1.0
            slack[7], slack[8] = theta[lane, LAMBDA] + WIDEST_LAMBDA, WIDEST_LAMBDA - theta[lane, LAMBDA]
    if gjr:
        slack[2] = theta[lane, ALPHA] + theta[lane, GAMMA]
    slack[4] = cap - persistence(theta, lane)
    for i in range(_ROWS):
        slack[i] = max(slack[i], 0.0)


@compiled
def shrink_of(theta: np.ndarray, direction: np.ndarray, lane: int, floor: float) -> float:
    """Return the factor that keeps a step within what a quadratic can be trusted for."""
    scale = 1.0
    for i in range(ALPHA, COUNT):
        most = 0.3 if i <= BETA else 0.15
        if abs(direction[lane, i]) > most:
            scale = min(scale, most / abs(direction[lane, i]))
    fall, omega = -direction[lane, OMEGA], theta[lane, OMEGA]
    if fall > 0.95 * omega and omega > 2.0 * floor:
        scale = min(scale, 0.95 * omega / fall)
    return scale


@compiled
def newton_step(
    s: Search, p: Pass, lane: int, free: np.ndarray, floor: float, cap: float
) -> tuple[float, float, bool, bool]:
    """Fill the direction with the constrained step; return predicted gain, slope, whether capped, whether damped."""
    n = free.size
    Q, g, A, slack = np.empty((n, n)), np.empty(n), np.empty((_ROWS, n)), np.empty(_ROWS)
    for a in range(n):
        g[a] = p.gradient[free[a], lane]
        for b in range(a, n):
            Q[a, b] = Q[b, a] = -p.hessian[free[a] * COUNT + free[b], lane]
    constraints(s.theta, lane, free, floor, cap, A, slack)
    d, damped = constrained_step(Q, g, A, slack)
    for i in range(COUNT):
        s.direction[lane, i] = 0.0
    slope, bend = 0.0, 0.0
    for a in range(n):
        s.direction[lane, free[a]] = d[a]
        slope += g[a] * d[a]
        for b in range(n):
            bend += Q[a, b] * d[a] * d[b]
    scale = shrink_of(s.theta, s.direction, lane, floor)
    for i in range(COUNT):
        s.direction[lane, i] *= scale
    return scale * slope - 0.5 * scale * scale * bend, scale * slope, scale < 1.0, damped


@compiled
def take(s: Search, p: Pass, lane: int, length: float, floor: float, cap: float) -> None:
    """Set the trial point to theta + length * direction, kept on the right side of the bounds against rounding."""
    for i in range(COUNT):
        p.theta[i, lane] = s.theta[lane, i] + length * s.direction[lane, i]
    t = p.theta
    t[OMEGA, lane] = max(t[OMEGA, lane], floor)
    t[ALPHA, lane] = max(t[ALPHA, lane], 0.0)
    t[GAMMA, lane] = max(t[GAMMA, lane], -t[ALPHA, lane])
    t[BETA, lane] = max(t[BETA, lane], 0.0)
    t[ETA, lane] = min(max(t[ETA, lane], LOWEST_ETA), HIGHEST_ETA)
    excess = t[ALPHA, lane] + 0.5 * t[GAMMA, lane] + t[BETA, lane] - cap
    if excess > 0.0:
        t[BETA, lane] = max(t[BETA, lane] - excess, 0.0)


@compiled
def end_start(s: Search, lane: int, fate: int) -> None:
    """Keep where the start in hand ended."""
    number = s.counts[lane, 0]
    s.values[lane, number], s.variances[lane, number] = s.numbers[lane, 0], s.numbers[lane, 3]
    s.fates[lane, number] = fate
    for i in range(COUNT):
        s.ends[lane, number, i] = s.theta[lane, i]


@compiled
def receive(s: Search, p: Pass, lane: int, free: np.ndarray, floor: float, cap: float) -> bool:
    """Digest an evaluation at the trial point; return True when the start in hand has come to its end."""
    numbers, counts, value = s.numbers, s.counts, p.value[0, lane]
    if counts[lane, 3] and not value >= numbers[lane, 0] + 1e-4 * numbers[lane, 1] * numbers[lane, 2] - 1e-10:
        counts[lane, 2] += 1
        if counts[lane, 2] > 20:
            end_start(s, lane, FAILED)
            return True
        numbers[lane, 1] *= 0.3
        take(s, p, lane, numbers[lane, 1], floor, cap)
        return False
    if not math.isfinite(value):
        numbers[lane, 0], numbers[lane, 3] = -np.inf, 1.0
        end_start(s, lane, FAILED)
        return True
    for i in range(COUNT):
        s.theta[lane, i] = p.theta[i, lane]
    numbers[lane, 0], numbers[lane, 3] = value, p.after[0, lane]
    counts[lane, 1], counts[lane, 2], counts[lane, 3] = counts[lane, 1] + 1, 0, 1
    gain, slope, capped, damped = newton_step(s, p, lane, free, floor, cap)
    if gain < TOLERANCE and not capped:
        take(s, p, lane, 1.0, floor, cap)
        for i in range(COUNT):
            s.theta[lane, i] = p.theta[i, lane]
        numbers[lane, 0] += max(gain, 0.0)
        end_start(s, lane, FLAT_END if damped else CONVERGED)
        return True
    if counts[lane, 1] > 80:
        end_start(s, lane, FAILED)
        return True
    numbers[lane, 1], numbers[lane, 2] = 1.0, slope
    take(s, p, lane, 1.0, floor, cap)
    return False
