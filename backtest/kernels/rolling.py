"""GARCH rolled over many pasts: warm from day to day inside a fixed run of days, several starts, a status per day."""

import math
from typing import NamedTuple

import numpy as np

from backtest.kernels.compiled import compiled
from backtest.kernels.ewma import filter_ewma
from backtest.kernels.garch import ALPHA, BETA, EWMA_75, OMEGA, UNCONDITIONAL, C, evaluate, filter_past
from backtest.kernels.past import AR1, AR1_NO_INTERCEPT, Past, new_past, prepare
from backtest.kernels.search import (
    AS_EWMA,
    BOUND_ALPHA,
    BOUND_PERSISTENCE,
    CONSTANT,
    FIRST_EXTRA,
    FLAT,
    GRID,
    LAST_GOOD,
    MODE_GAP,
    NOT_CONVERGED,
    RESTARTED,
    SECOND_MODE,
    STARTS,
    TIE,
    WARM,
    Search,
    look_around,
    new_search,
    place_start,
    receive,
)  # fmt: skip

RUN_DAYS = 32
"""Weekday numbers per run; the first fit of a run starts cold, so no result depends on where a pass began."""
FALLBACK_DECAY = 0.94


@compiled
def next_start(search: Search, warm: bool, deep: bool) -> int:
    """Return the number of the start to follow next, or -1; ``deep`` asks for every extra start."""
    modes = search.modes
    if warm and modes[WARM, 7] == 0.0:
        return WARM
    if (not warm or modes[WARM, 7] < 0.0) and modes[GRID, 7] == 0.0:
        return GRID
    best = best_mode(modes)
    if deep or best < 0 or modes[best, 7] != 1.0 or modes[best, 2 + ALPHA] < 0.03:
        for k in range(FIRST_EXTRA, STARTS):
            if modes[k, 7] == 0.0:
                return k
    return -1


@compiled
def distinct(modes: np.ndarray, k: int, other: int) -> bool:
    """Tell whether two ends are different optima: their next variances differ by more than a thousandth."""
    return bool(abs(modes[k, 1] / modes[other, 1] - 1.0) > 1e-3)


@compiled
def best_mode(modes: np.ndarray) -> int:
    """Return the converged end of the highest likelihood, -1 if none.

    Of different optima within TIE the one with the larger next variance; of two ends at the same optimum the first, so
    that rounding does not choose.
    """
    best = -1
    for k in range(modes.shape[0]):
        if modes[k, 7] <= 0.0:
            continue
        lead = modes[k, 0] - modes[best, 0] if best >= 0 else np.inf
        if lead > TIE or (lead > -TIE and distinct(modes, k, best) and modes[k, 1] > modes[best, 1]):
            best = k
    return best


@compiled
def second_variance(modes: np.ndarray, best: int) -> float:
    """Return the next variance of the best other optimum within MODE_GAP, or NaN where there is none."""
    found, value = np.nan, modes[best, 0] - MODE_GAP
    for k in range(modes.shape[0]):
        if modes[k, 7] > 0.0 and distinct(modes, k, best) and modes[k, 0] > value:
            found, value = modes[k, 1], modes[k, 0]
    return found


@compiled
def follow(past: Past, skip: int, start: int, cap: float, free: np.ndarray, search: Search) -> None:
    """Follow the start in hand to its end; the cold start first looks for the best point of its grid."""
    floor = 1e-8 * past.numbers[2]
    gradient, hessian = np.empty(5), np.empty((5, 5))
    done = False
    while not done:
        value, after = evaluate(past.x, skip, search.trial, start, past.numbers[1], past.moments, gradient, hessian)
        if search.counts[4] > 0:
            look_around(search, value, past.mean, past.numbers[2], cap)
        else:
            done = receive(search, value, after, gradient, hessian, free, floor, cap)


@compiled
def fit_past(
    past: Past,
    skip: int,
    start: int,
    cap: float,
    free: np.ndarray,
    search: Search,
    warm_theta: np.ndarray,
    warm: bool,
    quiet_theta: np.ndarray,
    deep: bool,
) -> int:
    """Follow every start this past asks for; return the winning mode, or -1. All modes stay in ``search``."""
    search.modes[:, :] = 0.0
    number = next_start(search, warm, deep)
    while number >= 0:
        place_start(search, number, past.mean, past.numbers[2], cap)
        if number == WARM:
            search.trial[:] = warm_theta
        elif number == FIRST_EXTRA and not math.isnan(quiet_theta[0]):
            search.trial[:] = quiet_theta
        search.trial[OMEGA] = max(search.trial[OMEGA], 1e-8 * past.numbers[2])
        follow(past, skip, start, cap, free, search)
        number = next_start(search, warm, deep)
    return best_mode(search.modes)


@compiled
def fit_status(search: Search, best: int, warm: bool, second: float, cap: float) -> int:
    """Return the status bits of a converged fit."""
    modes = search.modes
    bits = 0
    if modes[best, 2 + ALPHA] <= 1e-9:
        bits |= BOUND_ALPHA
    if modes[best, 2 + ALPHA] + modes[best, 2 + BETA] >= cap - 1e-9:
        bits |= BOUND_PERSISTENCE
    if modes[best, 7] == 2.0:
        bits |= FLAT
    if not math.isnan(second):
        bits |= SECOND_MODE
    if warm and best != WARM and not modes[WARM, 0] > modes[best, 0] - TIE:
        bits |= RESTARTED
    return bits


