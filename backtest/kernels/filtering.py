"""The GARCH filter at given parameters, eight pasts at a time: residuals, and the next day's mean and deviation."""

import numpy as np

from backtest.kernels.compiled import in_place, inner
from backtest.kernels.lanes import WIDTH, load, spread, square_root, store, where_positive
from backtest.kernels.parameters import ALPHA, BETA, COUNT, GAMMA, OMEGA, PHI, C
from backtest.kernels.past import FIXED, SCALE, Pasts, prepare
from backtest.kernels.rolling import Member
from backtest.kernels.start import first_variance
from backtest.kernels.terms import AFTER, THETA, VALUE


@inner
def filter_lanes(p: np.ndarray, x: np.ndarray, skip: int, residuals: np.ndarray) -> None:
    """Filter eight pasts (W, lanes) into ``residuals``, from row ``skip``; value: next mean, after: next variance."""
    c, phi, omega = load(p, THETA + C), load(p, THETA + PHI), load(p, THETA + OMEGA)
    alpha, gamma, beta = load(p, THETA + ALPHA), load(p, THETA + GAMMA), load(p, THETA + BETA)
    zero, h = spread(0.0), load(p, AFTER)
    lag = load(x, 0) if skip else zero
    for t in range(skip, x.shape[0]):
        now = load(x, t)
        e = now - c - phi * lag
        store(residuals, t, e / square_root(h))
        square = e * e
        h = omega + alpha * square + gamma * where_positive(e, square, zero) + beta * h
        lag = now
    store(p, VALUE, c + phi * lag)
    store(p, AFTER, h)


@in_place
def filter_rows(
    values: np.ndarray, chosen: np.ndarray, parameters: np.ndarray, pasts: Pasts, p: np.ndarray, pad: np.ndarray,
    member: Member, residuals: np.ndarray, ahead: np.ndarray,
) -> None:  # fmt: skip
    """Filter the ``chosen`` rows of ``values`` (n, W) by ``parameters`` (n, COUNT), units of the losses.

    Fills ``residuals`` (n, W - skip) and ``ahead`` (n, 2): the next day's mean and standard deviation, NaN for a past
    that does not vary.
    """
    skip = member.skip
    for base in range(0, chosen.size, WIDTH):
        lanes = min(WIDTH, chosen.size - base)
        for lane in range(lanes):
            row = chosen[base + lane]
            varies = prepare(pasts, lane, values[row], member.mean, member.start, skip)
            if not varies:
                p[AFTER, lane] = np.nan
                continue
            scale = pasts.facts[lane, SCALE]
            for i in range(COUNT):
                unit = 1.0 / scale if i == C else (1.0 / (scale * scale) if i == OMEGA else 1.0)
                p[THETA + i, lane] = parameters[row, i] * unit
            p[AFTER, lane] = first_variance(p, lane, member.start, pasts.facts[lane, FIXED], pasts.facts)
        filter_lanes(p, pasts.x, skip, pad)
        for lane in range(lanes):
            row, scale = chosen[base + lane], pasts.facts[lane, SCALE]
            for t in range(skip, pad.shape[0]):
                residuals[row, t - skip] = pad[t, lane]
            ahead[row, 0], ahead[row, 1] = scale * p[VALUE, lane], scale * np.sqrt(p[AFTER, lane])
