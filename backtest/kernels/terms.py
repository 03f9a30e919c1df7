"""What every likelihood pass shares: its arrays, the terms of a law, the logarithms taken now and then."""

import math
from typing import Any, NamedTuple

import numpy as np

from backtest.kernels.compiled import compiled
from backtest.kernels.lanes import WIDTH, load, store
from backtest.kernels.laws import CONSTANTS
from backtest.kernels.parameters import COUNT

HALF_LOG_2PI = 0.5 * math.log(2 * math.pi)


class Pass(NamedTuple):
    """What a pass works on and leaves, one column a lane."""

    theta: np.ndarray  # (COUNT, lanes)
    value: np.ndarray  # (1, lanes) log-likelihood
    after: np.ndarray  # (1, lanes) h of the first day, then of the next
    gradient: np.ndarray  # (COUNT, lanes)
    hessian: np.ndarray  # (COUNT * COUNT, lanes), upper triangle
    d: np.ndarray  # (COUNT, lanes) dh of the first day, then of the next
    dd: np.ndarray  # (COUNT * COUNT, lanes) d2h of the first day
    law: np.ndarray  # (CONSTANTS, lanes)
    pad: np.ndarray  # (1, lanes)


def aligned(*shape: int) -> np.ndarray:
    """Return zeros whose rows of eight begin on a cache line: a row that straddles two costs twice."""
    size = int(np.prod(shape))
    raw = np.zeros(size + WIDTH)
    offset = -(raw.ctypes.data // raw.itemsize) % WIDTH
    return raw[offset : offset + size].reshape(shape)


def new_pass() -> Pass:
    """Return the arrays of a pass."""
    square = COUNT * COUNT
    return Pass(*(aligned(n, WIDTH) for n in (COUNT, 1, 1, COUNT, square, COUNT, square, CONSTANTS, 1)))


@compiled
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


@compiled
def skew_terms(z: Any, s: Any, r: Any, slope: Any, bend: Any) -> Any:
    """Return the same five terms from d log f/dz and its derivative at z = e s, s = 1 / sqrt(h)."""
    sz, both = slope * z, slope + z * bend
    return -0.5 * (1.0 + sz) * r, (0.5 + 0.5 * sz + 0.25 * z * both) * r * r, slope * s, bend * r, -0.5 * both * s * r


@compiled
def add_logs(p: Pass, product: Any) -> None:
    """Take half the logarithm of each lane of a product of variances off the value."""
    store(p.pad, 0, product)
    for k in range(WIDTH):
        p.value[0, k] -= 0.5 * math.log(p.pad[0, k])


@compiled
def each_log(p: Pass, product: Any) -> Any:
    """Return the logarithm of each lane."""
    store(p.pad, 0, product)
    for k in range(WIDTH):
        p.pad[0, k] = math.log(p.pad[0, k])
    return load(p.pad, 0)
