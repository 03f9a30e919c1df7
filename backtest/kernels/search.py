"""The search for the best parameters of a past, written as a machine that is fed evaluations, one a lane.

It asks for a point, receives value, gradient and Hessian there, and answers with the next point, until the start in
hand has been followed to its end: Newton steps inside linear constraints, until the predicted gain is below TOLERANCE;
that last step is taken unevaluated.
"""

import math
from typing import NamedTuple

import numpy as np

from backtest.kernels.compiled import inner
from backtest.kernels.lanes import WIDTH
from backtest.kernels.parameters import ALPHA, BETA, COUNT, ETA, GAMMA, LAMBDA, OMEGA, PHI, C
from backtest.kernels.past import MEAN
from backtest.kernels.quadratic import constrained_step
from backtest.kernels.terms import AFTER, GRADIENT, HESSIAN, THETA, VALUE

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
_WIDEST_PHI = 0.999
_ROWS = 11


THETA_AT, DIRECTION = 0, COUNT
AT_VALUE, AT_LENGTH, AT_SLOPE, AT_AFTER, BEST_VALUE, BEST_INDEX, STATE = (2 * COUNT + i for i in range(7))
"""Columns of ``state``: last accepted point of the start in hand and the direction from it; value there, step length,
slope, next variance; best value and index of the grid."""
NUMBER, ITERATIONS, SHRINKS, HAS_VALUE, GRID_PLACE, FATES, COUNTERS = 0, 1, 2, 3, 4, 5, 5 + STARTS
"""Columns of ``counts``: start in hand, iterations, shrinks, whether it has a value, grid point + 1 (0: past it), and
how each start ended."""
END_VALUE, END_AFTER, END = COUNT, COUNT + 1, COUNT + 2
"""Columns of ``ends`` after the parameters: log-likelihood and next day's variance."""


class Search(NamedTuple):
    """Mutable state of eight searches; the point to evaluate next stands in the pass itself."""

    state: np.ndarray  # (lanes, STATE)
    counts: np.ndarray  # (lanes, COUNTERS)
    ends: np.ndarray  # (lanes, STARTS, END)


def new_search() -> Search:
    """Return the state of eight searches, to be reused."""
    return Search(np.zeros((WIDTH, STATE)), np.zeros((WIDTH, COUNTERS), np.int64), np.ones((WIDTH, STARTS, END)))


@inner
def place(
    p: np.ndarray, lane: int, reaction: float, total: float, facts: np.ndarray, variance: float, cap: float, gjr: bool
) -> None:
    """Set the trial point: least-squares mean, reaction and persistence, omega aiming at ``variance``."""
    total = min(total, cap)
    for i in range(COUNT):
        p[THETA + i, lane] = 0.0
    p[THETA + C, lane], p[THETA + PHI, lane] = facts[lane, MEAN], facts[lane, MEAN + 1]
    p[THETA + ALPHA, lane] = 0.5 * reaction if gjr else reaction
    p[THETA + GAMMA, lane] = reaction if gjr else 0.0
    p[THETA + OMEGA, lane], p[THETA + BETA, lane] = variance * (1.0 - total), total - reaction
    p[THETA + ETA, lane] = _FIRST_ETA


@inner
def begin_start(
    s: Search, p: np.ndarray, lane: int, number: int, facts: np.ndarray, variance: float, cap: float, gjr: bool
) -> None:
    """Make start ``number`` the one in hand and set its first trial point."""
    reaction, total = _EXTRA_POINTS[number - FIRST_EXTRA] if number >= FIRST_EXTRA else _GRID_POINTS[0]
    place(p, lane, reaction, total, facts, variance, cap, gjr)
    counts = s.counts
    counts[lane, NUMBER], counts[lane, ITERATIONS], counts[lane, SHRINKS], counts[lane, HAS_VALUE] = number, 0, 0, 0
    counts[lane, GRID_PLACE] = 1 if number == GRID else 0
    s.state[lane, BEST_VALUE], s.state[lane, BEST_INDEX] = -np.inf, 0.0


@inner
def look_around(s: Search, p: np.ndarray, lane: int, facts: np.ndarray, variance: float, cap: float, gjr: bool) -> None:
    """Note the value of the grid point in hand and set the next one; after the last, the best."""
    at = s.counts[lane, GRID_PLACE] - 1
    if p[VALUE, lane] > s.state[lane, BEST_VALUE]:
        s.state[lane, BEST_VALUE], s.state[lane, BEST_INDEX] = p[VALUE, lane], at
    last = at + 1 == len(_GRID_POINTS)
    reaction, total = _GRID_POINTS[int(s.state[lane, BEST_INDEX]) if last else at + 1]
    place(p, lane, reaction, total, facts, variance, cap, gjr)
    s.counts[lane, GRID_PLACE] = 0 if last else at + 2


@inner
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
        if i == PHI:
            A[9, a], A[10, a] = -1.0, 1.0
            slack[9], slack[10] = theta[lane, PHI] + _WIDEST_PHI, _WIDEST_PHI - theta[lane, PHI]
        elif i == OMEGA:
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
    slack[4] = cap - theta[lane, ALPHA] - 0.5 * theta[lane, GAMMA] - theta[lane, BETA]
    for i in range(_ROWS):
        slack[i] = max(slack[i], 0.0)


@inner
def shrink_of(state: np.ndarray, lane: int, floor: float) -> float:
    """Return the factor that keeps a step within what a quadratic can be trusted for."""
    scale = 1.0
    for i in range(ALPHA, COUNT):
        most = 0.3 if i <= BETA else 0.15
        size = abs(state[lane, DIRECTION + i])
        if size > most:
            scale = min(scale, most / size)
    fall, omega = -state[lane, DIRECTION + OMEGA], state[lane, OMEGA]
    if fall > 0.95 * omega and omega > 2.0 * floor:
        scale = min(scale, 0.95 * omega / fall)
    return scale


