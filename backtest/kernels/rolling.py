"""The GARCH family rolled over many pasts, eight at a time: warm from day to day, several starts, a status per day.

A run of RUN_DAYS weekday numbers is one chain: its first fit starts cold, so that no result depends on where a pass
began. Lanes take runs from a queue and never wait for each other.
"""

import math
from typing import Any, NamedTuple

import numpy as np

from backtest.kernels.compiled import in_place, inner
from backtest.kernels.lanes import WIDTH
from backtest.kernels.likelihood import begin, evaluate
from backtest.kernels.parameters import ALPHA, BETA, COUNT, GAMMA, OMEGA, C
from backtest.kernels.past import FIXED, MOMENTS, SCALE, VARIANCE, Pasts, prepare
from backtest.kernels.quadratic import constrained_step
from backtest.kernels.search import (
    ACCEPTED,
    CONVERGED,
    END_AFTER,
    END_VALUE,
    FAILED,
    FATES,
    FIRST_EXTRA,
    FLAT_END,
    GRID,
    GRID_PLACE,
    STARTS,
    UNTRIED,
    WARM,
    Search,
    begin_start,
    go_on,
    look_around,
    pose,
    receive,
    turn,
)
from backtest.kernels.terms import THETA

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


LOGLIK, SECOND_SIGMA, FOUND = COUNT, COUNT + 1, COUNT + 2
"""Columns of what is found, after the parameters; units of the losses, NaN where nothing is."""


class Chains(NamedTuple):
    """What each lane carries along its run."""

    where: np.ndarray  # (lanes, 5): run in hand, position in ``chosen`` (-1: idle), hints: see WARM_HINT
    queue: np.ndarray  # (1,) next run to take
    points: np.ndarray  # (lanes, 2, COUNT) last good parameters, units of the losses; where the optimum without
    # reaction was last found, scaled units


RUN, AT, WARM_HINT, BESIDE, QUIET = range(5)
"""Columns of ``where``; hints: a fit may start warm, a second mode was near, an optimum without reaction is known."""


def new_chains() -> Chains:
    """Return eight idle chains."""
    return Chains(np.full((WIDTH, 5), -1), np.zeros(1, np.int64), np.zeros((WIDTH, 2, COUNT)))


@inner
def distinct(s: Search, lane: int, k: int, other: int) -> bool:
    """Tell whether two ends are different optima: their next variances differ by more than a thousandth."""
    return bool(abs(s.ends[lane, k, END_AFTER] / s.ends[lane, other, END_AFTER] - 1.0) > 1e-3)


@inner
def best_end(s: Search, lane: int) -> int:
    """Return the converged end of the highest likelihood, -1 if none.

    Of different optima within TIE the one with the larger next variance; of two ends at the same optimum the first, so
    that rounding does not choose.
    """
    best = -1
    for k in range(STARTS):
        if s.counts[lane, FATES + k] < CONVERGED:
            continue
        lead = s.ends[lane, k, END_VALUE] - s.ends[lane, best, END_VALUE] if best >= 0 else np.inf
        wider = best >= 0 and s.ends[lane, k, END_AFTER] > s.ends[lane, best, END_AFTER]
        if lead > TIE or (lead > -TIE and wider and distinct(s, lane, k, best)):
            best = k
    return best


@inner
def next_start(s: Search, lane: int, warm: bool, deep: bool) -> int:
    """Return the number of the start to follow next, or -1; ``deep`` asks for every start."""
    counts = s.counts
    if warm and counts[lane, FATES + WARM] == UNTRIED:
        return WARM
    if (deep or not warm or counts[lane, FATES + WARM] == FAILED) and counts[lane, FATES + GRID] == UNTRIED:
        return GRID
    best = best_end(s, lane)
    if not deep and best >= 0 and counts[lane, FATES + best] == CONVERGED:
        reaction = s.ends[lane, best, ALPHA] + 0.5 * s.ends[lane, best, GAMMA]
        if reaction >= 0.03:
            return -1
    for k in range(FIRST_EXTRA, STARTS):
        if counts[lane, FATES + k] == UNTRIED:
            return k
    return -1


