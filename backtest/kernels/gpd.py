"""The generalized Pareto tail: three estimators, quantile and shortfall, the tail rolled over many samples.

Excesses y > 0 over a threshold have survival (1 + xi y / beta)^(-1/xi). With theta = xi / beta the likelihood reduces
to one dimension, xi(theta) = mean log(1 + theta y) (Davison 1984; Grimshaw 1993, Technometrics 35:185-191).
"""

import math

import numpy as np

from backtest.kernels.compiled import compiled, in_place
from backtest.kernels.order import kth_largest, sort_ascending

LOWEST_SHAPE, HIGHEST_SHAPE = -0.5, 0.95
FEWEST, FEW = 20, 50
"""Fewer excesses than the first are refused, fewer than the second flagged."""
BY_ML, BY_ZHANG_STEPHENS, BY_PWM = 0, 1, 2
"""Estimators to ask for."""
FITTED, ZHANG_STEPHENS, FEW_EXCESSES, REFUSED = 0, 1, 2, 4
"""Bits of the status of a tail."""

_NEAR_ZERO, _LARGE, _SMALL = 0.02, 1e150, 1e-150


@in_place
def slope(y: np.ndarray, theta: float, moments: tuple[float, float, float]) -> tuple[float, float, float]:
    """Return first and second derivative of the mean profile log-likelihood at ``theta``, and xi there.

    ``moments`` (3): the means of y, y^2, y^3. The logarithm is taken of products; near theta = 0 of D = product - 1,
    which keeps its digits there.
    """
    m1, n = moments[0], y.size
    if abs(theta) * m1 < 1e-5:
        a, b = moments[1] / (2.0 * m1), moments[2] / (3.0 * m1)
        bend = moments[1] - 2.0 * b + a * a
        return a - m1 + theta * bend, bend, theta * m1
    s0, s1, s2, product, excess = 0.0, 0.0, 0.0, 1.0, 0.0
    if abs(theta) * m1 < _NEAR_ZERO:
        for i in range(n):
            r = y[i] / (1.0 + theta * y[i])
            s1, s2 = s1 + r, s2 + r * r
            excess += theta * y[i] * (1.0 + excess)
            if (i & 15) == 15:
                s0 += math.log1p(excess)
                excess = 0.0
    else:
        for i in range(n):
            w = 1.0 + theta * y[i]
            r = y[i] / w
            s1, s2 = s1 + r, s2 + r * r
            product *= w
            if product > _LARGE or product < _SMALL:
                s0 += math.log(product)
                product = 1.0
    s0, s1, s2 = (s0 + math.log(product) + math.log1p(excess)) / n, s1 / n, s2 / n
    ratio = s1 / s0
    return 1.0 / theta - ratio - s1, s2 / s0 + ratio * ratio - 1.0 / (theta * theta) + s2, s0


@in_place
def bracket(y: np.ndarray, guess: float, moments: tuple[float, float, float], top: float) -> tuple[float, float, float]:
    """Return an interval of theta that holds a maximum of the profile likelihood, and where to begin in it.

    It lies on the side of zero to which the likelihood rises. NaN where there is none: it is below zero then, and the
    likelihood does not fall again before it grows without bound at -1/top.
    """
    rise = slope(y, 0.0, moments)[0]
    if rise >= 0.0:
        return 0.0, np.inf, guess if guess > 0.0 else 2.0 * rise / moments[1]
    if -1.0 / top < guess < 0.0 and slope(y, guess, moments)[0] > 0.0:
        return guess, 0.0, guess
    high = 0.0
    for k in range(1, 60):
        low = -(1.0 - 0.5**k) / top
        if slope(y, low, moments)[0] > 0.0:
            return low, high, guess if low < guess < high else 0.5 * (low + high)
        high = low
    return np.nan, np.nan, np.nan


