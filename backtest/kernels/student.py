"""Student's t and its two-piece form in one pass: log-likelihood, gradient and Hessian.

Density at x: exp(G(eta)) / tau (1 + eta r^2)^(-(1 + 1/eta)/2), eta = 1/nu, r = (x - m) / (tau (1 + lambda)) from the
mode m upwards, (x - m) / (tau (1 - lambda)) below it. lambda = 0 is Student's t; in location and scale this is the
skewed t of Hansen (1994, International Economic Review 35), skewed to the right where lambda > 0. Parameters in the
order (m, log tau, eta, lambda); of a law held to zero mean and unit variance, the last two determine the others.
"""

import math

import numpy as np

from backtest.kernels.compiled import compiled, in_place

MODE, LOG_TAU, ETA, SKEW = range(4)

_LOG_4 = math.log(4.0)
_LOG_PI = math.log(math.pi)
_LARGE = 1e150


@in_place
def digamma_trigamma(x: float) -> tuple[float, float]:
    """Return the first two derivatives of log Gamma at x > 0: recurrence to x >= 10, then the asymptotic series."""
    first, second = 0.0, 0.0
    while x < 10.0:
        first -= 1.0 / x
        second += 1.0 / (x * x)
        x += 1.0
    r = 1.0 / x
    s = r * r
    first += math.log(x) - 0.5 * r - s * (1 / 12 - s * (1 / 120 - s * (1 / 252 - s * (1 / 240 - s / 132))))
    second += r + 0.5 * s + s * r * (1 / 6 - s * (1 / 30 - s * (1 / 42 - s * (1 / 30 - s * (5 / 66)))))
    return first, second


@in_place
def log_constant(eta: float) -> tuple[float, float, float]:
    """Return G = log Gamma((nu + 1)/2) - log Gamma(nu/2) - log(pi nu)/2 and its first two derivatives by eta."""
    nu = 1.0 / eta
    upper, upper_2 = digamma_trigamma(0.5 * nu + 0.5)
    lower, lower_2 = digamma_trigamma(0.5 * nu)
    value = math.lgamma(0.5 * nu + 0.5) - math.lgamma(0.5 * nu) - 0.5 * (_LOG_PI + math.log(nu))
    by_nu = 0.5 * (upper - lower - eta)
    by_nu_2 = 0.25 * (upper_2 - lower_2) + 0.5 * eta * eta
    return value, -nu * nu * by_nu, nu * nu * nu * (nu * by_nu_2 + 2.0 * by_nu)


@in_place
def evaluate_t(x: np.ndarray, at: np.ndarray, gradient: np.ndarray, hessian: np.ndarray) -> float:
    """Return the log-likelihood of a sample at ``at`` (4); fill ``gradient`` (4) and ``hessian`` (4, 4).

    The logarithm is taken of products. Sums of a = r/(1 + eta r^2), b = r a, a b and b^2 on either side are enough.
    """
    mode, tau, eta, skew = at[MODE], math.exp(at[LOG_TAU]), at[ETA], at[SKEW]
    up, down = 1.0 / (tau * (1.0 + skew)), 1.0 / (tau * (1.0 - skew))
    n_up, ua, ub, uab, ubb = 0.0, 0.0, 0.0, 0.0, 0.0
    n_down, da, db, dab, dbb = 0.0, 0.0, 0.0, 0.0, 0.0
    logs, product = 0.0, 1.0
    for t in range(x.size):
        e = x[t] - mode
        r = e * (up if e >= 0.0 else down)
        w = 1.0 + eta * r * r
        product *= w
        if product > _LARGE:
            logs += math.log(product)
            product = 1.0
        a = r / w
        b = r * a
        if e >= 0.0:
            n_up, ua, ub, uab, ubb = n_up + 1.0, ua + a, ub + b, uab + a * b, ubb + b * b
        else:
            n_down, da, db, dab, dbb = n_down + 1.0, da + a, db + b, dab + a * b, dbb + b * b
    logs += math.log(product)
    n, sb, sbb = n_up + n_down, ub + db, ubb + dbb
    for i in range(4):
        gradient[i] = 0.0
        for j in range(4):
            hessian[i, j] = 0.0
    add_side(gradient, hessian, eta, up, 1.0 / (1.0 + skew), n_up, ua, ub, uab, ubb)
    add_side(gradient, hessian, eta, down, -1.0 / (1.0 - skew), n_down, da, db, dab, dbb)
    value, first, second = log_constant(eta)
    gradient[LOG_TAU] -= n
    gradient[ETA] = n * first + 0.5 * (logs / eta - (1.0 + eta) * sb) / eta
    hessian[ETA, ETA] = n * second + (sb - logs / eta) / (eta * eta) + 0.5 * (1.0 + eta) / eta * sbb
    for i in range(4):
        for j in range(i):
            hessian[i, j] = hessian[j, i]
    return float(n * (value - at[LOG_TAU]) - 0.5 * (1.0 + 1.0 / eta) * logs)


