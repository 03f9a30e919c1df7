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
from backtest.kernels.quadratic import LINES, SLACK, STEP, A, G, Q, new_sheet
from backtest.kernels.terms import AFTER, GRADIENT, HESSIAN, THETA, VALUE

TOLERANCE = 1e-8
WARM, GRID, FIRST_EXTRA, STARTS = 0, 1, 2, 5
_GRID_POINTS = (
    (0.02, 0.60), (0.10, 0.80), (0.05, 0.90), (0.15, 0.95), (0.05, 0.97), (0.03, 0.985), (0.08, 0.99), (0.04, 0.999),
)  # fmt: skip
_EXTRA_POINTS = ((0.0, 0.98), (0.08, 0.90), (0.03, 0.985))
"""(reaction, persistence) of the starts beside the warm one; the first seeks the optimum without reaction."""
_FIRST_ETA, LOWEST_ETA, HIGHEST_ETA, WIDEST_LAMBDA = 0.12, 0.002, 1.0 / 2.05, 0.95
UNTRIED, FAILED, CONVERGED, FLAT_END, ACCEPTED = 0, -1, 1, 2, 3
"""How a start ended; flat: the curvature had to be helped in the last step. Accepted: not ended, a new step is due."""
_WIDEST_PHI = 0.999

DIRECTION = COUNT
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
    sheet: np.ndarray  # of the quadratic programme in hand


def new_search() -> Search:
    """Return the state of eight searches, to be reused."""
    counts, ends = np.zeros((WIDTH, COUNTERS), np.int64), np.ones((WIDTH, STARTS, END))
    return Search(np.zeros((WIDTH, STATE)), counts, ends, new_sheet())


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
def constrain(theta: np.ndarray, lane: int, free: np.ndarray, floor: float, cap: float, w: np.ndarray) -> None:
    """Write the constraints on the free parameters into the sheet; one without a free parameter never binds."""
    for i in range(LINES):
        w[SLACK, i] = 1.0
        for a in range(free.size):
            w[A + i, a] = 0.0
    gjr = False
    for a in range(free.size):
        gjr = gjr or free[a] == GAMMA
    for a in range(free.size):
        i = free[a]
        if i == PHI:
            bound_both(w, 9, a, theta[lane, PHI], -_WIDEST_PHI, _WIDEST_PHI)
        elif i == OMEGA:
            w[A, a], w[SLACK, 0] = -1.0, theta[lane, OMEGA] - floor
        elif i == ALPHA:
            w[A + 1, a], w[SLACK, 1], w[A + 4, a] = -1.0, theta[lane, ALPHA], 1.0
            w[A + 2, a] = -1.0 if gjr else 0.0
        elif i == GAMMA:
            w[A + 2, a], w[A + 4, a] = -1.0, 0.5
        elif i == BETA:
            w[A + 3, a], w[SLACK, 3], w[A + 4, a] = -1.0, theta[lane, BETA], 1.0
        elif i == ETA:
            bound_both(w, 5, a, theta[lane, ETA], LOWEST_ETA, HIGHEST_ETA)
        elif i == LAMBDA:
            bound_both(w, 7, a, theta[lane, LAMBDA], -WIDEST_LAMBDA, WIDEST_LAMBDA)
    if gjr:
        w[SLACK, 2] = theta[lane, ALPHA] + theta[lane, GAMMA]
    w[SLACK, 4] = cap - theta[lane, ALPHA] - 0.5 * theta[lane, GAMMA] - theta[lane, BETA]
    for i in range(LINES):
        w[SLACK, i] = max(w[SLACK, i], 0.0)


@inner
def bound_both(w: np.ndarray, line: int, a: int, value: float, low: float, high: float) -> None:
    """Write the two constraints that keep free parameter ``a``, now at ``value``, between bounds."""
    w[A + line, a], w[A + line + 1, a] = -1.0, 1.0
    w[SLACK, line], w[SLACK, line + 1] = value - low, high - value


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
def pose(s: Search, p: np.ndarray, lane: int, free: np.ndarray, floor: float, cap: float) -> None:
    """Make the trial point the accepted one and write the programme for the step from it into the sheet."""
    state, counts, w = s.state, s.counts, s.sheet
    for i in range(COUNT):
        state[lane, i] = p[THETA + i, lane]
    state[lane, AT_VALUE], state[lane, AT_AFTER] = p[VALUE, lane], p[AFTER, lane]
    counts[lane, ITERATIONS], counts[lane, SHRINKS], counts[lane, HAS_VALUE] = counts[lane, ITERATIONS] + 1, 0, 1
    for a in range(free.size):
        w[G, a] = p[GRADIENT + free[a], lane]
        for b in range(a, free.size):
            w[Q + a, b] = w[Q + b, a] = -p[HESSIAN + free[a] * COUNT + free[b], lane]
    constrain(state, lane, free, floor, cap, w)