@in_place
def fit_ml(y: np.ndarray, guess: float) -> tuple[float, float, float]:
    """Return xi, beta and theta by maximum likelihood; NaN where no maximum with xi > -0.5 exists.

    ``y`` (n) are positive excesses, ``guess`` a first theta or NaN. Newton on the profile, kept in a bracket; without
    a guess it begins at the estimate by moments.
    """
    m1, m2, m3, top = 0.0, 0.0, 0.0, 0.0
    for i in range(y.size):
        square = y[i] * y[i]
        m1, m2, m3 = m1 + y[i], m2 + square, m3 + square * y[i]
        top = max(top, y[i])
    moments = m1 / y.size, m2 / y.size, m3 / y.size
    low, high, theta = bracket(y, guess, moments, top)
    if math.isnan(low):
        return np.nan, np.nan, np.nan
    for _ in range(300):
        first, second, _ = slope(y, theta, moments)
        if first > 0.0:
            low = theta
        else:
            high = theta
        step = -first / second if second < 0.0 else np.inf
        if abs(step) * moments[0] < 1e-8 or high - low < 1e-15 / top:
            theta += step if abs(step) * moments[0] < 1e-8 else 0.0
            break
        aim = theta + step
        if high == np.inf:
            aim = min(aim, 2.0 * theta + 1.0 / moments[0])
        theta = aim if low < aim < high else 0.5 * (low + high)
    xi = slope(y, theta, moments)[2]
    if not xi > LOWEST_SHAPE:
        return np.nan, np.nan, np.nan
    return xi, moments[0] if abs(theta) * moments[0] < 1e-9 else xi / theta, theta


@in_place
def mean_log(y: np.ndarray, theta: float) -> float:
    """Return the mean of log(1 + theta y): the logarithm of products, kept as product - 1 for the digits near zero."""
    total, excess = 0.0, 0.0
    for i in range(y.size):
        excess += theta * y[i] * (1.0 + excess)
        if excess < -0.5 or excess > _LARGE:
            total += math.log1p(excess)
            excess = 0.0
    return (total + math.log1p(excess)) / y.size


@in_place
def fit_zhang_stephens(y: np.ndarray) -> tuple[float, float]:
    """Return xi and beta by Zhang & Stephens (2009, Technometrics 51:316-325): never fails on positive excesses.

    Sorts ``y``.
    """
    sort_ascending(y)
    n = y.size
    quartile, m = y[max(int(n / 4.0 + 0.5), 1) - 1], 20 + int(math.sqrt(n))
    best, total, weighted = -np.inf, 0.0, 0.0
    for j in range(m):
        theta = 1.0 / y[n - 1] + (1.0 - math.sqrt(m / (j + 0.5))) / (3.0 * quartile)
        if not abs(theta) > 1e-300:
            continue
        k = -mean_log(y, -theta)
        value = n * (math.log(theta / k) + k - 1.0)
        if value > best:
            fade = math.exp(best - value)
            best, total, weighted = value, total * fade, weighted * fade
        weight = math.exp(value - best)
        total += weight
        weighted += weight * theta
    mean = weighted / total
    xi = mean_log(y, -mean)
    return xi, -xi / mean


@in_place
def fit_pwm(y: np.ndarray) -> tuple[float, float]:
    """Return xi and beta by probability-weighted moments (Hosking & Wallis 1987, Technometrics 29:339-349).

    Plotting positions (j - 0.35)/n. NaN where the fit puts an excess beyond its end point. Sorts ``y``.
    """
    sort_ascending(y)
    n, a0, a1 = y.size, 0.0, 0.0
    for j in range(n):
        a0 += y[j] / n
        a1 += (1.0 - (j + 0.65) / n) * y[j] / n
    xi, beta = 2.0 - a0 / (a0 - 2.0 * a1), 2.0 * a0 * a1 / (a0 - 2.0 * a1)
    if not beta > 0.0 or not xi < 1.0 or xi * y[n - 1] <= -beta:
        return np.nan, np.nan
    return xi, beta


