"""GARCH(1,1) with an AR(1) mean: Gaussian log-likelihood with exact gradient and Hessian in one pass, and the filter.

Model of a past x[0..W-1] of losses: e_t = x_t - c - phi x_{t-1}; h_t = omega + alpha e_{t-1}^2 + beta h_{t-1}.
Parameters in the order (c, phi, omega, alpha, beta). Before the first day both e^2 and h are b, the start-up
variance: fixed, or moving with the parameters. Derivatives of h obey the same recursion as h
(Fiorentini, Calzolari & Panattoni 1996, J. Applied Econometrics 11).
"""

import math

import numpy as np

from backtest.kernels.compiled import compiled

C, PHI, OMEGA, ALPHA, BETA = range(5)
SAMPLE_VARIANCE, MEAN_SQUARE, UNCONDITIONAL, EWMA_75 = range(4)
"""Start-up rules; the first and the last give a b that stays fixed during a fit."""

_LOG_2PI = math.log(2 * math.pi)


@compiled
def first_variance(
    theta: np.ndarray, start: int, fixed: float, moments: np.ndarray, first: np.ndarray, second: np.ndarray
) -> float:
    """Return h of the first day and fill its derivatives: ``first`` (5) and ``second`` (5, 5).

    ``moments`` holds n, sum x, sum lag, sum x^2, sum lag^2, sum x*lag of the days with a residual.
    """
    c, phi, omega, alpha, beta = theta[C], theta[PHI], theta[OMEGA], theta[ALPHA], theta[BETA]
    first[:] = 0.0
    second[:, :] = 0.0
    persistence = alpha + beta
    if start == UNCONDITIONAL:
        r = 1.0 / (1.0 - persistence)
        first[OMEGA] = r
        for i in (ALPHA, BETA):
            first[i] = omega * r * r
            second[OMEGA, i] = second[i, OMEGA] = r * r
            for j in (ALPHA, BETA):
                second[i, j] = 2.0 * omega * r * r * r
        return float(omega * r)
    b, b_c, b_phi = fixed, 0.0, 0.0
    if start == MEAN_SQUARE:
        n, sx, sl, sxx, sll, sxl = moments[0], moments[1], moments[2], moments[3], moments[4], moments[5]
        b = (sxx + phi * phi * sll - 2 * phi * sxl - 2 * c * sx + 2 * c * phi * sl) / n + c * c
        b_c = 2 * (c + (phi * sl - sx) / n)
        b_phi = 2 * (phi * sll - sxl + c * sl) / n
        second[C, C] = persistence * 2.0
        second[C, PHI] = second[PHI, C] = persistence * 2.0 * sl / n
        second[PHI, PHI] = persistence * 2.0 * sll / n
    first[C], first[PHI], first[OMEGA], first[ALPHA], first[BETA] = persistence * b_c, persistence * b_phi, 1.0, b, b
    for i in (ALPHA, BETA):
        second[C, i] = second[i, C] = b_c
        second[PHI, i] = second[i, PHI] = b_phi
    return float(omega + persistence * b)


