"""The GARCH family rolled over the pasts of a block: arrays in, fresh arrays out."""

from typing import NamedTuple

import numpy as np

from backtest.kernels.ewma import roll_ewma
from backtest.kernels.filtering import filter_rows
from backtest.kernels.lanes import WIDTH
from backtest.kernels.parameters import (
    ALPHA,
    AR1,
    AR1_NO_INTERCEPT,
    BETA,
    COUNT,
    ETA,
    EWMA_75,
    GAMMA,
    LAMBDA,
    OMEGA,
    PHI,
    UNCONDITIONAL,
    C,
)  # fmt: skip
from backtest.kernels.past import new_pasts
from backtest.kernels.precision import evidence, next_day_spread
from backtest.kernels.rolling import (
    CONSTANT,
    FOUND,
    LOGLIK,
    NOT_CONVERGED,
    RUN_DAYS,
    SECOND_SIGMA,
    Member,
    Rows,
    fit_rows,
    new_chains,
)
from backtest.kernels.search import new_search
from backtest.kernels.terms import aligned, new_pass

LAST_GOOD, AS_EWMA = 64, 128
"""Bits of the status of a fallback, beside those of ``rolling``."""
FALLBACK_DECAY = 0.94


class Rolled(NamedTuple):
    """The family rolled over n pasts of W losses, everything in units of the losses.

    parameters (n, COUNT), NaN where a past was not filtered by them; loglik (n), NaN where not fitted that day;
    second_sigma (n) of a second optimum, NaN where there is none; mean, sigma (n) of the next day; status bits (n);
    residuals (n, W - skip); uncertainty (n, 3): variances of next mean and next sigma and their covariance, as
    ``precision.next_day_spread``, zero where not fitted or not asked for.
    """

    parameters: np.ndarray
    loglik: np.ndarray
    second_sigma: np.ndarray
    mean: np.ndarray
    sigma: np.ndarray
    status: np.ndarray
    residuals: np.ndarray
    uncertainty: np.ndarray


def member(mean: int, start: int, *, gjr: bool = False, shapes: int = 0, every_start: bool = False) -> Member:
    """Return a member: ``shapes`` 0 (normal), 1 (Student t) or 2 (skewed t)."""
    means = ([], [C], [C, PHI], [PHI])[mean]
    free = [*means, OMEGA, ALPHA, *([GAMMA] if gjr else []), BETA, *[ETA, LAMBDA][:shapes]]
    skip = 1 if start == EWMA_75 and mean in (AR1, AR1_NO_INTERCEPT) else 0
    cap = 0.9999 if start == UNCONDITIONAL else 1.0
    return Member(np.array(free, dtype=np.int64), mean, start, shapes, skip, cap, gjr, every_start)


def roll(
    pasts: np.ndarray, places: np.ndarray, refit: np.ndarray, chosen: Member, *, uncertain: bool = False
) -> Rolled:
    """Fit where ``refit`` and filter each row of ``pasts`` (n, W), contiguous, in order of days.

    ``places`` (n) are weekday numbers. A past that does not vary is forecast to repeat its last value, with sigma 0; a
    fit that fails takes the last good parameters of its run of days, else EWMA on the same past; all by status.
    """
    n, W = pasts.shape
    rows = np.flatnonzero(refit)
    edges = np.flatnonzero(np.diff(places[rows] // RUN_DAYS)) + 1
    runs = Rows(rows, np.concatenate([[0], edges, [rows.size]]).astype(np.int64), places)
    found, status = np.full((n, FOUND), np.nan), np.zeros(n, np.int64)
    lanes, work = new_pasts(W), new_pass()
    flags = (chosen.mean in (AR1, AR1_NO_INTERCEPT), chosen.gjr, chosen.shapes > 0, chosen.shapes > 1)
    chosen_law = [True if flag else None for flag in flags]
    fit_rows(pasts, lanes, work, new_search(), new_chains(), runs, chosen, found, status, *chosen_law)
    inherit(found, status, refit, places)
    ahead, residuals = np.full((n, 2), np.nan), np.empty((n, W - chosen.skip))
    filtered = np.flatnonzero(status & (CONSTANT | AS_EWMA) == 0)
    filter_rows(pasts, filtered, found, lanes, work, aligned(W, WIDTH), chosen, residuals, ahead)
    stand_in(pasts, chosen.skip, status, ahead, residuals)
    unused = status & (CONSTANT | AS_EWMA) > 0
    uncertainty = np.zeros((n, 3))
    ahead_of = filtered[ahead[filtered, 1] > 0.0] if uncertain else filtered[:0]
    if ahead_of.size:
        said = evidence(pasts, ahead_of, found, chosen, expected=False)
        uncertainty[ahead_of] = next_day_spread(*said, found[ahead_of, :COUNT], chosen)
    found[unused, :COUNT] = np.nan
    parameters, loglik, second = found[:, :COUNT], found[:, LOGLIK], found[:, SECOND_SIGMA]
    return Rolled(parameters, loglik, second, ahead[:, 0], ahead[:, 1], status, residuals, uncertainty)


def inherit(found: np.ndarray, status: np.ndarray, refit: np.ndarray, places: np.ndarray) -> None:
    """Give each row, in place, the parameters it is filtered by, and its status the fallback taken."""
    run, good, used = -1, -1, -1
    for i in range(len(status)):
        if places[i] // RUN_DAYS != run:
            run, good = places[i] // RUN_DAYS, -1
        if refit[i]:
            if status[i] & NOT_CONVERGED:
                status[i] |= AS_EWMA if good < 0 else LAST_GOOD
                used = good
            elif not status[i] & CONSTANT:
                good = used = i
        elif used < 0:
            status[i] = AS_EWMA
        if used >= 0 and used != i:
            found[i, :COUNT] = found[used, :COUNT]


def stand_in(pasts: np.ndarray, skip: int, status: np.ndarray, ahead: np.ndarray, residuals: np.ndarray) -> None:
    """Forecast what the family could not: constant pasts and, by EWMA, fits that failed."""
    flat = np.isnan(ahead[:, 1]) & (status & AS_EWMA == 0)
    status[flat] = CONSTANT
    ahead[flat, 0], ahead[flat, 1], residuals[flat] = pasts[flat, -1], 0.0, 0.0
    failed = status & AS_EWMA > 0
    if failed.any():
        sigma, full = roll_ewma(np.ascontiguousarray(pasts[failed]), FALLBACK_DECAY)
        ahead[failed, 0], ahead[failed, 1], residuals[failed] = 0.0, sigma, full[:, skip:]


NAMES = {
    C: "intercept",
    PHI: "ar",
    OMEGA: "omega",
    ALPHA: "alpha",
    GAMMA: "gamma",
    BETA: "beta",
    ETA: "eta",
    LAMBDA: "lambda",
}
"""Parameters by their column names."""
