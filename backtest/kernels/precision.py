"""How well a fit knows the next day: variances of next mean and next sigma from the curvature at the optimum."""

from typing import Any

import numpy as np

from backtest.kernels.compiled import compiled
from backtest.kernels.lanes import WIDTH
from backtest.kernels.likelihood import begin, evaluate
from backtest.kernels.parameters import ALPHA, BETA, COUNT, ETA, GAMMA, OMEGA, PHI, C
from backtest.kernels.past import FIXED, SCALE, Pasts, prepare
from backtest.kernels.rolling import Member
from backtest.kernels.search import HIGHEST_ETA, LOWEST_ETA
from backtest.kernels.terms import AFTER, HESSIAN, THETA, D

_BOUND = 1e-9
_FLAT = 1e-6
"""Curvature, relative to that along single parameters, below which a direction says nothing."""


@compiled
def curvature_rows(
    values: np.ndarray, chosen: np.ndarray, parameters: np.ndarray, pasts: Pasts, p: np.ndarray, member: Member,
    curvature: np.ndarray, slopes: np.ndarray, ar: Any, gjr: Any, tails: Any, skew: Any,
) -> None:  # fmt: skip
    """Evaluate the ``chosen`` rows of ``values`` (n, W) at their ``parameters``, in scaled units.

    Fills ``curvature`` (n, COUNT * COUNT, upper triangle of the Hessian) and ``slopes`` (n, COUNT + 3): dh of the next
    day, then its h, the last loss and the scale.
    """
    for base in range(0, chosen.size, WIDTH):
        lanes = min(WIDTH, chosen.size - base)
        for lane in range(lanes):
            row = chosen[base + lane]
            if not prepare(pasts, lane, values[row], member.mean, member.start, member.skip):
                continue
            scale = pasts.facts[lane, SCALE]
            for i in range(COUNT):
                unit = 1.0 / scale if i == C else (1.0 / (scale * scale) if i == OMEGA else 1.0)
                p[THETA + i, lane] = parameters[row, i] * unit
            begin(p, lane, member.start, pasts.facts[lane, FIXED], pasts.facts[lane], member.shapes)
        evaluate(p, pasts.x, member.skip, ar, gjr, tails, skew)
        for lane in range(lanes):
            row = chosen[base + lane]
            for i in range(COUNT * COUNT):
                curvature[row, i] = p[HESSIAN + i, lane]
            for i in range(COUNT):
                slopes[row, i] = p[D + i, lane]
            slopes[row, COUNT] = p[AFTER, lane]
            slopes[row, COUNT + 1] = pasts.x[pasts.x.shape[0] - 1, lane]
            slopes[row, COUNT + 2] = pasts.facts[lane, SCALE]


def next_day_spread(
    curvature: np.ndarray, slopes: np.ndarray, parameters: np.ndarray, free: np.ndarray, cap: float
) -> np.ndarray:
    """Return variances of next mean and next sigma and their covariance (n, 3), in units of the losses.

    The inverse of the negative Hessian, parameters at a bound held there; directions without curvature are left out. It
    is the covariance of maximum likelihood under the law fitted, not made robust against another.
    """
    n = len(curvature)
    upper = curvature.reshape(n, COUNT, COUNT)
    full = np.where(np.triu(np.ones((COUNT, COUNT), bool)), upper, upper.transpose(0, 2, 1))
    information = -full[:, free[:, None], free[None, :]]
    held = _held(parameters, cap)[:, free]
    information[held[:, :, None] | held[:, None, :]] = 0.0
    mean, sigma = np.zeros((n, COUNT)), slopes[:, :COUNT] / (2.0 * np.sqrt(slopes[:, COUNT, None]))
    mean[:, C], mean[:, PHI] = 1.0, slopes[:, COUNT + 1]
    size = np.sqrt(np.maximum(np.einsum("nii->ni", information), 0.0))
    size = np.where(size > 0.0, size, 1.0)
    values, vectors = np.linalg.eigh(information / (size[:, :, None] * size[:, None, :]))
    usable = values > _FLAT
    weight = np.where(usable, 1.0 / np.where(usable, values, 1.0), 0.0)
    a, b = (np.einsum("ni,nij->nj", np.where(held, 0.0, g[:, free] / size), vectors) for g in (mean, sigma))
    sums = [(u * v * weight).sum(axis=1) for u, v in ((a, a), (b, b), (a, b))]
    return np.column_stack(sums) * slopes[:, COUNT + 2, None] ** 2


def _held(parameters: np.ndarray, cap: float) -> np.ndarray:
    """Tell which parameters (n, COUNT) stand at a bound; at the cap of persistence beta is the one held."""
    held = np.zeros(parameters.shape, bool)
    held[:, ALPHA] = parameters[:, ALPHA] <= _BOUND
    held[:, GAMMA] = parameters[:, ALPHA] + parameters[:, GAMMA] <= _BOUND
    total = parameters[:, ALPHA] + 0.5 * parameters[:, GAMMA] + parameters[:, BETA]
    held[:, BETA] = (parameters[:, BETA] <= _BOUND) | (total >= cap - _BOUND)
    held[:, ETA] = (parameters[:, ETA] <= LOWEST_ETA + _BOUND) | (parameters[:, ETA] >= HIGHEST_ETA - _BOUND)
    return held
