"""How well a fit knows its parameters and the next day: standard errors from curvature and scores at the optimum.

By name, with H the negative Hessian of the log-likelihood, S the outer product of the daily scores, I the information
expected by Gaussian likelihood (its block of mean by variance parameters is zero where h is even in the residual, Engle
1982; with gamma it is not): hessian H^-1; opg S^-1 (Berndt, Hall, Hall & Hausman 1974); information I^-1;
bollerslev-wooldridge I^-1 S I^-1 (Bollerslev & Wooldridge 1992, Econometric Reviews 11); sandwich H^-1 S H^-1 (White
1982, Econometrica 50). The first three hold where the law fitted is the true one; the last two hold for Gaussian quasi
likelihood whatever the law, if its fourth moment exists.
"""

from collections.abc import Mapping
from typing import Any

import numpy as np

from backtest.kernels.compiled import in_place
from backtest.kernels.lanes import WIDTH
from backtest.kernels.likelihood import begin, evaluate
from backtest.kernels.parameters import ALPHA, BETA, COUNT, ETA, GAMMA, OMEGA, PHI, C
from backtest.kernels.past import FIXED, SCALE, Pasts, new_pasts, prepare
from backtest.kernels.rolling import Member
from backtest.kernels.scores import EXPECTED, OUTER, add_scores, new_scored_pass
from backtest.kernels.search import HIGHEST_ETA, LOWEST_ETA
from backtest.kernels.terms import AFTER, HESSIAN, THETA, D

_BOUND = 1e-9
_FLAT = 1e-6
"""Curvature, relative to that along single parameters, below which a direction says nothing."""
_MEANS = [C, PHI]


@in_place
def curvature_rows(
    values: np.ndarray, chosen: np.ndarray, parameters: np.ndarray, pasts: Pasts, p: np.ndarray, member: Member,
    sums: np.ndarray, slopes: np.ndarray, ar: Any, gjr: Any, tails: Any, skew: Any, expected: Any,
) -> None:  # fmt: skip
    """Evaluate the ``chosen`` rows of ``values`` (n, W) at their ``parameters``, in scaled units.

    Fills ``sums`` (n, 3 * COUNT * COUNT: upper triangles of the Hessian and, of the normal law alone, of the scores'
    outer product and the expected information) and ``slopes`` (n, COUNT + 3): dh of the next day, then its h, the last
    loss and the scale. ``p``: a scored pass.
    """
    block = COUNT * COUNT
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
            begin(p, lane, member.start, pasts.facts[lane, FIXED], pasts.facts, tails, skew)
        if tails is None:
            add_scores(p, pasts.x, member.skip, member.free, expected)
        evaluate(p, pasts.x, member.skip, ar, gjr, tails, skew)
        for lane in range(lanes):
            row = chosen[base + lane]
            for i in range(block):
                sums[row, i] = p[HESSIAN + i, lane]
                if tails is None:
                    sums[row, block + i], sums[row, 2 * block + i] = p[OUTER + i, lane], p[EXPECTED + i, lane]
            for i in range(COUNT):
                slopes[row, i] = p[D + i, lane]
            slopes[row, COUNT] = p[AFTER, lane]
            slopes[row, COUNT + 1] = pasts.x[pasts.x.shape[0] - 1, lane]
            slopes[row, COUNT + 2] = pasts.facts[lane, SCALE]


def evidence(
    pasts: np.ndarray, rows: np.ndarray, parameters: np.ndarray, member: Member, *, expected: bool = True
) -> tuple[dict[str, np.ndarray], np.ndarray]:
    """Return what ``rows`` of ``pasts`` (n, W) say at their ``parameters`` (n, columns from COUNT up), both contiguous.

    Matrices (rows, free, free) by name: hessian (negative) and, of the normal law alone, opg and (where ``expected``)
    information; slopes (rows, COUNT + 3), as ``curvature_rows`` fills them; all in the scaled units of each past.
    """
    n, free = len(pasts), member.free
    sums, slopes = np.zeros((n, 3 * COUNT * COUNT)), np.ones((n, COUNT + 3))
    law = [True if f else None for f in (PHI in free, member.gjr, member.shapes > 0, member.shapes > 1, expected)]
    lanes = new_pasts(pasts.shape[1])
    curvature_rows(pasts, rows, parameters, lanes, new_scored_pass(), member, sums, slopes, *law)
    upper = sums[rows].reshape(len(rows), 3, COUNT, COUNT)
    full = np.where(np.triu(np.ones((COUNT, COUNT), bool)), upper, upper.swapaxes(2, 3))
    if not member.gjr:
        full[:, 2, _MEANS, OMEGA:] = full[:, 2, OMEGA:, _MEANS] = 0.0
    matrices = full[:, :, free[:, None], free[None, :]]
    names = ("opg", "information")[: 1 + expected] if member.shapes == 0 else ()
    return {"hessian": -matrices[:, 0], **{name: matrices[:, i] for i, name in enumerate(names, 1)}}, slopes[rows]


