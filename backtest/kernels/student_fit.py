"""Fit Student's t and the skewed t to many samples: damped Newton in bounds, warm from row to row, a status each.

Bounds: 0.002 <= 1/nu <= 1/2.05 and |lambda| <= 0.99. A fit that does not converge, which takes a sample most of whose
values are one and the same, falls to the simpler law: skewed t, Student's t, normal.
"""

import math
from typing import NamedTuple

import numpy as np

from backtest.kernels.compiled import compiled
from backtest.kernels.student import ETA, LOG_TAU, MODE, SKEW, evaluate, standardise

LOWEST_ETA, HIGHEST_ETA, LARGEST_SKEW = 0.002, 1.0 / 2.05, 0.99
CONVERGED, NU_CAP, NU_FLOOR, SKEW_BOUND, AS_T, AS_NORMAL = 0, 1, 2, 4, 8, 16
"""Bits of the status of a fit."""

TOLERANCE = 1e-11
"""Predicted gain in log-likelihood below which the step in hand is the last."""
_MOST_STEPS = 100
_NARROWEST = -30.0
"""Log of the scale, the sample's standard deviation being 1, below which the fit has collapsed onto equal values."""
_COLD = (0.03, 0.30)
_CAPS = (2.0, 2.0, 0.15, 0.4)


class Climb(NamedTuple):
    """Work space of one fit; the accepted point with its derivatives, and those of a trial."""

    x: np.ndarray
    at: np.ndarray
    gradient: np.ndarray
    hessian: np.ndarray
    trial: np.ndarray
    trial_gradient: np.ndarray
    trial_hessian: np.ndarray
    step: np.ndarray


@compiled
def accept(climb: Climb) -> None:
    """Make the trial the accepted point."""
    for i in range(4):
        climb.at[i], climb.gradient[i] = climb.trial[i], climb.trial_gradient[i]
        for j in range(4):
            climb.hessian[i, j] = climb.trial_hessian[i, j]


@compiled
def bound(i: int) -> tuple[float, float]:
    """Return the bounds of parameter ``i``."""
    if i == ETA:
        return LOWEST_ETA, HIGHEST_ETA
    return (-LARGEST_SKEW, LARGEST_SKEW) if i == SKEW else (-np.inf, np.inf)


@compiled
def bounds_hit(at: np.ndarray) -> int:
    """Return the bits of the bounds at which a fit ended."""
    bits = NU_CAP if at[ETA] <= LOWEST_ETA else 0
    bits |= NU_FLOOR if at[ETA] >= HIGHEST_ETA else 0
    return bits | (SKEW_BOUND if abs(at[SKEW]) >= LARGEST_SKEW else 0)


@compiled
def find_step(climb: Climb, first: int, last: int, damping: float) -> float:
    """Fill the step in parameters first..last; return its predicted gain, -1 where there is no ascent.

    Cholesky of -H + damping |diag H|, in the parameters that no bound holds.
    """
    g, H, d = climb.gradient, climb.hessian, climb.step
    free, L, n = np.empty(4, np.int64), np.empty((4, 4)), 0
    for i in range(4):
        d[i] = 0.0
        low, high = bound(i)
        held = (climb.at[i] <= low and g[i] <= 0.0) or (climb.at[i] >= high and g[i] >= 0.0)
        if first <= i <= last and not held:
            free[n] = i
            n += 1
    for a in range(n):
        for b in range(a + 1):
            value = -H[free[a], free[b]]
            if a == b:
                value += damping * (abs(value) + 1e-8)
            for c in range(b):
                value -= L[a, c] * L[b, c]
            if a == b:
                if not value > 0.0:
                    return -1.0
                L[a, a] = math.sqrt(value)
            else:
                L[a, b] = value / L[b, b]
    for a in range(n):
        value = g[free[a]]
        for c in range(a):
            value -= L[a, c] * d[free[c]]
        d[free[a]] = value / L[a, a]
    gain = 0.0
    for a in range(n):
        gain += 0.5 * d[free[a]] ** 2
    for a in range(n - 1, -1, -1):
        for c in range(a + 1, n):
            d[free[a]] -= L[c, a] * d[free[c]]
        d[free[a]] /= L[a, a]
    return gain


@compiled
def take_step(climb: Climb) -> bool:
    """Set the trial to the accepted point plus the step, capped and kept in bounds; return whether it was shortened."""
    length, short = 1.0, False
    for i in range(4):
        cap = _CAPS[i] * math.exp(climb.at[LOG_TAU]) if i == MODE else _CAPS[i]
        if abs(climb.step[i]) * length > cap:
            length, short = cap / abs(climb.step[i]), True
    for i in range(4):
        low, high = bound(i)
        aim = climb.at[i] + length * climb.step[i]
        climb.trial[i] = min(max(aim, low), high)
        short = short or climb.trial[i] != aim
    return short


