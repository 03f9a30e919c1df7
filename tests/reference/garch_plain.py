"""A second, plain likelihood of the GARCH family: numpy and loops, no derivatives, complex arguments allowed."""

import numpy as np
from scipy.special import loggamma

C, PHI, OMEGA, ALPHA, GAMMA, BETA, ETA, LAMBDA = range(8)


def log_density(z, law, eta, lam):
    """Log density of a unit-variance residual (Hansen 1994 for the skewed t); works for complex arguments."""
    if law == "normal":
        return -0.5 * np.log(2 * np.pi) - 0.5 * z * z
    nu = 1 / eta
    log_c = loggamma((nu + 1) / 2) - loggamma(nu / 2) - 0.5 * np.log(np.pi * (nu - 2))
    if law == "tails":
        return log_c - (nu + 1) / 2 * np.log(1 + z * z / (nu - 2))
    a = 4 * lam * np.exp(log_c) * (nu - 2) / (nu - 1)
    b = np.sqrt(1 + 3 * lam * lam - a * a)
    side = 1 + lam if (z + a / b).real > 0 else 1 - lam
    y = (b * z + a) / side
    return np.log(b) + log_c - (nu + 1) / 2 * np.log(1 + y * y / (nu - 2))


def log_likelihood(theta, losses, start, fixed=None, skip=0, law="normal"):
    """Log-likelihood; start: fixed, mean-square or unconditional."""
    eta, lam = theta[6:]
    return sum(
        log_density(e / np.sqrt(h), law, eta, lam) - 0.5 * np.log(h)
        for e, h in filtered(theta, losses, start, fixed, skip)
    )


def filtered(theta, losses, start, fixed=None, skip=0):
    """Residual and its variance, day by day; start as of ``log_likelihood``."""
    c, phi, omega, alpha, gamma, beta = theta[:6]
    x = np.asarray(losses, dtype=float)
    lag = np.concatenate([[0.0], x[:-1]])
    e = (x - c - phi * lag)[skip:]
    persistence = alpha + gamma / 2 + beta
    before = {"fixed": fixed, "mean-square": np.mean(e * e), "unconditional": omega / (1 - persistence)}[start]
    h, days = omega + persistence * before, []
    for value in e:
        days.append((value, h))
        h = omega + (alpha + gamma * (value.real > 0)) * value * value + beta * h
    return days