@in_place
def add_side(
    gradient: np.ndarray,
    hessian: np.ndarray,
    eta: float,
    v: float,
    h: float,
    n: float,
    a: float,
    b: float,
    ab: float,
    bb: float,
) -> None:
    """Add what one side of the mode gives: v = 1 / its scale, h = d log(scale)/d lambda, n points, the four sums."""
    c = 1.0 + eta
    gradient[MODE] += c * v * a
    gradient[LOG_TAU] += c * b
    gradient[SKEW] += c * h * b
    hessian[MODE, MODE] += c * v * v * (3.0 * eta * b - 2.0 * eta * eta * bb - n)
    hessian[MODE, LOG_TAU] += 2.0 * c * v * (eta * ab - a)
    hessian[MODE, ETA] += v * (a - c * ab)
    hessian[MODE, SKEW] += 2.0 * c * v * h * (eta * ab - a)
    hessian[LOG_TAU, LOG_TAU] += 2.0 * c * (eta * bb - b)
    hessian[LOG_TAU, ETA] += b - c * bb
    hessian[LOG_TAU, SKEW] += 2.0 * c * h * (eta * bb - b)
    hessian[ETA, SKEW] += h * (b - c * bb)
    hessian[SKEW, SKEW] += c * h * h * (2.0 * eta * bb - 3.0 * b)


@in_place
def standardise(at: np.ndarray, first: np.ndarray, second: np.ndarray) -> None:
    """Set mode and scale in ``at`` to those of zero mean and unit variance.

    With B = 1 + (3 - k^2) lambda^2 and k(eta) the mean of the law at lambda = 1 in standard deviations of Student's t:
    m = -k lambda / sqrt(B), tau = sqrt((1 - 2 eta) / B). Fills the derivatives of m and log tau by (eta, lambda),
    ``first`` (2, 2) and ``second`` (2, 2, 2).
    """
    eta, skew = at[ETA], at[SKEW]
    spare = 1.0 - 2.0 * eta
    value, slope, bend = log_constant(eta)
    k = math.exp(_LOG_4 + value + 0.5 * math.log(spare)) / (1.0 - eta)
    slope += 1.0 / (1.0 - eta) - 1.0 / spare
    bend += 1.0 / (1.0 - eta) ** 2 - 2.0 / spare**2
    k1, k2 = k * slope, k * (slope * slope + bend)
    B = 1.0 + (3.0 - k * k) * skew * skew
    root = 1.0 / math.sqrt(B)
    b = (-2.0 * k * k1 * skew * skew / B, 2.0 * skew * (3.0 - k * k) / B)
    cross = -4.0 * k * k1 * skew / B
    bb = ((-2.0 * skew * skew * (k1 * k1 + k * k2) / B, cross), (cross, 2.0 * (3.0 - k * k) / B))
    p = (-k1 * skew, -k)
    pp = ((-k2 * skew, -k1), (-k1, 0.0))
    at[MODE], at[LOG_TAU] = -k * skew * root, 0.5 * math.log(spare / B)
    for i in range(2):
        first[0, i] = root * (p[i] + 0.5 * k * skew * b[i])
        first[1, i] = -0.5 * b[i]
        for j in range(2):
            log_b = bb[i][j] - b[i] * b[j]
            inner = pp[i][j] - 0.5 * (p[i] * b[j] + p[j] * b[i]) + k * skew * (0.5 * log_b - 0.25 * b[i] * b[j])
            second[0, i, j] = root * inner
            second[1, i, j] = -0.5 * log_b
    first[1, 0] -= 1.0 / spare
    second[1, 0, 0] -= 2.0 / (spare * spare)


@compiled
def evaluate(x: np.ndarray, at: np.ndarray, standard: bool, gradient: np.ndarray, hessian: np.ndarray) -> float:
    """As ``evaluate_t``; if standard, of the law of zero mean and unit variance, total derivatives by its shape."""
    if not standard:
        return evaluate_t(x, at, gradient, hessian)
    first, second = np.empty((2, 2)), np.empty((2, 2, 2))
    standardise(at, first, second)
    value = evaluate_t(x, at, gradient, hessian)
    total = np.empty((2, 2))
    for i in range(2):
        for j in range(2):
            total[i, j] = hessian[ETA + i, ETA + j]
            for a in range(2):
                total[i, j] += first[a, i] * hessian[a, ETA + j] + first[a, j] * hessian[a, ETA + i]
                total[i, j] += gradient[a] * second[a, i, j]
                for b in range(2):
                    total[i, j] += first[a, i] * first[b, j] * hessian[a, b]
    for i in range(2):
        for a in range(2):
            gradient[ETA + i] += first[a, i] * gradient[a]
        for j in range(2):
            hessian[ETA + i, ETA + j] = total[i, j]
    return value