@compiled
def ascend(climb: Climb, standard: bool, last: int) -> float:
    """Climb from the trial point in the shape, up to parameter ``last``, and in location and scale unless standard.

    Returns the log-likelihood, -infinity where the climb did not converge.
    """
    first = ETA if standard else MODE
    value, damping = evaluate(climb.x, climb.trial, standard, climb.trial_gradient, climb.trial_hessian), 0.0
    accept(climb)
    for _ in range(_MOST_STEPS):
        if not math.isfinite(value) or climb.at[LOG_TAU] < _NARROWEST or damping > 1e12:
            break
        gain = find_step(climb, first, last, damping)
        if gain < 0.0:
            damping = max(10.0 * damping, 1e-3)
            continue
        short = take_step(climb)
        if gain < TOLERANCE and damping < 1e-2 and not short:
            for i in range(4):
                climb.at[i] = climb.trial[i]
            return value + gain
        found = evaluate(climb.x, climb.trial, standard, climb.trial_gradient, climb.trial_hessian)
        if found >= value - 1e-10:
            value = found
            accept(climb)
            damping = 0.1 * damping if damping > 1e-6 else 0.0
        else:
            damping = max(10.0 * damping, 1e-3)
    return -np.inf


@compiled
def fit_row(climb: Climb, standard: bool, skewed: bool, kept: np.ndarray) -> int:
    """Fit warm from ``kept`` (4, NaN in front where there is none), and cold where that ends badly or at a bound.

    Cold is Student's t from two shapes, then the skewed t from there. Leaves the best in ``kept``, returns its status.
    """
    best, status = -np.inf, AS_NORMAL
    for stage in range(4):
        top = SKEW if skewed and stage in (0, 3) else ETA
        if stage in (1, 2):
            if stage == 1 and best > -np.inf and not bounds_hit(kept):
                break
            eta = _COLD[stage - 1]
            climb.trial[MODE], climb.trial[LOG_TAU] = 0.0, 0.5 * math.log(1.0 - 2.0 * eta)
            climb.trial[ETA], climb.trial[SKEW] = eta, 0.0
        elif math.isnan(kept[0]) or (stage == 3 and not skewed):
            continue
        else:
            for i in range(4):
                climb.trial[i] = kept[i]
        value = ascend(climb, standard, top)
        if value > best + 1e-8 or (status == AS_T and top == SKEW and value > -np.inf):
            best, status = value, AS_T if skewed and top == ETA else CONVERGED
            for i in range(4):
                kept[i] = climb.at[i]
    return status


@compiled
def load(climb: Climb, sample: np.ndarray, standard: bool, frame: np.ndarray) -> None:
    """Copy a sample into the work space; unless it is standard, less its mean and over its deviation: ``frame`` (2)."""
    n, mean, square = sample.size, 0.0, 0.0
    for t in range(n):
        mean += sample[t]
    mean /= n
    for t in range(n):
        square += (sample[t] - mean) ** 2
    frame[0], frame[1] = 0.0, 1.0
    if not standard:
        frame[0], frame[1] = mean, math.sqrt(square / n)
    for t in range(n):
        climb.x[t] = (sample[t] - frame[0]) / frame[1] if frame[1] > 0.0 else 0.0


@compiled
def roll_student(
    samples: np.ndarray, given: np.ndarray, standard: bool, skewed: bool, places: np.ndarray, run_days: int
) -> tuple[np.ndarray, np.ndarray]:
    """Fit a law to each row of ``samples`` (n, m), or take over the shape ``given`` (n, 2: nu, lambda) where not NaN.

    ``standard`` fits the shape alone, of a law with zero mean and unit variance; else location and scale too. Returns
    laws (n, 4: mode, scale, nu, lambda; nu infinite for the normal law, then mean and deviation) and status bits (n).
    """
    n, m = samples.shape
    climb = Climb(
        np.empty(m), np.empty(4), np.empty(4), np.empty((4, 4)), np.empty(4), np.empty(4), np.empty((4, 4)), np.empty(4)
    )
    laws, status = np.empty((n, 4)), np.empty(n, np.int64)
    kept, frame, first, second = np.empty(4), np.empty(2), np.empty((2, 2)), np.empty((2, 2, 2))
    for i in range(n):
        load(climb, samples[i], standard, frame)
        if i == 0 or places[i] // run_days != places[i - 1] // run_days:
            kept[0] = np.nan
        status[i] = CONVERGED
        if not math.isnan(given[i, 0]):
            kept[ETA], kept[SKEW] = 1.0 / given[i, 0], given[i, 1] if skewed else 0.0
        elif frame[1] > 0.0:
            status[i] = fit_row(climb, standard, skewed, kept)
        else:
            status[i] = AS_NORMAL
        if status[i] == AS_NORMAL:
            kept[0] = np.nan
            laws[i, 0], laws[i, 1], laws[i, 2], laws[i, 3] = frame[0], frame[1], np.inf, 0.0
            continue
        if standard:
            standardise(kept, first, second)
        if math.isnan(given[i, 0]):
            status[i] |= bounds_hit(kept)
        laws[i, 0], laws[i, 1] = frame[0] + frame[1] * kept[MODE], frame[1] * math.exp(kept[LOG_TAU])
        laws[i, 2], laws[i, 3] = 1.0 / kept[ETA], kept[SKEW]
    return laws, status