@inner
def turn(s: Search, lane: int, free: np.ndarray, floor: float, damped: bool) -> int:
    """Take the direction from the solved programme; return how the start ends, or UNTRIED."""
    state, counts, w = s.state, s.counts, s.sheet
    for i in range(COUNT):
        state[lane, DIRECTION + i] = 0.0
    slope, bend = 0.0, 0.0
    for a in range(free.size):
        state[lane, DIRECTION + free[a]] = w[STEP, a]
        slope += w[G, a] * w[STEP, a]
        for b in range(free.size):
            bend += w[Q + a, b] * w[STEP, a] * w[STEP, b]
    scale = shrink_of(state, lane, floor)
    for i in range(COUNT):
        state[lane, DIRECTION + i] *= scale
    gain = scale * slope - 0.5 * scale * scale * bend
    if not damped and not scale < 1.0 and joins(s, lane, gain):
        return CONVERGED
    if gain < TOLERANCE and not scale < 1.0:
        state[lane, AT_VALUE] += max(gain, 0.0)
        return FLAT_END if damped else CONVERGED
    state[lane, AT_LENGTH], state[lane, AT_SLOPE] = 1.0, scale * slope
    return FAILED if counts[lane, ITERATIONS] > 80 else UNTRIED


@inner
def joins(s: Search, lane: int, gain: float) -> bool:
    """Tell whether the step leads to the end of an earlier start; it is then made to lead there exactly.

    The step is a full Newton step, so that the optimum it aims at is that one and the rest of the way would only repeat
    it: parameters within a thousandth (omega: a hundredth of its size), log-likelihood within 1e-3.
    """
    state, ends = s.state, s.ends
    for k in range(STARTS):
        if s.counts[lane, FATES + k] != CONVERGED or not gain < 0.1:
            continue
        near = abs(state[lane, AT_VALUE] + gain - ends[lane, k, END_VALUE]) < 1e-3
        for i in range(COUNT):
            gap = abs(state[lane, i] + state[lane, DIRECTION + i] - ends[lane, k, i])
            near = near and gap < (0.01 * ends[lane, k, OMEGA] if i == OMEGA else 1e-3)
        if near:
            for i in range(COUNT):
                state[lane, DIRECTION + i] = ends[lane, k, i] - state[lane, i]
            state[lane, AT_VALUE], state[lane, AT_AFTER] = ends[lane, k, END_VALUE], ends[lane, k, END_AFTER]
            return True
    return False


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
def receive(s: Search, p: np.ndarray, lane: int) -> int:
    """Judge an evaluation at the trial point: ACCEPTED, FAILED, or UNTRIED where a shorter step is to be tried."""
    state, counts, value = s.state, s.counts, p[VALUE, lane]
    enough = state[lane, AT_VALUE] + 1e-4 * state[lane, AT_LENGTH] * state[lane, AT_SLOPE] - 1e-10
    if counts[lane, HAS_VALUE] and not value >= enough:
        counts[lane, SHRINKS] += 1
        state[lane, AT_LENGTH] *= 0.3
        return FAILED if counts[lane, SHRINKS] > 20 else UNTRIED
    if not math.isfinite(value):
        state[lane, AT_VALUE], state[lane, AT_AFTER] = -np.inf, 1.0
        return FAILED
    return ACCEPTED


@inner
def go_on(s: Search, p: np.ndarray, lane: int, fate: int, floor: float, cap: float) -> None:
    """Set the next trial point along the direction, or keep where the start in hand ended."""
    if fate != FAILED:
        take(s.state, p, lane, 1.0 if fate >= CONVERGED else s.state[lane, AT_LENGTH], floor, cap)
    if fate >= CONVERGED:
        for i in range(COUNT):
            s.state[lane, i] = p[THETA + i, lane]
    if fate != UNTRIED:
        end_start(s, lane, fate)