@compiled
def evaluate(
    x: np.ndarray,
    skip: int,
    theta: np.ndarray,
    start: int,
    fixed: float,
    moments: np.ndarray,
    gradient: np.ndarray,
    hessian: np.ndarray,
) -> tuple[float, float]:
    """Return the log-likelihood and the next day's variance; fill ``gradient`` (5) and ``hessian`` (5, 5).

    ``skip`` days (0 or 1) at the front only condition the mean. The logarithm is taken once per 32 days, of a product.
    """
    c, phi, omega, alpha, beta = theta[C], theta[PHI], theta[OMEGA], theta[ALPHA], theta[BETA]
    d, s = gradient, hessian
    h = first_variance(theta, start, fixed, moments, d, s)
    hc, hp, ho, ha, hb = d[C], d[PHI], d[OMEGA], d[ALPHA], d[BETA]
    hcc, hcp, hpp, hca, hcb = s[C, C], s[C, PHI], s[PHI, PHI], s[C, ALPHA], s[C, BETA]
    hpa, hpb, hob, hab, hbb = s[PHI, ALPHA], s[PHI, BETA], s[OMEGA, BETA], s[ALPHA, BETA], s[BETA, BETA]
    gc = gp = go = ga = gb = 0.0
    scc = scp = sco = sca = scb = spp = spo = spa = spb = soo = soa = sob = saa = sab = sbb = 0.0
    squares, logs, product = 0.0, 0.0, 1.0
    lag = x[0] if skip else 0.0
    for t in range(skip, x.size):
        e = x[t] - c - phi * lag
        r = 1.0 / h
        er = e * r
        q = e * er
        squares += q
        product *= h
        if (t & 31) == 31:
            logs += math.log(product)
            product = 1.0
        l1 = 0.5 * (q - 1.0) * r
        l2 = (0.5 - q) * r * r
        err = er * r
        wc, wp = l2 * hc - err, l2 * hp - err * lag
        gc += l1 * hc + er
        gp += l1 * hp + er * lag
        go += l1 * ho
        ga += l1 * ha
        gb += l1 * hb
        scc += l1 * hcc + hc * (wc - err) - r
        scp += l1 * hcp + hc * wp - (err * hp + r * lag)
        spp += l1 * hpp + hp * (wp - err * lag) - r * lag * lag
        sco += wc * ho
        sca += l1 * hca + wc * ha
        scb += l1 * hcb + wc * hb
        spo += wp * ho
        spa += l1 * hpa + wp * ha
        spb += l1 * hpb + wp * hb
        soo += l2 * ho * ho
        soa += l2 * ho * ha
        sob += l1 * hob + l2 * ho * hb
        saa += l2 * ha * ha
        sab += l1 * hab + l2 * ha * hb
        sbb += l1 * hbb + l2 * hb * hb
        e2_c, e2_p, a2 = -2.0 * e, -2.0 * e * lag, 2.0 * alpha
        hcc = a2 + beta * hcc
        hcp = a2 * lag + beta * hcp
        hpp = a2 * lag * lag + beta * hpp
        hca, hcb = e2_c + beta * hca, hc + beta * hcb
        hpa, hpb = e2_p + beta * hpa, hp + beta * hpb
        hob, hab, hbb = ho + beta * hob, ha + beta * hab, 2.0 * hb + beta * hbb
        hc, hp = alpha * e2_c + beta * hc, alpha * e2_p + beta * hp
        ho, ha, hb = 1.0 + beta * ho, e * e + beta * ha, h + beta * hb
        h = omega + alpha * e * e + beta * h
        lag = x[t]
    if start == UNCONDITIONAL:
        more = unconditional_extra(x, skip, theta)
        soa += s[OMEGA, ALPHA] * more
        saa += s[ALPHA, ALPHA] * more
    d[C], d[PHI], d[OMEGA], d[ALPHA], d[BETA] = gc, gp, go, ga, gb
    fill_symmetric(s, (scc, scp, sco, sca, scb, spp, spo, spa, spb, soo, soa, sob, saa, sab, sbb))
    value = -0.5 * (logs + math.log(product) + squares + (x.size - skip) * _LOG_2PI)
    return value, h


@compiled
def fill_symmetric(matrix: np.ndarray, upper: tuple[float, ...]) -> None:
    """Write the upper triangle, row by row, into both triangles of a (5, 5) matrix."""
    k = 0
    for i in range(5):
        for j in range(i, 5):
            matrix[i, j] = matrix[j, i] = upper[k]
            k += 1


@compiled
def unconditional_extra(x: np.ndarray, skip: int, theta: np.ndarray) -> float:
    """Return sum of dl_t/dh_t beta^(t-1): what the start-up omega/(1-alpha-beta) adds to two second derivatives."""
    c, phi, omega, alpha, beta = theta[C], theta[PHI], theta[OMEGA], theta[ALPHA], theta[BETA]
    h, decay, total = omega / (1.0 - alpha - beta), 1.0, 0.0
    lag = x[0] if skip else 0.0
    for t in range(skip, x.size):
        e = x[t] - c - phi * lag
        total += 0.5 * (e * e / h - 1.0) / h * decay
        decay *= beta
        if decay < 1e-30:
            break
        h = omega + alpha * e * e + beta * h
        lag = x[t]
    return total


@compiled
def filter_past(
    x: np.ndarray, skip: int, theta: np.ndarray, start: int, fixed: float, moments: np.ndarray, residuals: np.ndarray
) -> tuple[float, float, float]:
    """Fill ``residuals``, e_t / sqrt(h_t) of the days after ``skip``; return log-likelihood, next mean and variance."""
    c, phi, omega, alpha, beta = theta[C], theta[PHI], theta[OMEGA], theta[ALPHA], theta[BETA]
    first, second = np.empty(5), np.empty((5, 5))
    h = first_variance(theta, start, fixed, moments, first, second)
    squares, logs, product = 0.0, 0.0, 1.0
    lag = x[0] if skip else 0.0
    for t in range(skip, x.size):
        e = x[t] - c - phi * lag
        product *= h
        if (t & 31) == 31:
            logs += math.log(product)
            product = 1.0
        z = e / math.sqrt(h)
        squares += z * z
        residuals[t - skip] = z
        h = omega + alpha * e * e + beta * h
        lag = x[t]
    value = -0.5 * (logs + math.log(product) + squares + (x.size - skip) * _LOG_2PI)
    return value, c + phi * lag, h