@in_place
def quantile_and_shortfall(threshold: float, xi: float, beta: float, ratio: float) -> tuple[float, float]:
    """Return quantile and shortfall where the exceedance probability is ``ratio`` of that of the threshold.

    McNeil & Frey (2000), eqs. 10 and 15. Shortfall is infinite for xi >= 1.
    """
    log = math.log(ratio)
    g = -log * (1.0 - 0.5 * xi * log) if abs(xi) < 1e-8 else math.expm1(-xi * log) / xi
    quantile = threshold + beta * g
    return quantile, np.inf if xi >= 1.0 else quantile + (beta + xi * beta * g) / (1.0 - xi)


@in_place
def excesses(sample: np.ndarray, k: int, bound: float, work: np.ndarray) -> tuple[float, int]:
    """Return the (k+1)-th largest value and how many excesses are strictly over it; they open the second row of work.

    ``bound`` is a guess below that value or NaN: it saves time and changes nothing. ``work`` (2, m) is overwritten.
    """
    kept, moved, count = work[0], work[1], 0
    for i in range(sample.size):
        kept[count] = sample[i]
        count += sample[i] > bound
    if count <= k:
        count = sample.size
        for i in range(count):
            kept[i] = sample[i]
    for i in range(count):
        moved[i] = kept[i]
    threshold, n = kth_largest(moved[:count], k + 1), 0
    for i in range(count):
        moved[n] = kept[i] - threshold
        n += kept[i] > threshold
    return threshold, n


@in_place
def fit(y: np.ndarray, by: int, guess: float) -> tuple[float, float, float, int]:
    """Return xi, beta, theta (NaN unless by likelihood), status: Zhang-Stephens where the estimator has no answer."""
    status = FEW_EXCESSES if y.size < FEW else FITTED
    xi, beta, theta = np.nan, np.nan, np.nan
    if by == BY_ML:
        xi, beta, theta = fit_ml(y, guess)
    elif by == BY_PWM:
        xi, beta = fit_pwm(y)
    if not xi <= HIGHEST_SHAPE:
        xi, beta = fit_zhang_stephens(y)
        status |= ZHANG_STEPHENS if by != BY_ZHANG_STEPHENS else 0
    return xi, beta, theta, status if xi < 1.0 else REFUSED


@compiled
def roll_gpd(
    samples: np.ndarray, levels: np.ndarray, k: int, places: np.ndarray, run_days: int, by: int
) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    """Fit a tail to the top ``k`` of each row of ``samples`` (n, m) and read quantile and shortfall at ``levels``.

    Returns quantile (n, L), shortfall (n, L), tail (n, 4: xi, beta, threshold, share above it) and status bits (n);
    REFUSED rows (fewer than FEWEST excesses, a level not beyond the threshold, or a shape of 1 or more, so that the
    shortfall would be infinite) hold NaN.
    """
    n, m = samples.shape
    quantile, shortfall, tail = np.empty((n, levels.size)), np.empty((n, levels.size)), np.empty((n, 4))
    status, work = np.empty(n, np.int64), np.empty((2, m))
    guess, bound, widest = np.nan, np.nan, 0.0
    for level in levels:
        widest = max(widest, 1.0 - level)
    for i in range(n):
        if i == 0 or places[i] // run_days != places[i - 1] // run_days:
            guess = np.nan
        threshold, count = excesses(samples[i], k, bound, work)
        y = work[1, :count]
        share, xi, beta = y.size / m, np.nan, np.nan
        status[i] = REFUSED
        if y.size >= FEWEST and widest < share:
            xi, beta, guess, status[i] = fit(y, by, guess)
        if status[i] == REFUSED:
            xi, beta, threshold, share, guess = np.nan, np.nan, np.nan, np.nan, np.nan
        bound = threshold - 0.2 * beta
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
