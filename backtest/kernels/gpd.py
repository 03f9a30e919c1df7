"""The generalized Pareto tail: maximum likelihood, the Zhang-Stephens estimator, quantile and shortfall.

Excesses y > 0 over a threshold have survival (1 + xi y / beta)^(-1/xi). With theta = xi / beta the likelihood reduces
to one dimension, xi(theta) = mean log(1 + theta y) (Davison 1984; Grimshaw 1993, Technometrics 35:185-191).
"""

import math

import numpy as np

from backtest.kernels.compiled import compiled
from backtest.kernels.order import largest

LOWEST_SHAPE, HIGHEST_SHAPE = -0.5, 0.95
FEWEST, FEW = 20, 50
"""Fewer excesses than the first are refused, fewer than the second flagged."""
ML, ZHANG_STEPHENS, FEW_EXCESSES, REFUSED = 0, 1, 2, 4
"""Bits of the status of a tail."""


@compiled
def slope(y: np.ndarray, theta: float, moments: np.ndarray) -> tuple[float, float, float]:
    """Return first and second derivative of the mean profile log-likelihood at ``theta``, and xi there."""
    n = y.size
    if abs(theta) * moments[0] < 1e-5:
        m1, m2, m3 = moments[0], moments[1], moments[2]
        a, b = m2 / (2.0 * m1), m3 / (3.0 * m1)
        first = a - m1 + theta * (m2 - 2.0 * b + a * a)
        return first, m2 - 2.0 * b + a * a, theta * m1
    s0 = s1 = s2 = 0.0
    for i in range(n):
        w = 1.0 + theta * y[i]
        r = y[i] / w
        s0 += math.log1p(theta * y[i])
        s1 += r
        s2 += r * r
    s0, s1, s2 = s0 / n, s1 / n, s2 / n
    ratio = s1 / s0
    return 1.0 / theta - ratio - s1, s2 / s0 + ratio * ratio - 1.0 / (theta * theta) + s2, s0


@compiled
def bracket(y: np.ndarray, moments: np.ndarray, top: float) -> tuple[float, float]:
    """Return an interval of theta that holds a maximum of the profile likelihood, or (NaN, NaN) where there is none."""
    at_zero, _, _ = slope(y, 0.0, moments)
    if at_zero >= 0.0:
        low, high = 0.0, 1.0 / moments[0]
        for _ in range(200):
            if slope(y, high, moments)[0] < 0.0:
                return low, high
            low, high = high, 2.0 * high
        return np.nan, np.nan
    high = 0.0
    for k in range(1, 60):
        low = -(1.0 - 0.5**k) / top
        if slope(y, low, moments)[0] > 0.0:
            return low, high
        high = low
    return np.nan, np.nan


@compiled
def fit_ml(y: np.ndarray, guess: float) -> tuple[float, float, float]:
    """Return xi, beta and theta by maximum likelihood; NaN where no maximum with xi > -0.5 exists.

    ``y`` (n) are positive excesses, ``guess`` a first theta or NaN. Newton on the profile, kept in a bracket.
    """
    moments = np.zeros(3)
    top = 0.0
    for i in range(y.size):
        moments[0] += y[i]
        moments[1] += y[i] * y[i]
        moments[2] += y[i] * y[i] * y[i]
        top = max(top, y[i])
    moments /= y.size
    low, high = bracket(y, moments, top)
    if math.isnan(low):
        return np.nan, np.nan, np.nan
    theta = guess if low < guess < high else 0.5 * (low + high)
    xi = 0.0
    for _ in range(200):
        first, second, xi = slope(y, theta, moments)
        if first > 0.0:
            low = theta
        else:
            high = theta
        step = -first / second if second < 0.0 else np.inf
        if not low < theta + step < high:
            step = 0.5 * (low + high) - theta
        theta += step
        if abs(step) * moments[0] < 1e-12 or high - low < 1e-15 / top:
            break
    xi = slope(y, theta, moments)[2]
    beta = moments[0] if abs(theta) * moments[0] < 1e-9 else xi / theta
    if not xi > LOWEST_SHAPE:
        return np.nan, np.nan, np.nan
    return xi, beta, theta


