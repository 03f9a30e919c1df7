"""What a sample says about how well it determines a tail: moments of excesses, the information on a t law."""

import math

import numpy as np

from backtest.kernels.compiled import compiled
from backtest.kernels.student import ETA, LOG_TAU, MODE, SKEW, evaluate, standardise

STEP = 1e-4


@compiled
def excess_moments(samples: np.ndarray, at: np.ndarray, weights: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return the weighted sums (n, L) of (x - at)^+ and of its square over each row of ``samples`` (n, m).

    ``at`` (n, L); ``weights`` (m).
    """
    first, second = np.zeros(at.shape), np.zeros(at.shape)
    for i in range(at.shape[0]):
        for j in range(at.shape[1]):
            a, b = 0.0, 0.0
            for t in range(weights.size):
                excess = max(samples[i, t] - at[i, j], 0.0)
                a += weights[t] * excess
                b += weights[t] * excess * excess
            first[i, j], second[i, j] = a, b
    return first, second


@compiled
def law_information(samples: np.ndarray, laws: np.ndarray, standard: bool) -> tuple[np.ndarray, np.ndarray]:
    """Return the observed information (n, 4, 4) of each law, and laws (n, 4, 2, 4) a ``STEP`` to either side.

    ``samples`` (n, m); ``laws`` (n, 4: mode, scale, nu, lambda). Parameters: mode in units of the scale, log scale,
    1/nu, lambda; of ``standard`` laws (zero mean, unit variance) the last two alone, in the same places, and the laws
    to either side are standard too. Rows of normal laws (nu infinite) hold zeros.
    """
    n, m = samples.shape
    information, sides = np.zeros((n, 4, 4)), np.zeros((n, 4, 2, 4))
    x, at, gradient, hessian = np.empty(m), np.empty(4), np.empty(4), np.empty((4, 4))
    first, second = np.empty((2, 2)), np.empty((2, 2, 2))
    for i in range(n):
        mode, scale = laws[i, 0], laws[i, 1]
        if math.isinf(laws[i, 2]):
            continue
        for t in range(m):
            x[t] = samples[i, t] if standard else (samples[i, t] - mode) / scale
        for a in range(4):
            for side in range(2):
                at[MODE], at[LOG_TAU], at[ETA], at[SKEW] = 0.0, 0.0, 1.0 / laws[i, 2], laws[i, 3]
                at[a] += STEP if side == 1 else -STEP
                if standard:
                    standardise(at, first, second)
                unit = 1.0 if standard else scale
                sides[i, a, side, 0] = unit * at[MODE] + (0.0 if standard else mode)
                sides[i, a, side, 1] = unit * math.exp(at[LOG_TAU])
                sides[i, a, side, 2], sides[i, a, side, 3] = 1.0 / at[ETA], at[SKEW]
        at[MODE], at[LOG_TAU], at[ETA], at[SKEW] = 0.0, 0.0, 1.0 / laws[i, 2], laws[i, 3]
        evaluate(x, at, standard, gradient, hessian)
        for a in range(4):
            for b in range(4):
                information[i, a, b] = -hessian[a, b]
    return information, sides
