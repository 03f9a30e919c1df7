"""The GARCH family rolled over many pasts, eight at a time: warm from day to day, several starts, a status per day.

A run of RUN_DAYS weekday numbers is one chain: its first fit starts cold, so that no result depends on where a pass
began. Lanes take runs from a queue and never wait for each other.
"""

import math
from typing import Any, NamedTuple

import numpy as np

from backtest.kernels.compiled import compiled
from backtest.kernels.lanes import WIDTH
from backtest.kernels.likelihood import begin, evaluate
from backtest.kernels.parameters import ALPHA, COUNT, GAMMA, OMEGA, C
from backtest.kernels.past import Pasts, prepare
from backtest.kernels.search import (
    CONVERGED,
    FAILED,
    FIRST_EXTRA,
    FLAT_END,
    GRID,
    STARTS,
    UNTRIED,
    WARM,
    Search,
    begin_start,
    look_around,
    receive,
)  # fmt: skip
from backtest.kernels.terms import Pass

RUN_DAYS = 32
MODE_GAP = 6.0
"""Two optima closer than this in log-likelihood are both reported."""
TIE = 1e-6
BOUND_REACTION, BOUND_PERSISTENCE, FLAT, SECOND_MODE, RESTARTED, NOT_CONVERGED, CONSTANT = 1, 2, 4, 8, 16, 32, 256
"""Bits of the status of a fit."""


class Member(NamedTuple):
    """A member of the family: what is estimated, how it starts, which law."""

    free: np.ndarray  # indices of the estimated parameters
    mean: int
    start: int
    shapes: int  # 0 normal, 1 t, 2 skewed t
    skip: int  # days at the front that only condition
    cap: float  # largest persistence
    gjr: bool
    every_start: bool


class Rows(NamedTuple):
    """The rows to fit, in runs: rows ``begins[r]`` up to ``begins[r + 1]`` of ``chosen`` are run r."""

    chosen: np.ndarray
    begins: np.ndarray
    places: np.ndarray


class Fits(NamedTuple):
    """What is found, one row a past, in units of the losses; NaN where nothing is."""

    parameters: np.ndarray  # (n, COUNT)
    numbers: np.ndarray  # (n, 2): log-likelihood, sigma of a second mode
    status: np.ndarray  # (n,) bits


class Chains(NamedTuple):
    """What each lane carries along its run."""

    run: np.ndarray  # (lanes,) run in hand
    at: np.ndarray  # (lanes,) position in ``chosen``; -1: idle
    queue: np.ndarray  # (1,) next run to take
    last: np.ndarray  # (lanes, COUNT) last good parameters, units of the losses
    quiet: np.ndarray  # (lanes, COUNT) where the optimum without reaction was last found, scaled units
    hints: np.ndarray  # (lanes, 3) may start warm, a second mode was near, a quiet optimum is known


def new_chains() -> Chains:
    """Return eight idle chains."""
    return Chains(
        np.full(WIDTH, -1), np.full(WIDTH, -1), np.zeros(1, np.int64), np.zeros((WIDTH, COUNT)),
        np.zeros((WIDTH, COUNT)), np.zeros((WIDTH, 3), np.bool_),
    )  # fmt: skip


@compiled
def distinct(s: Search, lane: int, k: int, other: int) -> bool:
    """Tell whether two ends are different optima: their next variances differ by more than a thousandth."""
    return bool(abs(s.variances[lane, k] / s.variances[lane, other] - 1.0) > 1e-3)


@compiled
def best_end(s: Search, lane: int) -> int:
    """Return the converged end of the highest likelihood, -1 if none.

    Of different optima within TIE the one with the larger next variance; of two ends at the same optimum the first, so
    that rounding does not choose.
    """
    best = -1
    for k in range(STARTS):
        if s.fates[lane, k] < CONVERGED:
            continue
        lead = s.values[lane, k] - s.values[lane, best] if best >= 0 else np.inf
        wider = best >= 0 and s.variances[lane, k] > s.variances[lane, best]
        if lead > TIE or (lead > -TIE and wider and distinct(s, lane, k, best)):
            best = k
    return best


@compiled
def next_start(s: Search, lane: int, warm: bool, deep: bool) -> int:
    """Return the number of the start to follow next, or -1; ``deep`` asks for every extra start."""
    fates = s.fates
    if warm and fates[lane, WARM] == UNTRIED:
        return WARM
    if (not warm or fates[lane, WARM] == FAILED) and fates[lane, GRID] == UNTRIED:
        return GRID
    best = best_end(s, lane)
    if not deep and best >= 0 and fates[lane, best] == CONVERGED:
        reaction = s.ends[lane, best, ALPHA] + 0.5 * s.ends[lane, best, GAMMA]
        if reaction >= 0.03:
            return -1
    for k in range(FIRST_EXTRA, STARTS):
        if fates[lane, k] == UNTRIED:
            return k
    return -1


@compiled
def second_variance(s: Search, lane: int, best: int) -> float:
    """Return the next variance of the best other optimum within MODE_GAP, or NaN where there is none."""
    found, value = np.nan, s.values[lane, best] - MODE_GAP
    for k in range(STARTS):
        if s.fates[lane, k] >= CONVERGED and s.values[lane, k] > value and distinct(s, lane, k, best):
            found, value = s.variances[lane, k], s.values[lane, k]
    return found


@compiled
def set_start(pasts: Pasts, p: Pass, s: Search, c: Chains, member: Member, lane: int, number: int) -> None:
    """Put the first point of start ``number`` into the pass."""
    begin_start(s, p, lane, number, pasts.mean, pasts.variance[lane], member.cap, member.gjr)
    scale = pasts.scale[lane]
    for i in range(COUNT):
        if number == WARM:
            unit = 1.0 / scale if i == C else (1.0 / (scale * scale) if i == OMEGA else 1.0)
            p.theta[i, lane] = c.last[lane, i] * unit
        elif number == FIRST_EXTRA and c.hints[lane, 2]:
            p.theta[i, lane] = c.quiet[lane, i]
    p.theta[OMEGA, lane] = max(p.theta[OMEGA, lane], 1e-8 * pasts.variance[lane])