@inner
def second_variance(s: Search, lane: int, best: int) -> float:
    """Return the next variance of the best other optimum within MODE_GAP, or NaN where there is none."""
    found, value = np.nan, s.ends[lane, best, END_VALUE] - MODE_GAP
    for k in range(STARTS):
        if s.counts[lane, FATES + k] >= CONVERGED and s.ends[lane, k, END_VALUE] > value and distinct(s, lane, k, best):
            found, value = s.ends[lane, k, END_AFTER], s.ends[lane, k, END_VALUE]
    return found


@inner
def set_start(pasts: Pasts, p: np.ndarray, s: Search, c: Chains, member: Member, lane: int, number: int) -> None:
    """Put the first point of start ``number`` into the pass."""
    begin_start(s, p, lane, number, pasts.facts, pasts.facts[lane, VARIANCE], member.cap, member.gjr)
    scale = pasts.facts[lane, SCALE]
    for i in range(COUNT):
        if number == WARM:
            unit = 1.0 / scale if i == C else (1.0 / (scale * scale) if i == OMEGA else 1.0)
            p[THETA + i, lane] = c.points[lane, 0, i] * unit
        elif number == FIRST_EXTRA and c.where[lane, QUIET]:
            p[THETA + i, lane] = c.points[lane, 1, i]
    p[THETA + OMEGA, lane] = max(p[THETA + OMEGA, lane], 1e-8 * pasts.facts[lane, VARIANCE])


@inner
def deep_search(c: Chains, rows: Rows, member: Member, lane: int) -> bool:
    """Tell whether this day asks for every start: a cold one, every eighth, one beside a second mode, or an audit."""
    eighth = rows.places[rows.chosen[c.where[lane, AT]]] % 8 == 0
    return bool(member.every_start or not c.where[lane, WARM_HINT] or c.where[lane, BESIDE] or eighth)


@inner
def keep(
    pasts: Pasts, s: Search, c: Chains, rows: Rows, member: Member, lane: int, found: np.ndarray, status: np.ndarray
) -> None:
    """Write the winner of a day's search and what the next day starts from."""
    row, best, scale = rows.chosen[c.where[lane, AT]], best_end(s, lane), pasts.facts[lane, SCALE]
    if best < 0:
        status[row] = NOT_CONVERGED
        return
    second = second_variance(s, lane, best)
    reaction = s.ends[lane, best, ALPHA] + max(s.ends[lane, best, GAMMA], 0.0)
    total = s.ends[lane, best, ALPHA] + 0.5 * s.ends[lane, best, GAMMA] + s.ends[lane, best, BETA]
    bits = BOUND_REACTION if reaction <= 1e-9 else 0
    bits |= BOUND_PERSISTENCE if total >= member.cap - 1e-9 else 0
    bits |= FLAT if s.counts[lane, FATES + best] == FLAT_END else 0
    bits |= 0 if math.isnan(second) else SECOND_MODE
    beaten = (
        c.where[lane, WARM_HINT]
        and best != WARM
        and not s.ends[lane, WARM, END_VALUE] > s.ends[lane, best, END_VALUE] - TIE
    )
    status[row] = bits | (RESTARTED if beaten else 0)
    found[row, LOGLIK] = s.ends[lane, best, END_VALUE] - pasts.facts[lane, MOMENTS] * math.log(scale)
    found[row, SECOND_SIGMA] = scale * math.sqrt(second)
    c.where[lane, WARM_HINT], c.where[lane, BESIDE] = True, not math.isnan(second)
    quiet = s.counts[lane, FATES + FIRST_EXTRA] >= CONVERGED and s.ends[lane, FIRST_EXTRA, ALPHA] < 1e-3
    c.where[lane, QUIET] = c.where[lane, QUIET] or quiet
    for i in range(COUNT):
        unit = scale if i == C else (scale * scale if i == OMEGA else 1.0)
        c.points[lane, 0, i] = found[row, i] = s.ends[lane, best, i] * unit
        if quiet:
            c.points[lane, 1, i] = s.ends[lane, FIRST_EXTRA, i]