@compiled
def fit_zhang_stephens(y: np.ndarray) -> tuple[float, float]:
    """Return xi and beta by Zhang & Stephens (2009, Technometrics 51:316-325): never fails on positive excesses."""
    ordered = np.sort(y)
    n = ordered.size
    quartile = ordered[max(int(n / 4.0 + 0.5), 1) - 1]
    m = 20 + int(math.sqrt(n))
    theta, value = np.empty(m), np.empty(m)
    for j in range(m):
        theta[j] = 1.0 / ordered[n - 1] + (1.0 - math.sqrt(m / (j + 0.5))) / (3.0 * quartile)
        k = 0.0
        for i in range(n):
            k -= math.log(1.0 - theta[j] * ordered[i])
        k /= n
        value[j] = n * (math.log(theta[j] / k) + k - 1.0) if abs(theta[j]) > 1e-300 else -np.inf
    best = np.max(value)
    total, weighted = 0.0, 0.0
    for j in range(m):
        weight = math.exp(value[j] - best)
        total += weight
        weighted += weight * theta[j]
    mean = weighted / total
    xi = 0.0
    for i in range(n):
        xi += math.log(1.0 - mean * ordered[i])
    xi /= n
    return xi, -xi / mean


@compiled
def quantile_and_shortfall(threshold: float, xi: float, beta: float, ratio: float) -> tuple[float, float]:
    """Return quantile and shortfall where the exceedance probability is ``ratio`` of that of the threshold.

    McNeil & Frey (2000), eqs. 10 and 15. Shortfall is infinite for xi >= 1.
    """
    log = math.log(ratio)
    g = -log * (1.0 - 0.5 * xi * log) if abs(xi) < 1e-8 else math.expm1(-xi * log) / xi
    quantile = threshold + beta * g
    return quantile, quantile + (beta + xi * beta * g) / (1.0 - xi) if xi < 1.0 else np.inf


@compiled
def excesses(sample: np.ndarray, k: int) -> tuple[float, np.ndarray]:
    """Return the (k+1)th largest value and the strict excesses over it, in the order of the sample."""
    threshold = largest(sample, k + 1)[k]
    y = np.empty(k)
    n = 0
    for i in range(sample.size):
        if sample[i] > threshold:
            y[n] = sample[i] - threshold
            n += 1
    return threshold, y[:n]


@compiled
def roll_gpd(
    samples: np.ndarray, levels: np.ndarray, k: int, places: np.ndarray, run_days: int, by_ml: bool
) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    """Fit a tail to the top ``k`` of each row of ``samples`` (n, m) and read quantile and shortfall at ``levels``.

    Returns quantile (n, L), shortfall (n, L), tail (n, 4: xi, beta, threshold, share above it) and status bits (n);
    REFUSED rows (fewer than FEWEST excesses, a level not beyond the threshold, or a shape of 1 or more by both
    estimators, so that the shortfall would be infinite) hold NaN.
    """
    n, m = samples.shape
    quantile, shortfall = np.full((n, levels.size), np.nan), np.full((n, levels.size), np.nan)
    tail, status = np.full((n, 4), np.nan), np.zeros(n, np.int64)
    guess = np.nan
    for i in range(n):
        if i == 0 or places[i] // run_days != places[i - 1] // run_days:
            guess = np.nan
        threshold, y = excesses(samples[i], k)
        share = y.size / m
        if y.size < FEWEST or not (1.0 - np.min(levels)) < share:
            status[i] = REFUSED
            continue
        status[i] = FEW_EXCESSES if y.size < FEW else ML
        xi, beta, guess = fit_ml(y, guess) if by_ml else (np.nan, np.nan, np.nan)
        if not xi <= HIGHEST_SHAPE:
            xi, beta = fit_zhang_stephens(y)
            status[i] |= ZHANG_STEPHENS
        if not xi < 1.0:
            status[i] = REFUSED
            continue
        tail[i, 0], tail[i, 1], tail[i, 2], tail[i, 3] = xi, beta, threshold, share
        for j in range(levels.size):
            quantile[i, j], shortfall[i, j] = quantile_and_shortfall(threshold, xi, beta, (1.0 - levels[j]) / share)
    return quantile, shortfall, tail, status


@compiled
def pit_rows(samples: np.ndarray, tail: np.ndarray, values: np.ndarray) -> np.ndarray:
    """Return the fitted law's probability of losing less than each value: GPD above the threshold, rank below it."""
    out = np.full(values.size, np.nan)
    for i in range(values.size):
        if math.isnan(values[i]):
            continue
        xi, beta, threshold, share = tail[i, 0], tail[i, 1], tail[i, 2], tail[i, 3]
        if values[i] <= threshold:
            below = 0
            for j in range(samples.shape[1]):
                below += samples[i, j] < values[i]
            out[i] = (below + 0.5) / (samples.shape[1] + 1)
            continue
        t = (values[i] - threshold) / beta
        if abs(xi) < 1e-8:
            out[i] = 1.0 - share * math.exp(-t)
        else:
            out[i] = 1.0 - share * max(1.0 + xi * t, 0.0) ** (-1.0 / xi)
    return out