@compiled
def rescale(theta: np.ndarray, factor: float) -> None:
    """Change the unit of parameters in place: the intercept by ``factor``, omega by its square."""
    theta[C] *= factor
    theta[OMEGA] *= factor * factor


class Chain(NamedTuple):
    """What is carried from day to day inside a run: the last good parameters, in units of the losses, and hints."""

    last: np.ndarray  # (5,) NaN where there are none
    quiet: np.ndarray  # (5,) where the optimum without reaction was last found, scaled units, or NaN
    hints: np.ndarray  # (2,) whether `last` may start a fit, whether a second mode was near


@compiled
def start_chain(chain: Chain, forget: bool) -> None:
    """Begin a run of days: its first fit starts cold; ``forget`` drops the last good parameters too."""
    chain.hints[:] = False
    chain.quiet[:] = np.nan
    if forget:
        chain.last[:] = np.nan


@compiled
def fit_day(
    past: Past,
    skip: int,
    start: int,
    cap: float,
    free: np.ndarray,
    every_start: bool,
    place: int,
    search: Search,
    chain: Chain,
) -> tuple[int, float]:
    """Fit one day; return its status bits and the standard deviation of a second mode (NaN where there is none)."""
    scale, warm = past.numbers[0], chain.hints[0]
    theta = chain.last.copy()
    rescale(theta, 1.0 / scale)
    deep = every_start or not warm or chain.hints[1] or place % 8 == 0
    best = fit_past(past, skip, start, cap, free, search, theta, warm, chain.quiet, deep)
    if best < 0:
        return NOT_CONVERGED | (AS_EWMA if math.isnan(chain.last[0]) else LAST_GOOD), np.nan
    second = second_variance(search.modes, best)
    chain.hints[0], chain.hints[1] = True, not math.isnan(second)
    chain.last[:] = search.modes[best, 2:7]
    rescale(chain.last, scale)
    quiet = search.modes[FIRST_EXTRA]
    if quiet[7] > 0.0 and quiet[2 + ALPHA] < 1e-3:
        chain.quiet[:] = quiet[2:7]
    return fit_status(search, best, warm, second, cap), scale * math.sqrt(second)


@compiled
def filter_day(
    past: Past,
    losses: np.ndarray,
    skip: int,
    start: int,
    bits: int,
    chain: Chain,
    numbers: np.ndarray,
    residuals: np.ndarray,
) -> None:
    """Filter one day's past with the chain's parameters, or by EWMA where the status asks for it."""
    if bits & AS_EWMA:
        full = np.empty(losses.size)
        numbers[1], numbers[2] = 0.0, filter_ewma(losses.copy(), FALLBACK_DECAY, full)
        residuals[:] = full[skip:]
        return
    scale, theta = past.numbers[0], chain.last.copy()
    rescale(theta, 1.0 / scale)
    value, mean, variance = filter_past(past.x, skip, theta, start, past.numbers[1], past.moments, residuals)
    numbers[0] = value - past.moments[0] * math.log(scale)
    numbers[1], numbers[2] = mean * scale, scale * math.sqrt(variance)


@compiled
def roll_garch(
    pasts: np.ndarray,
    places: np.ndarray,
    refit: np.ndarray,
    free: np.ndarray,
    mean_kind: int,
    start: int,
    every_start: bool,
) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    """Fit where ``refit`` and filter each row of ``pasts`` (n, W), losses; rows of one block, in order of days.

    ``places`` (n) are weekday numbers; ``free`` the indices of parameters to estimate. Returns parameters (n, 5),
    numbers (n, 4: log-likelihood, next mean, next sigma, sigma of a second mode or NaN), status bits (n) and residuals
    (n, W or W - 1). A past that does not vary is forecast to repeat its last value, with sigma 0.
    """
    n, W = pasts.shape
    skip = 1 if start == EWMA_75 and mean_kind in (AR1, AR1_NO_INTERCEPT) else 0
    cap = 0.9999 if start == UNCONDITIONAL else 1.0
    past, search = new_past(W), new_search()
    chain = Chain(np.full(5, np.nan), np.full(5, np.nan), np.zeros(2, np.bool_))
    parameters, numbers = np.full((n, 5), np.nan), np.full((n, 4), np.nan)
    status, residuals = np.zeros(n, np.int64), np.empty((n, W - skip))
    for i in range(n):
        if i == 0 or places[i] // RUN_DAYS != places[i - 1] // RUN_DAYS:
            start_chain(chain, refit[i])
        if not prepare(past, pasts[i], mean_kind, start, skip):
            status[i] = CONSTANT
            numbers[i, 1], numbers[i, 2], residuals[i] = pasts[i, W - 1], 0.0, 0.0
            continue
        if refit[i]:
            status[i], numbers[i, 3] = fit_day(past, skip, start, cap, free, every_start, places[i], search, chain)
        elif math.isnan(chain.last[0]):
            status[i] = AS_EWMA
        filter_day(past, pasts[i], skip, start, status[i], chain, numbers[i], residuals[i])
        if not status[i] & AS_EWMA:
            parameters[i] = chain.last
    return parameters, numbers, status, residuals