def next_day_spread(
    matrices: Mapping[str, np.ndarray], slopes: np.ndarray, parameters: np.ndarray, member: Member
) -> np.ndarray:
    """Return variances of next mean and next sigma and their covariance (n, 3), in units of the losses.

    Delta method on ``evidence``. Normal law: the sandwich, since losses are not normal. Student t and skewed t: the
    inverse Hessian alone, right where the law fitted is the true one. Parameters at a bound are held there; directions
    without curvature are left out.
    """
    n, free = len(slopes), member.free
    fixed = held(parameters, member.cap)[:, free]
    mean, sigma = np.zeros((n, COUNT)), slopes[:, :COUNT] / (2.0 * np.sqrt(slopes[:, COUNT, None]))
    mean[:, C], mean[:, PHI] = 1.0, slopes[:, COUNT + 1]
    ways = np.where(fixed[:, None], 0.0, np.stack([mean, sigma], axis=1)[:, :, free])
    inverse, _ = invert(matrices["hessian"], fixed)
    moved = ways @ inverse
    middle = matrices.get("opg", matrices["hessian"])
    covariance = moved @ middle @ moved.swapaxes(1, 2)
    return np.column_stack([covariance[:, 0, 0], covariance[:, 1, 1], covariance[:, 0, 1]]) * slopes[:, -1:] ** 2


def covariances(matrices: Mapping[str, np.ndarray], fixed: np.ndarray) -> dict[str, np.ndarray]:
    """Return the covariances of the parameters (n, free, free) by name, in scaled units, zero where ``fixed``.

    NaN for a past in which a direction has no curvature. The names ``evidence`` allows: of t laws the Hessian alone.
    """
    inverses = {}
    for name, matrix in matrices.items():
        inverse, regular = invert(matrix, fixed)
        inverses[name] = np.where(regular[:, None, None], inverse, np.nan)
    if "opg" not in matrices:
        return inverses
    between = {"bollerslev-wooldridge": inverses["information"], "sandwich": inverses["hessian"]}
    return inverses | {name: bread @ matrices["opg"] @ bread for name, bread in between.items()}


def invert(matrices: np.ndarray, fixed: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return the inverse (n, k, k) over the parameters not ``fixed`` (n, k), and whether each direction had curvature.

    Directions without are left out of the inverse; rows and columns of fixed parameters are zero.
    """
    kept = np.where(fixed[:, :, None] | fixed[:, None, :], 0.0, matrices)
    size = np.sqrt(np.maximum(np.einsum("nii->ni", kept), 0.0))
    size = np.where(size > 0.0, size, 1.0)
    unit = size[:, :, None] * size[:, None, :]
    values, vectors = np.linalg.eigh(kept / unit)
    usable = values > _FLAT
    weight = np.where(usable, 1.0 / np.where(usable, values, 1.0), 0.0)
    inverse: np.ndarray = (vectors * weight[:, None, :]) @ vectors.swapaxes(1, 2) / unit
    return inverse, usable.sum(axis=1) == (~fixed).sum(axis=1)


def held(parameters: np.ndarray, cap: float) -> np.ndarray:
    """Tell which parameters (n, COUNT) stand at a bound; at the cap of persistence beta is the one held."""
    out = np.zeros(parameters.shape, bool)
    out[:, ALPHA] = parameters[:, ALPHA] <= _BOUND
    out[:, GAMMA] = parameters[:, ALPHA] + parameters[:, GAMMA] <= _BOUND
    total = parameters[:, ALPHA] + 0.5 * parameters[:, GAMMA] + parameters[:, BETA]
    out[:, BETA] = (parameters[:, BETA] <= _BOUND) | (total >= cap - _BOUND)
    out[:, ETA] = (parameters[:, ETA] <= LOWEST_ETA + _BOUND) | (parameters[:, ETA] >= HIGHEST_ETA - _BOUND)
    return out
