"""What every likelihood pass shares: its arrays, the terms of a law, the logarithms taken now and then."""

import math
from typing import Any

import numpy as np

from backtest.kernels.compiled import inner
from backtest.kernels.lanes import WIDTH, load, store
from backtest.kernels.laws import CONSTANTS
from backtest.kernels.parameters import COUNT

HALF_LOG_2PI = 0.5 * math.log(2 * math.pi)


VALUE, AFTER, PAD, THETA = 0, 1, 2, 3
GRADIENT = THETA + COUNT
D = GRADIENT + COUNT
LAW = D + COUNT
HESSIAN = LAW + CONSTANTS
DD = HESSIAN + COUNT * COUNT
ROWS = DD + COUNT * COUNT
"""Rows of the array a pass works on, one column a lane: log-likelihood; h of the first day, then of the next; a scratch
row; parameters; gradient; dh of the first day, then of the next; constants of the law; Hessian (upper triangle); d2h of
the first day. One array, since every further one costs seconds of compilation in each kernel it is handed to."""


def aligned(*shape: int) -> np.ndarray:
    """Return zeros whose rows of eight begin on a cache line: a row that straddles two costs twice."""
    size = int(np.prod(shape))
    raw = np.zeros(size + WIDTH)
    offset = -(raw.ctypes.data // raw.itemsize) % WIDTH
    return raw[offset : offset + size].reshape(shape)


def new_pass() -> np.ndarray:
    """Return the array of a pass, (ROWS, lanes)."""
    return aligned(ROWS, WIDTH)


@inner
def even_terms(e: Any, r: Any, q: Any, G: Any, D: Any) -> Any:
    """Return dl/dh, d2l/dh2, dl/de, d2l/de2, d2l/dedh of a law with d log f/dz = -G z and its derivative -G D."""
    gq, er, half = G * q, e * r, 0.5 * G * (1.0 + D)
    return (
        0.5 * (gq - 1.0) * r,
        (0.5 - 0.5 * gq - 0.5 * half * q) * r * r,
        -1.0 * G * er,
        -1.0 * G * D * r,
        half * er * r,
    )


@inner
def skew_terms(z: Any, s: Any, r: Any, slope: Any, bend: Any) -> Any:
    """Return the same five terms from d log f/dz and its derivative at z = e s, s = 1 / sqrt(h)."""
    sz, both = slope * z, slope + z * bend
    return -0.5 * (1.0 + sz) * r, (0.5 + 0.5 * sz + 0.25 * z * both) * r * r, slope * s, bend * r, -0.5 * both * s * r


@inner
def add_logs(p: np.ndarray, product: Any) -> None:
    """Take half the logarithm of each lane of a product of variances off the value."""
    store(p, PAD, product)
    for k in range(WIDTH):
        p[VALUE, k] -= 0.5 * math.log(p[PAD, k])


@inner
def each_log(p: np.ndarray, product: Any) -> Any:
    """Return the logarithm of each lane."""
    store(p, PAD, product)
    for k in range(WIDTH):
        p[PAD, k] = math.log(p[PAD, k])
    return load(p, PAD)