@compiled
def deep_search(c: Chains, rows: Rows, member: Member, lane: int) -> bool:
    """Tell whether this day asks for every start: a cold one, every eighth, one beside a second mode, or an audit."""
    eighth = rows.places[rows.chosen[c.at[lane]]] % 8 == 0
    return bool(member.every_start or not c.hints[lane, 0] or c.hints[lane, 1] or eighth)


@compiled
def keep(pasts: Pasts, s: Search, c: Chains, rows: Rows, member: Member, lane: int, fits: Fits) -> None:
    """Write the winner of a day's search and what the next day starts from."""
    row, best, scale = rows.chosen[c.at[lane]], best_end(s, lane), pasts.scale[lane]
    if best < 0:
        fits.status[row] = NOT_CONVERGED
        return
    second = second_variance(s, lane, best)
    reaction = s.ends[lane, best, ALPHA] + max(s.ends[lane, best, GAMMA], 0.0)
    total = s.ends[lane, best, ALPHA] + 0.5 * s.ends[lane, best, GAMMA] + s.ends[lane, best, 5]
    bits = BOUND_REACTION if reaction <= 1e-9 else 0
    bits |= BOUND_PERSISTENCE if total >= member.cap - 1e-9 else 0
    bits |= FLAT if s.fates[lane, best] == FLAT_END else 0
    bits |= 0 if math.isnan(second) else SECOND_MODE
    beaten = c.hints[lane, 0] and best != WARM and not s.values[lane, WARM] > s.values[lane, best] - TIE
    fits.status[row] = bits | (RESTARTED if beaten else 0)
    fits.numbers[row, 0] = s.values[lane, best] - pasts.moments[lane, 0] * math.log(scale)
    fits.numbers[row, 1] = scale * math.sqrt(second)
    c.hints[lane, 0], c.hints[lane, 1] = True, not math.isnan(second)
    quiet = s.fates[lane, FIRST_EXTRA] >= CONVERGED and s.ends[lane, FIRST_EXTRA, ALPHA] < 1e-3
    c.hints[lane, 2] = c.hints[lane, 2] or quiet
    for i in range(COUNT):
        unit = scale if i == C else (scale * scale if i == OMEGA else 1.0)
        c.last[lane, i] = fits.parameters[row, i] = s.ends[lane, best, i] * unit
        if quiet:
            c.quiet[lane, i] = s.ends[lane, FIRST_EXTRA, i]


@compiled
def seek(
    values: np.ndarray, pasts: Pasts, p: Pass, s: Search, c: Chains, rows: Rows, member: Member, lane: int, fits: Fits
) -> None:
    """Move a lane to its next day that can be fitted, taking a new run from the queue where its own has ended."""
    while True:
        if c.at[lane] >= 0:
            c.at[lane] += 1
        if c.at[lane] < 0 or c.at[lane] == rows.begins[c.run[lane] + 1]:
            if c.queue[0] == rows.begins.size - 1:
                c.at[lane] = -1
                return
            c.run[lane] = c.queue[0]
            c.queue[0] += 1
            c.at[lane] = rows.begins[c.run[lane]]
            c.hints[lane, 0] = c.hints[lane, 1] = c.hints[lane, 2] = False
        row = rows.chosen[c.at[lane]]
        if prepare(pasts, lane, values[row], member.mean, member.start, member.skip):
            break
        fits.status[row] = CONSTANT
    for k in range(STARTS):
        s.fates[lane, k] = UNTRIED
    first = next_start(s, lane, c.hints[lane, 0], True)
    set_start(pasts, p, s, c, member, lane, first)


@compiled
def digest(
    values: np.ndarray, pasts: Pasts, p: Pass, s: Search, c: Chains, rows: Rows, member: Member, lane: int, fits: Fits
) -> None:
    """Take a lane one evaluation further: the next point, the next start, or the next day."""
    if s.counts[lane, 4] > 0:
        look_around(s, p, lane, pasts.mean, pasts.variance[lane], member.cap, member.gjr)
        return
    floor = 1e-8 * pasts.variance[lane]
    if receive(s, p, lane, member.free, floor, member.cap):
        number = next_start(s, lane, c.hints[lane, 0], deep_search(c, rows, member, lane))
        if number >= 0:
            set_start(pasts, p, s, c, member, lane, number)
        else:
            keep(pasts, s, c, rows, member, lane, fits)
            seek(values, pasts, p, s, c, rows, member, lane, fits)


@compiled
def fit_rows(
    values: np.ndarray, pasts: Pasts, p: Pass, s: Search, c: Chains, rows: Rows, member: Member, fits: Fits,
    ar: Any, gjr: Any, tails: Any, skew: Any,
) -> None:  # fmt: skip
    """Fit the chosen rows of ``values`` (n, W), raw losses, into ``fits``."""
    for lane in range(WIDTH):
        seek(values, pasts, p, s, c, rows, member, lane, fits)
    busy = True
    while busy:
        for lane in range(WIDTH):
            if c.at[lane] >= 0:
                begin(p, lane, member.start, pasts.fixed[lane], pasts.moments[lane], member.shapes)
        evaluate(p, pasts.x, member.skip, ar, gjr, tails, skew)
        busy = False
        for lane in range(WIDTH):
            if c.at[lane] >= 0:
                digest(values, pasts, p, s, c, rows, member, lane, fits)
                busy = busy or c.at[lane] >= 0
