"""A second, plain GARCH(1,1) likelihood: numpy and loops, no derivatives, complex arguments allowed."""

import numpy as np


def log_likelihood(theta, losses, start, fixed=None, skip=0):
    """Gaussian log-likelihood; theta = (c, phi, omega, alpha, beta); start: fixed, mean-square or unconditional."""
    c, phi, omega, alpha, beta = theta
    x = np.asarray(losses, dtype=float)
    lag = np.concatenate([[0.0], x[:-1]])
    e = (x - c - phi * lag)[skip:]
    before = {"fixed": fixed, "mean-square": np.mean(e * e), "unconditional": omega / (1 - alpha - beta)}[start]
    h, total = omega + (alpha + beta) * before, 0.0
    for t in range(len(e)):
        total += -0.5 * (np.log(2 * np.pi) + np.log(h) + e[t] * e[t] / h)
        h = omega + alpha * e[t] * e[t] + beta * h
    return total