@inner
def newton_step(
    state: np.ndarray, p: np.ndarray, lane: int, free: np.ndarray, floor: float, cap: float
) -> tuple[float, float, bool, bool]:
    """Fill the direction with the constrained step; return predicted gain, slope, whether capped, whether damped."""
    n = free.size
    Q, g, A, slack = np.empty((n, n)), np.empty(n), np.empty((_ROWS, n)), np.empty(_ROWS)
    for a in range(n):
        g[a] = p[GRADIENT + free[a], lane]
        for b in range(a, n):
            Q[a, b] = Q[b, a] = -p[HESSIAN + free[a] * COUNT + free[b], lane]
    constraints(state, lane, free, floor, cap, A, slack)
    d, damped = constrained_step(Q, g, A, slack)
    for i in range(COUNT):
        state[lane, DIRECTION + i] = 0.0
    slope, bend = 0.0, 0.0
    for a in range(n):
        state[lane, DIRECTION + free[a]] = d[a]
        slope += g[a] * d[a]
        for b in range(n):
            bend += Q[a, b] * d[a] * d[b]
    scale = shrink_of(state, lane, floor)
    for i in range(COUNT):
        state[lane, DIRECTION + i] *= scale
    return scale * slope - 0.5 * scale * scale * bend, scale * slope, scale < 1.0, damped


@inner
def take(state: np.ndarray, p: np.ndarray, lane: int, length: float, floor: float, cap: float) -> None:
    """Set the trial point to theta + length * direction, kept on the right side of the bounds against rounding."""
    for i in range(COUNT):
        p[THETA + i, lane] = state[lane, i] + length * state[lane, DIRECTION + i]
    alpha = max(p[THETA + ALPHA, lane], 0.0)
    gamma = max(p[THETA + GAMMA, lane], -alpha)
    beta = max(p[THETA + BETA, lane], 0.0)
    excess = alpha + 0.5 * gamma + beta - cap
    p[THETA + PHI, lane] = min(max(p[THETA + PHI, lane], -_WIDEST_PHI), _WIDEST_PHI)
    p[THETA + OMEGA, lane] = max(p[THETA + OMEGA, lane], floor)
    p[THETA + ALPHA, lane], p[THETA + GAMMA, lane] = alpha, gamma
    p[THETA + BETA, lane] = max(beta - excess, 0.0) if excess > 0.0 else beta
    p[THETA + ETA, lane] = min(max(p[THETA + ETA, lane], LOWEST_ETA), HIGHEST_ETA)


@inner
def end_start(s: Search, lane: int, fate: int) -> None:
    """Keep where the start in hand ended."""
    number = s.counts[lane, NUMBER]
    s.counts[lane, FATES + number] = fate
    s.ends[lane, number, END_VALUE], s.ends[lane, number, END_AFTER] = s.state[lane, AT_VALUE], s.state[lane, AT_AFTER]
    for i in range(COUNT):
        s.ends[lane, number, i] = s.state[lane, i]


@inner
def receive(s: Search, p: np.ndarray, lane: int, free: np.ndarray, floor: float, cap: float) -> bool:
    """Digest an evaluation at the trial point; return True when the start in hand has come to its end."""
    state, counts, value, fate = s.state, s.counts, p[VALUE, lane], UNTRIED
    enough = state[lane, AT_VALUE] + 1e-4 * state[lane, AT_LENGTH] * state[lane, AT_SLOPE] - 1e-10
    length = 1.0
    if counts[lane, HAS_VALUE] and not value >= enough:
        counts[lane, SHRINKS] += 1
        state[lane, AT_LENGTH] *= 0.3
        length = state[lane, AT_LENGTH]
        fate = FAILED if counts[lane, SHRINKS] > 20 else UNTRIED
    elif not math.isfinite(value):
        state[lane, AT_VALUE], state[lane, AT_AFTER], fate = -np.inf, 1.0, FAILED
    else:
        fate = accept(s, p, lane, free, floor, cap)
    if fate != FAILED:
        take(state, p, lane, length, floor, cap)
    if fate >= CONVERGED:
        for i in range(COUNT):
            state[lane, i] = p[THETA + i, lane]
    if fate != UNTRIED:
        end_start(s, lane, fate)
    return fate != UNTRIED


@inner
def accept(s: Search, p: np.ndarray, lane: int, free: np.ndarray, floor: float, cap: float) -> int:
    """Make the trial point the accepted one and find the direction from it; return how the start ends, or UNTRIED."""
    state, counts = s.state, s.counts
    for i in range(COUNT):
        state[lane, i] = p[THETA + i, lane]
    state[lane, AT_VALUE], state[lane, AT_AFTER] = p[VALUE, lane], p[AFTER, lane]
    counts[lane, ITERATIONS], counts[lane, SHRINKS], counts[lane, HAS_VALUE] = counts[lane, ITERATIONS] + 1, 0, 1
    gain, slope, capped, damped = newton_step(state, p, lane, free, floor, cap)
    if gain < TOLERANCE and not capped:
        state[lane, AT_VALUE] += max(gain, 0.0)
        return FLAT_END if damped else CONVERGED
    if counts[lane, ITERATIONS] > 80:
        return FAILED
    state[lane, AT_LENGTH], state[lane, AT_SLOPE] = 1.0, slope
    return UNTRIED
