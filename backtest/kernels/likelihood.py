"""The likelihood of the GARCH family for eight pasts at once: value, exact gradient and Hessian in one pass.

Derivatives of h follow the same recursion as h (Fiorentini, Calzolari & Panattoni 1996, J. Applied Econometrics 11).
``ar``, ``gjr``, ``tails`` and ``skew`` are None or True: what is None is not compiled. The passes themselves are
written out by ``write_passes.py``; the logarithm is taken once per 32 days, of a product.
"""

from typing import Any

import numpy as np

from backtest.kernels import passes
from backtest.kernels.compiled import in_place
from backtest.kernels.laws import set_constants
from backtest.kernels.parameters import BETA, COUNT, ETA, LAMBDA, MEAN_SQUARE, UNCONDITIONAL
from backtest.kernels.start import first_curvature, first_variance
from backtest.kernels.terms import AFTER, DD, LAW, THETA, VALUE


@in_place
def begin(p: np.ndarray, lane: int, start: int, fixed: float, moments: np.ndarray, tails: Any, skew: Any) -> None:
    """Set one lane's first day: h, its derivatives, and the constants of the law; ``moments`` (lanes, 6 or more)."""
    p[VALUE, lane] = 0.0
    p[AFTER, lane] = first_variance(p, lane, start, fixed, moments)
    if start in (MEAN_SQUARE, UNCONDITIONAL):  # else it stays zero
        for i in range(BETA + 1):
            for j in range(i, BETA + 1):
                p[DD + i * COUNT + j, lane] = first_curvature(i, j, p, lane, start, moments)
    if tails is not None:
        set_constants(p, LAW, lane, p[THETA + ETA, lane], p[THETA + LAMBDA, lane], skew)


@in_place
def evaluate(p: np.ndarray, x: np.ndarray, skip: int, ar: Any, gjr: Any, tails: Any, skew: Any) -> None:
    """Run the pass of the member chosen over the days of ``x`` (W, lanes), after ``begin`` for every lane."""
    if ar is None:
        if gjr is None:
            if tails is None:
                passes.constant_garch_normal(p, x, skip)
            elif skew is None:
                passes.constant_garch_tails(p, x, skip)
            else:
                passes.constant_garch_skew(p, x, skip)
        elif tails is None:
            passes.constant_gjr_normal(p, x, skip)
        elif skew is None:
            passes.constant_gjr_tails(p, x, skip)
        else:
            passes.constant_gjr_skew(p, x, skip)
    elif gjr is None:
        if tails is None:
            passes.ar1_garch_normal(p, x, skip)
        elif skew is None:
            passes.ar1_garch_tails(p, x, skip)
        else:
            passes.ar1_garch_skew(p, x, skip)
    elif tails is None:
        passes.ar1_gjr_normal(p, x, skip)
    elif skew is None:
        passes.ar1_gjr_tails(p, x, skip)
    else:
        passes.ar1_gjr_skew(p, x, skip)