@inner
def seek(
    values: np.ndarray, pasts: Pasts, p: np.ndarray, s: Search, c: Chains, rows: Rows, member: Member, lane: int,
    status: np.ndarray,
) -> None:  # fmt: skip
    """Move a lane to its next day that can be fitted, taking a new run from the queue where its own has ended."""
    while True:
        if c.where[lane, AT] >= 0:
            c.where[lane, AT] += 1
        if c.where[lane, AT] < 0 or c.where[lane, AT] == rows.begins[c.where[lane, RUN] + 1]:
            if c.queue[0] == rows.begins.size - 1:
                c.where[lane, AT] = -1
                return
            c.where[lane, RUN] = c.queue[0]
            c.queue[0] += 1
            c.where[lane, AT] = rows.begins[c.where[lane, RUN]]
            c.where[lane, WARM_HINT] = c.where[lane, BESIDE] = c.where[lane, QUIET] = False
        row = rows.chosen[c.where[lane, AT]]
        if prepare(pasts, lane, values[row], member.mean, member.start, member.skip):
            break
        status[row] = CONSTANT
    for k in range(STARTS):
        s.counts[lane, FATES + k] = UNTRIED
    warm = c.where[lane, WARM_HINT] > 0
    set_start(pasts, p, s, c, member, lane, next_start(s, lane, warm, warm))


@inner
def move_on(
    values: np.ndarray, pasts: Pasts, p: np.ndarray, s: Search, c: Chains, rows: Rows, member: Member, lane: int,
    found: np.ndarray, status: np.ndarray,
) -> None:  # fmt: skip
    """Take a lane whose start has ended to the next start, or to the next day."""
    number = next_start(s, lane, c.where[lane, WARM_HINT] > 0, deep_search(c, rows, member, lane))
    if number >= 0:
        set_start(pasts, p, s, c, member, lane, number)
    else:
        keep(pasts, s, c, rows, member, lane, found, status)
        seek(values, pasts, p, s, c, rows, member, lane, status)


@in_place
def fit_rows(
    values: np.ndarray, pasts: Pasts, p: np.ndarray, s: Search, c: Chains, rows: Rows, member: Member,
    found: np.ndarray, status: np.ndarray,
    ar: Any, gjr: Any, tails: Any, skew: Any,
) -> None:  # fmt: skip
    """Fit the chosen rows of ``values`` (n, W), raw losses, into ``found`` (n, FOUND) and ``status``.

    One long function: what it calls is compiled by itself and here, and would be again at every level between.
    """
    for lane in range(WIDTH):
        seek(values, pasts, p, s, c, rows, member, lane, status)
    busy = True
    while busy:
        for lane in range(WIDTH):  # idle ones too: going on from where they were they would fade into slow subnormals
            begin(p, lane, member.start, pasts.facts[lane, FIXED], pasts.facts, tails, skew)
        evaluate(p, pasts.x, member.skip, ar, gjr, tails, skew)
        busy = False
        for lane in range(WIDTH):
            if c.where[lane, AT] < 0:
                continue
            busy, floor = True, 1e-8 * pasts.facts[lane, VARIANCE]
            if s.counts[lane, GRID_PLACE] > 0:
                look_around(s, p, lane, pasts.facts, pasts.facts[lane, VARIANCE], member.cap, member.gjr)
                continue
            fate = receive(s, p, lane)
            if fate == ACCEPTED:
                pose(s, p, lane, member.free, floor, member.cap)
                fate = turn(s, lane, member.free, floor, constrained_step(s.sheet, member.free.size))
            go_on(s, p, lane, fate, floor, member.cap)
            if fate != UNTRIED:
                move_on(values, pasts, p, s, c, rows, member, lane, found, status)
