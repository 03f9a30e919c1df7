"""Written by write_passes.py, not by hand: one likelihood pass a member, eight pasts at once."""

import numpy as np

from backtest.kernels.compiled import inner
from backtest.kernels.lanes import load, spread, square_root, store, where_positive
from backtest.kernels.laws import K_L, K_LE, K_LL, KAPPA, SIDE, TURN, K, M
from backtest.kernels.parameters import ALPHA, BETA, COUNT, ETA, GAMMA, LAMBDA, OMEGA, PHI, C
from backtest.kernels.terms import (
    AFTER, D, DD, GRADIENT, HALF_LOG_2PI, HESSIAN, LAW, THETA, VALUE, add_logs, each_log, even_terms, skew_terms,
)


@inner
def constant_garch_normal(p: np.ndarray, x: np.ndarray, skip: int) -> None:
    """Run a pass: constant mean, garch variance, normal law; after ``begin`` for every lane."""
    zero, one = spread(0.0), spread(1.0)
    omega = load(p, THETA + OMEGA)
    alpha = load(p, THETA + ALPHA)
    beta = load(p, THETA + BETA)
    c = load(p, THETA + C)
    h = load(p, AFTER)
    hc = load(p, D + C)
    ho = load(p, D + OMEGA)
    ha = load(p, D + ALPHA)
    hb = load(p, D + BETA)
    hcc = load(p, DD + C * COUNT + C)
    hca = load(p, DD + C * COUNT + ALPHA)
    hcb = load(p, DD + C * COUNT + BETA)
    hob = load(p, DD + OMEGA * COUNT + BETA)
    hab = load(p, DD + ALPHA * COUNT + BETA)
    hbb = load(p, DD + BETA * COUNT + BETA)
    gc = zero
    go = zero
    ga = zero
    gb = zero
    scc = zero
    sco = zero
    sca = zero
    scb = zero
    soo = zero
    soa = zero
    sob = zero
    saa = zero
    sab = zero
    sbb = zero
    total = zero
    decay, faded, product = one, zero, one
    lag = load(x, 0) if skip else zero
    for t in range(skip, x.shape[0]):
        now = load(x, t)
        e = now - c
        r = 1.0 / h
        square = e * e
        q = square * r
        product = product * h
        total += q
        l1, l2, le, lee, leh = even_terms(e, r, q, 1.0, 1.0)
        if (t & 31) == 31:
            add_logs(p, product)
            product = one
        gc += l1 * hc - le
        go += l1 * ho
        ga += l1 * ha
        gb += l1 * hb
        uc = l2 * hc - leh
        uo = l2 * ho
        ua = l2 * ha
        ub = l2 * hb
        vc = leh * hc - lee
        scc += l1 * hcc + uc * hc - vc
        sco += uc * ho
        sca += l1 * hca + uc * ha
        scb += l1 * hcb + uc * hb
        soo += uo * ho
        soa += uo * ha
        sob += l1 * hob + uo * hb
        saa += ua * ha
        sab += l1 * hab + ua * hb
        sbb += l1 * hbb + ub * hb
        faded += l1 * decay
        decay = decay * beta
        twice = 2.0 * e
        slope = alpha
        slope2, steep = 2.0 * slope, slope * twice
        hcc = beta * hcc + slope2
        hca = beta * hca - twice
        hcb = beta * hcb + hc
        hob = beta * hob + ho
        hab = beta * hab + ha
        hbb = beta * hbb + 2.0 * hb
        hc = beta * hc - steep
        ho = beta * ho + 1.0
        ha = beta * ha + square
        hb = beta * hb + h
        h = omega + alpha * square + beta * h
        lag = now
    add_logs(p, product)
    days = x.shape[0] - skip
    store(p, VALUE, load(p, VALUE) - 0.5 * total - HALF_LOG_2PI * days)
    store(p, AFTER, h)
    store(p, GRADIENT + C, gc)
    store(p, GRADIENT + OMEGA, go)
    store(p, GRADIENT + ALPHA, ga)
    store(p, GRADIENT + BETA, gb)
    store(p, D + C, hc)
    store(p, D + OMEGA, ho)
    store(p, D + ALPHA, ha)
    store(p, D + BETA, hb)
    store(p, HESSIAN + C * COUNT + C, scc)
    store(p, HESSIAN + C * COUNT + OMEGA, sco + load(p, DD + C * COUNT + OMEGA) * faded)
    store(p, HESSIAN + C * COUNT + ALPHA, sca)
    store(p, HESSIAN + C * COUNT + BETA, scb)
    store(p, HESSIAN + OMEGA * COUNT + OMEGA, soo + load(p, DD + OMEGA * COUNT + OMEGA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + ALPHA, soa + load(p, DD + OMEGA * COUNT + ALPHA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + BETA, sob)
    store(p, HESSIAN + ALPHA * COUNT + ALPHA, saa + load(p, DD + ALPHA * COUNT + ALPHA) * faded)
    store(p, HESSIAN + ALPHA * COUNT + BETA, sab)
    store(p, HESSIAN + BETA * COUNT + BETA, sbb)


@inner
def constant_garch_tails(p: np.ndarray, x: np.ndarray, skip: int) -> None:
    """Run a pass: constant mean, garch variance, tails law; after ``begin`` for every lane."""
    zero, one = spread(0.0), spread(1.0)
    omega = load(p, THETA + OMEGA)
    alpha = load(p, THETA + ALPHA)
    beta = load(p, THETA + BETA)
    c = load(p, THETA + C)
    h = load(p, AFTER)
    kappa, kappa1, kappa2 = load(p, LAW + KAPPA), load(p, LAW + KAPPA + 1), load(p, LAW + KAPPA + 2)
    m, m1, m2 = load(p, LAW + M), load(p, LAW + M + 1), load(p, LAW + M + 2)
    logs = zero
    weights = one
    hc = load(p, D + C)
    ho = load(p, D + OMEGA)
    ha = load(p, D + ALPHA)
    hb = load(p, D + BETA)
    hcc = load(p, DD + C * COUNT + C)
    hca = load(p, DD + C * COUNT + ALPHA)
    hcb = load(p, DD + C * COUNT + BETA)
    hob = load(p, DD + OMEGA * COUNT + BETA)
    hab = load(p, DD + ALPHA * COUNT + BETA)
    hbb = load(p, DD + BETA * COUNT + BETA)
    gc = zero
    go = zero
    ga = zero
    gb = zero
    scc = zero
    sco = zero
    sca = zero
    scb = zero
    soo = zero
    soa = zero
    sob = zero
    saa = zero
    sab = zero
    sbb = zero
    ratio = zero
    fourth = zero
    xce = zero
    xoe = zero
    xae = zero
    xbe = zero
    decay, faded, product = one, zero, one
    lag = load(x, 0) if skip else zero
    for t in range(skip, x.shape[0]):
        now = load(x, t)
        e = now - c
        r = 1.0 / h
        square = e * e
        q = square * r
        product = product * h
        w = 1.0 + kappa * q
        v = 1.0 / w
        weights = weights * w
        ratio += q * v
        fourth += q * q * v * v
        G = 2.0 * m * kappa * v
        l1, l2, le, lee, leh = even_terms(e, r, q, G, (2.0 - w) * v)
        G_e = 2.0 * (m1 * kappa + m * kappa1) * v - 2.0 * m * kappa * kappa1 * q * v * v
        les, lhs = -1.0 * G_e * e * r, 0.5 * G_e * q * r
        if (t & 31) == 31:
            add_logs(p, product)
            product = one
            logs += each_log(p, weights)
            weights = one
        gc += l1 * hc - le
        go += l1 * ho
        ga += l1 * ha
        gb += l1 * hb
        uc = l2 * hc - leh
        uo = l2 * ho
        ua = l2 * ha
        ub = l2 * hb
        vc = leh * hc - lee
        scc += l1 * hcc + uc * hc - vc
        sco += uc * ho
        sca += l1 * hca + uc * ha
        scb += l1 * hcb + uc * hb
        soo += uo * ho
        soa += uo * ha
        sob += l1 * hob + uo * hb
        saa += ua * ha
        sab += l1 * hab + ua * hb
        sbb += l1 * hbb + ub * hb
        xce += lhs * hc - les
        xoe += lhs * ho
        xae += lhs * ha
        xbe += lhs * hb
        faded += l1 * decay
        decay = decay * beta
        twice = 2.0 * e
        slope = alpha
        slope2, steep = 2.0 * slope, slope * twice
        hcc = beta * hcc + slope2
        hca = beta * hca - twice
        hcb = beta * hcb + hc
        hob = beta * hob + ho
        hab = beta * hab + ha
        hbb = beta * hbb + 2.0 * hb
        hc = beta * hc - steep
        ho = beta * ho + 1.0
        ha = beta * ha + square
        hb = beta * hb + h
        h = omega + alpha * square + beta * h
        lag = now
    add_logs(p, product)
    days = x.shape[0] - skip
    logs += each_log(p, weights)
    store(p, VALUE, load(p, VALUE) + load(p, LAW + K) * days - m * logs)
    store(p, AFTER, h)
    store(p, GRADIENT + C, gc)
    store(p, GRADIENT + OMEGA, go)
    store(p, GRADIENT + ALPHA, ga)
    store(p, GRADIENT + BETA, gb)
    store(p, D + C, hc)
    store(p, D + OMEGA, ho)
    store(p, D + ALPHA, ha)
    store(p, D + BETA, hb)
    store(p, HESSIAN + C * COUNT + C, scc)
    store(p, HESSIAN + C * COUNT + OMEGA, sco + load(p, DD + C * COUNT + OMEGA) * faded)
    store(p, HESSIAN + C * COUNT + ALPHA, sca)
    store(p, HESSIAN + C * COUNT + BETA, scb)
    store(p, HESSIAN + OMEGA * COUNT + OMEGA, soo + load(p, DD + OMEGA * COUNT + OMEGA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + ALPHA, soa + load(p, DD + OMEGA * COUNT + ALPHA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + BETA, sob)
    store(p, HESSIAN + ALPHA * COUNT + ALPHA, saa + load(p, DD + ALPHA * COUNT + ALPHA) * faded)
    store(p, HESSIAN + ALPHA * COUNT + BETA, sab)
    store(p, HESSIAN + BETA * COUNT + BETA, sbb)
    store(p, HESSIAN + C * COUNT + ETA, xce)
    store(p, HESSIAN + OMEGA * COUNT + ETA, xoe)
    store(p, HESSIAN + ALPHA * COUNT + ETA, xae)
    store(p, HESSIAN + BETA * COUNT + ETA, xbe)
    store(p, GRADIENT + ETA, load(p, LAW + K + 1) * days - m1 * logs - m * kappa1 * ratio)
    bend = load(p, LAW + K + 2) * days - m2 * logs - (2.0 * m1 * kappa1 + m * kappa2) * ratio
    store(p, HESSIAN + ETA * COUNT + ETA, bend + m * kappa1 * kappa1 * fourth)


@inner
def constant_garch_skew(p: np.ndarray, x: np.ndarray, skip: int) -> None:
    """Run a pass: constant mean, garch variance, skew law; after ``begin`` for every lane."""
    zero, one = spread(0.0), spread(1.0)
    omega = load(p, THETA + OMEGA)
    alpha = load(p, THETA + ALPHA)
    beta = load(p, THETA + BETA)
    c = load(p, THETA + C)
    h = load(p, AFTER)
    kappa, kappa1, kappa2 = load(p, LAW + KAPPA), load(p, LAW + KAPPA + 1), load(p, LAW + KAPPA + 2)
    m, m1, m2 = load(p, LAW + M), load(p, LAW + M + 1), load(p, LAW + M + 2)
    logs = zero
    weights = one
    turn = load(p, LAW + TURN)
    A_left = load(p, LAW + SIDE[0] + 0)
    A_l_left = load(p, LAW + SIDE[0] + 1)
    A_e_left = load(p, LAW + SIDE[0] + 2)
    A_ll_left = load(p, LAW + SIDE[0] + 3)
    A_le_left = load(p, LAW + SIDE[0] + 4)
    A_ee_left = load(p, LAW + SIDE[0] + 5)
    B_left = load(p, LAW + SIDE[0] + 6)
    B_l_left = load(p, LAW + SIDE[0] + 7)
    B_e_left = load(p, LAW + SIDE[0] + 8)
    B_ll_left = load(p, LAW + SIDE[0] + 9)
    B_le_left = load(p, LAW + SIDE[0] + 10)
    B_ee_left = load(p, LAW + SIDE[0] + 11)
    A_right = load(p, LAW + SIDE[1] + 0)
    A_l_right = load(p, LAW + SIDE[1] + 1)
    A_e_right = load(p, LAW + SIDE[1] + 2)
    A_ll_right = load(p, LAW + SIDE[1] + 3)
    A_le_right = load(p, LAW + SIDE[1] + 4)
    A_ee_right = load(p, LAW + SIDE[1] + 5)
    B_right = load(p, LAW + SIDE[1] + 6)
    B_l_right = load(p, LAW + SIDE[1] + 7)
    B_e_right = load(p, LAW + SIDE[1] + 8)
    B_ll_right = load(p, LAW + SIDE[1] + 9)
    B_le_right = load(p, LAW + SIDE[1] + 10)
    B_ee_right = load(p, LAW + SIDE[1] + 11)
    hc = load(p, D + C)
    ho = load(p, D + OMEGA)
    ha = load(p, D + ALPHA)
    hb = load(p, D + BETA)
    hcc = load(p, DD + C * COUNT + C)
    hca = load(p, DD + C * COUNT + ALPHA)
    hcb = load(p, DD + C * COUNT + BETA)
    hob = load(p, DD + OMEGA * COUNT + BETA)
    hab = load(p, DD + ALPHA * COUNT + BETA)
    hbb = load(p, DD + BETA * COUNT + BETA)
    gc = zero
    go = zero
    ga = zero
    gb = zero
    scc = zero
    sco = zero
    sca = zero
    scb = zero
    soo = zero
    soa = zero
    sob = zero
    saa = zero
    sab = zero
    sbb = zero
    f_l = zero
    f_e = zero
    f_ll = zero
    f_le = zero
    f_ee = zero
    xce = zero
    xoe = zero
    xae = zero
    xbe = zero
    xcl = zero
    xol = zero
    xal = zero
    xbl = zero
    decay, faded, product = one, zero, one
    lag = load(x, 0) if skip else zero
    for t in range(skip, x.shape[0]):
        now = load(x, t)
        e = now - c
        r = 1.0 / h
        square = e * e
        q = square * r
        product = product * h
        s = square_root(r)
        z = e * s
        side = z - turn
        A = where_positive(side, A_right, A_left)
        A_l = where_positive(side, A_l_right, A_l_left)
        A_e = where_positive(side, A_e_right, A_e_left)
        A_ll = where_positive(side, A_ll_right, A_ll_left)
        A_le = where_positive(side, A_le_right, A_le_left)
        A_ee = where_positive(side, A_ee_right, A_ee_left)
        B = where_positive(side, B_right, B_left)
        B_l = where_positive(side, B_l_right, B_l_left)
        B_e = where_positive(side, B_e_right, B_e_left)
        B_ll = where_positive(side, B_ll_right, B_ll_left)
        B_le = where_positive(side, B_le_right, B_le_left)
        B_ee = where_positive(side, B_ee_right, B_ee_left)
        y, y_l, y_e = A * z + B, A_l * z + B_l, A_e * z + B_e
        w = 1.0 + kappa * y * y
        v = 1.0 / w
        weights = weights * w
        yy = y * y * v
        U, V = 2.0 * m * kappa * y * v, 2.0 * m * kappa * (2.0 - w) * v * v
        U_e = (2.0 * (m1 * kappa + m * kappa1) - 2.0 * m * kappa1 * kappa * yy) * y * v
        l1, l2, le, lee, leh = skew_terms(z, s, r, -1.0 * U * A, -1.0 * V * A * A)
        f_l -= U * y_l
        f_e -= m * kappa1 * yy + U * y_e
        f_ll -= V * y_l * y_l + U * (A_ll * z + B_ll)
        f_le -= U_e * y_l + V * y_l * y_e + U * (A_le * z + B_le)
        f_ee += m * kappa1 * kappa1 * yy * yy - (2.0 * m1 * kappa1 + m * kappa2) * yy
        f_ee -= 2.0 * U_e * y_e + V * y_e * y_e + U * (A_ee * z + B_ee)
        p_l, p_e = -1.0 * (V * y_l * A + U * A_l), -1.0 * ((U_e + V * y_e) * A + U * A_e)
        les, lhs, lls, lhl = p_e * s, -0.5 * z * p_e * r, p_l * s, -0.5 * z * p_l * r
        if (t & 31) == 31:
            add_logs(p, product)
            product = one
            logs += each_log(p, weights)
            weights = one
        gc += l1 * hc - le
        go += l1 * ho
        ga += l1 * ha
        gb += l1 * hb
        uc = l2 * hc - leh
        uo = l2 * ho
        ua = l2 * ha
        ub = l2 * hb
        vc = leh * hc - lee
        scc += l1 * hcc + uc * hc - vc
        sco += uc * ho
        sca += l1 * hca + uc * ha
        scb += l1 * hcb + uc * hb
        soo += uo * ho
        soa += uo * ha
        sob += l1 * hob + uo * hb
        saa += ua * ha
        sab += l1 * hab + ua * hb
        sbb += l1 * hbb + ub * hb
        xce += lhs * hc - les
        xoe += lhs * ho
        xae += lhs * ha
        xbe += lhs * hb
        xcl += lhl * hc - lls
        xol += lhl * ho
        xal += lhl * ha
        xbl += lhl * hb
        faded += l1 * decay
        decay = decay * beta
        twice = 2.0 * e
        slope = alpha
        slope2, steep = 2.0 * slope, slope * twice
        hcc = beta * hcc + slope2
        hca = beta * hca - twice
        hcb = beta * hcb + hc
        hob = beta * hob + ho
        hab = beta * hab + ha
        hbb = beta * hbb + 2.0 * hb
        hc = beta * hc - steep
        ho = beta * ho + 1.0
        ha = beta * ha + square
        hb = beta * hb + h
        h = omega + alpha * square + beta * h
        lag = now
    add_logs(p, product)
    days = x.shape[0] - skip
    logs += each_log(p, weights)
    store(p, VALUE, load(p, VALUE) + load(p, LAW + K) * days - m * logs)
    store(p, AFTER, h)
    store(p, GRADIENT + C, gc)
    store(p, GRADIENT + OMEGA, go)
    store(p, GRADIENT + ALPHA, ga)
    store(p, GRADIENT + BETA, gb)
    store(p, D + C, hc)
    store(p, D + OMEGA, ho)
    store(p, D + ALPHA, ha)
    store(p, D + BETA, hb)
    store(p, HESSIAN + C * COUNT + C, scc)
    store(p, HESSIAN + C * COUNT + OMEGA, sco + load(p, DD + C * COUNT + OMEGA) * faded)
    store(p, HESSIAN + C * COUNT + ALPHA, sca)
    store(p, HESSIAN + C * COUNT + BETA, scb)
    store(p, HESSIAN + OMEGA * COUNT + OMEGA, soo + load(p, DD + OMEGA * COUNT + OMEGA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + ALPHA, soa + load(p, DD + OMEGA * COUNT + ALPHA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + BETA, sob)
    store(p, HESSIAN + ALPHA * COUNT + ALPHA, saa + load(p, DD + ALPHA * COUNT + ALPHA) * faded)
    store(p, HESSIAN + ALPHA * COUNT + BETA, sab)
    store(p, HESSIAN + BETA * COUNT + BETA, sbb)
    store(p, HESSIAN + C * COUNT + ETA, xce)
    store(p, HESSIAN + OMEGA * COUNT + ETA, xoe)
    store(p, HESSIAN + ALPHA * COUNT + ETA, xae)
    store(p, HESSIAN + BETA * COUNT + ETA, xbe)
    store(p, HESSIAN + C * COUNT + LAMBDA, xcl)
    store(p, HESSIAN + OMEGA * COUNT + LAMBDA, xol)
    store(p, HESSIAN + ALPHA * COUNT + LAMBDA, xal)
    store(p, HESSIAN + BETA * COUNT + LAMBDA, xbl)
    store(p, GRADIENT + ETA, load(p, LAW + K + 1) * days - m1 * logs + f_e)
    store(p, GRADIENT + LAMBDA, load(p, LAW + K_L) * days + f_l)
    store(p, HESSIAN + ETA * COUNT + ETA, load(p, LAW + K + 2) * days - m2 * logs + f_ee)
    store(p, HESSIAN + ETA * COUNT + LAMBDA, load(p, LAW + K_LE) * days + f_le)
    store(p, HESSIAN + LAMBDA * COUNT + LAMBDA, load(p, LAW + K_LL) * days + f_ll)


@inner
def constant_gjr_normal(p: np.ndarray, x: np.ndarray, skip: int) -> None:
    """Run a pass: constant mean, gjr variance, normal law; after ``begin`` for every lane."""
    zero, one = spread(0.0), spread(1.0)
    omega = load(p, THETA + OMEGA)
    alpha = load(p, THETA + ALPHA)
    beta = load(p, THETA + BETA)
    c = load(p, THETA + C)
    h = load(p, AFTER)
    gamma = load(p, THETA + GAMMA)
    hc = load(p, D + C)
    ho = load(p, D + OMEGA)
    ha = load(p, D + ALPHA)
    hg = load(p, D + GAMMA)
    hb = load(p, D + BETA)
    hcc = load(p, DD + C * COUNT + C)
    hca = load(p, DD + C * COUNT + ALPHA)
    hcg = load(p, DD + C * COUNT + GAMMA)
    hcb = load(p, DD + C * COUNT + BETA)
    hob = load(p, DD + OMEGA * COUNT + BETA)
    hab = load(p, DD + ALPHA * COUNT + BETA)
    hgb = load(p, DD + GAMMA * COUNT + BETA)
    hbb = load(p, DD + BETA * COUNT + BETA)
    gc = zero
    go = zero
    ga = zero
    gg = zero
    gb = zero
    scc = zero
    sco = zero
    sca = zero
    scg = zero
    scb = zero
    soo = zero
    soa = zero
    sog = zero
    sob = zero
    saa = zero
    sag = zero
    sab = zero
    sgg = zero
    sgb = zero
    sbb = zero
    total = zero
    decay, faded, product = one, zero, one
    lag = load(x, 0) if skip else zero
    for t in range(skip, x.shape[0]):
        now = load(x, t)
        e = now - c
        r = 1.0 / h
        square = e * e
        q = square * r
        product = product * h
        total += q
        l1, l2, le, lee, leh = even_terms(e, r, q, 1.0, 1.0)
        if (t & 31) == 31:
            add_logs(p, product)
            product = one
        gc += l1 * hc - le
        go += l1 * ho
        ga += l1 * ha
        gg += l1 * hg
        gb += l1 * hb
        uc = l2 * hc - leh
        uo = l2 * ho
        ua = l2 * ha
        ug = l2 * hg
        ub = l2 * hb
        vc = leh * hc - lee
        scc += l1 * hcc + uc * hc - vc
        sco += uc * ho
        sca += l1 * hca + uc * ha
        scg += l1 * hcg + uc * hg
        scb += l1 * hcb + uc * hb
        soo += uo * ho
        soa += uo * ha
        sog += uo * hg
        sob += l1 * hob + uo * hb
        saa += ua * ha
        sag += ua * hg
        sab += l1 * hab + ua * hb
        sgg += ug * hg
        sgb += l1 * hgb + ug * hb
        sbb += l1 * hbb + ub * hb
        faded += l1 * decay
        decay = decay * beta
        twice = 2.0 * e
        up, rising = where_positive(e, square, zero), where_positive(e, twice, zero)
        slope = where_positive(e, alpha + gamma, alpha)
        slope2, steep = 2.0 * slope, slope * twice
        hcc = beta * hcc + slope2
        hca = beta * hca - twice
        hcg = beta * hcg - rising
        hcb = beta * hcb + hc
        hob = beta * hob + ho
        hab = beta * hab + ha
        hgb = beta * hgb + hg
        hbb = beta * hbb + 2.0 * hb
        hc = beta * hc - steep
        ho = beta * ho + 1.0
        ha = beta * ha + square
        hg = beta * hg + up
        hb = beta * hb + h
        h = omega + alpha * square + gamma * up + beta * h
        lag = now
    add_logs(p, product)
    days = x.shape[0] - skip
    store(p, VALUE, load(p, VALUE) - 0.5 * total - HALF_LOG_2PI * days)
    store(p, AFTER, h)
    store(p, GRADIENT + C, gc)
    store(p, GRADIENT + OMEGA, go)
    store(p, GRADIENT + ALPHA, ga)
    store(p, GRADIENT + GAMMA, gg)
    store(p, GRADIENT + BETA, gb)
    store(p, D + C, hc)
    store(p, D + OMEGA, ho)
    store(p, D + ALPHA, ha)
    store(p, D + GAMMA, hg)
    store(p, D + BETA, hb)
    store(p, HESSIAN + C * COUNT + C, scc)
    store(p, HESSIAN + C * COUNT + OMEGA, sco + load(p, DD + C * COUNT + OMEGA) * faded)
    store(p, HESSIAN + C * COUNT + ALPHA, sca)
    store(p, HESSIAN + C * COUNT + GAMMA, scg)
    store(p, HESSIAN + C * COUNT + BETA, scb)
    store(p, HESSIAN + OMEGA * COUNT + OMEGA, soo + load(p, DD + OMEGA * COUNT + OMEGA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + ALPHA, soa + load(p, DD + OMEGA * COUNT + ALPHA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + GAMMA, sog + load(p, DD + OMEGA * COUNT + GAMMA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + BETA, sob)
    store(p, HESSIAN + ALPHA * COUNT + ALPHA, saa + load(p, DD + ALPHA * COUNT + ALPHA) * faded)
    store(p, HESSIAN + ALPHA * COUNT + GAMMA, sag + load(p, DD + ALPHA * COUNT + GAMMA) * faded)
    store(p, HESSIAN + ALPHA * COUNT + BETA, sab)
    store(p, HESSIAN + GAMMA * COUNT + GAMMA, sgg + load(p, DD + GAMMA * COUNT + GAMMA) * faded)
    store(p, HESSIAN + GAMMA * COUNT + BETA, sgb)
    store(p, HESSIAN + BETA * COUNT + BETA, sbb)


@inner
def constant_gjr_tails(p: np.ndarray, x: np.ndarray, skip: int) -> None:
    """Run a pass: constant mean, gjr variance, tails law; after ``begin`` for every lane."""
    zero, one = spread(0.0), spread(1.0)
    omega = load(p, THETA + OMEGA)
    alpha = load(p, THETA + ALPHA)
    beta = load(p, THETA + BETA)
    c = load(p, THETA + C)
    h = load(p, AFTER)
    gamma = load(p, THETA + GAMMA)
    kappa, kappa1, kappa2 = load(p, LAW + KAPPA), load(p, LAW + KAPPA + 1), load(p, LAW + KAPPA + 2)
    m, m1, m2 = load(p, LAW + M), load(p, LAW + M + 1), load(p, LAW + M + 2)
    logs = zero
    weights = one
    hc = load(p, D + C)
    ho = load(p, D + OMEGA)
    ha = load(p, D + ALPHA)
    hg = load(p, D + GAMMA)
    hb = load(p, D + BETA)
    hcc = load(p, DD + C * COUNT + C)
    hca = load(p, DD + C * COUNT + ALPHA)
    hcg = load(p, DD + C * COUNT + GAMMA)
    hcb = load(p, DD + C * COUNT + BETA)
    hob = load(p, DD + OMEGA * COUNT + BETA)
    hab = load(p, DD + ALPHA * COUNT + BETA)
    hgb = load(p, DD + GAMMA * COUNT + BETA)
    hbb = load(p, DD + BETA * COUNT + BETA)
    gc = zero
    go = zero
    ga = zero
    gg = zero
    gb = zero
    scc = zero
    sco = zero
    sca = zero
    scg = zero
    scb = zero
    soo = zero
    soa = zero
    sog = zero
    sob = zero
    saa = zero
    sag = zero
    sab = zero
    sgg = zero
    sgb = zero
    sbb = zero
    ratio = zero
    fourth = zero
    xce = zero
    xoe = zero
    xae = zero
    xge = zero
    xbe = zero
    decay, faded, product = one, zero, one
    lag = load(x, 0) if skip else zero
    for t in range(skip, x.shape[0]):
        now = load(x, t)
        e = now - c
        r = 1.0 / h
        square = e * e
        q = square * r
        product = product * h
        w = 1.0 + kappa * q
        v = 1.0 / w
        weights = weights * w
        ratio += q * v
        fourth += q * q * v * v
        G = 2.0 * m * kappa * v
        l1, l2, le, lee, leh = even_terms(e, r, q, G, (2.0 - w) * v)
        G_e = 2.0 * (m1 * kappa + m * kappa1) * v - 2.0 * m * kappa * kappa1 * q * v * v
        les, lhs = -1.0 * G_e * e * r, 0.5 * G_e * q * r
        if (t & 31) == 31:
            add_logs(p, product)
            product = one
            logs += each_log(p, weights)
            weights = one
        gc += l1 * hc - le
        go += l1 * ho
        ga += l1 * ha
        gg += l1 * hg
        gb += l1 * hb
        uc = l2 * hc - leh
        uo = l2 * ho
        ua = l2 * ha
        ug = l2 * hg
        ub = l2 * hb
        vc = leh * hc - lee
        scc += l1 * hcc + uc * hc - vc
        sco += uc * ho
        sca += l1 * hca + uc * ha
        scg += l1 * hcg + uc * hg
        scb += l1 * hcb + uc * hb
        soo += uo * ho
        soa += uo * ha
        sog += uo * hg
        sob += l1 * hob + uo * hb
        saa += ua * ha
        sag += ua * hg
        sab += l1 * hab + ua * hb
        sgg += ug * hg
        sgb += l1 * hgb + ug * hb
        sbb += l1 * hbb + ub * hb
        xce += lhs * hc - les
        xoe += lhs * ho
        xae += lhs * ha
        xge += lhs * hg
        xbe += lhs * hb
        faded += l1 * decay
        decay = decay * beta
        twice = 2.0 * e
        up, rising = where_positive(e, square, zero), where_positive(e, twice, zero)
        slope = where_positive(e, alpha + gamma, alpha)
        slope2, steep = 2.0 * slope, slope * twice
        hcc = beta * hcc + slope2
        hca = beta * hca - twice
        hcg = beta * hcg - rising
        hcb = beta * hcb + hc
        hob = beta * hob + ho
        hab = beta * hab + ha
        hgb = beta * hgb + hg
        hbb = beta * hbb + 2.0 * hb
        hc = beta * hc - steep
        ho = beta * ho + 1.0
        ha = beta * ha + square
        hg = beta * hg + up
        hb = beta * hb + h
        h = omega + alpha * square + gamma * up + beta * h
        lag = now
    add_logs(p, product)
    days = x.shape[0] - skip
    logs += each_log(p, weights)
    store(p, VALUE, load(p, VALUE) + load(p, LAW + K) * days - m * logs)
    store(p, AFTER, h)
    store(p, GRADIENT + C, gc)
    store(p, GRADIENT + OMEGA, go)
    store(p, GRADIENT + ALPHA, ga)
    store(p, GRADIENT + GAMMA, gg)
    store(p, GRADIENT + BETA, gb)
    store(p, D + C, hc)
    store(p, D + OMEGA, ho)
    store(p, D + ALPHA, ha)
    store(p, D + GAMMA, hg)
    store(p, D + BETA, hb)
    store(p, HESSIAN + C * COUNT + C, scc)
    store(p, HESSIAN + C * COUNT + OMEGA, sco + load(p, DD + C * COUNT + OMEGA) * faded)
    store(p, HESSIAN + C * COUNT + ALPHA, sca)
    store(p, HESSIAN + C * COUNT + GAMMA, scg)
    store(p, HESSIAN + C * COUNT + BETA, scb)
    store(p, HESSIAN + OMEGA * COUNT + OMEGA, soo + load(p, DD + OMEGA * COUNT + OMEGA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + ALPHA, soa + load(p, DD + OMEGA * COUNT + ALPHA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + GAMMA, sog + load(p, DD + OMEGA * COUNT + GAMMA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + BETA, sob)
    store(p, HESSIAN + ALPHA * COUNT + ALPHA, saa + load(p, DD + ALPHA * COUNT + ALPHA) * faded)
    store(p, HESSIAN + ALPHA * COUNT + GAMMA, sag + load(p, DD + ALPHA * COUNT + GAMMA) * faded)
    store(p, HESSIAN + ALPHA * COUNT + BETA, sab)
    store(p, HESSIAN + GAMMA * COUNT + GAMMA, sgg + load(p, DD + GAMMA * COUNT + GAMMA) * faded)
    store(p, HESSIAN + GAMMA * COUNT + BETA, sgb)
    store(p, HESSIAN + BETA * COUNT + BETA, sbb)
    store(p, HESSIAN + C * COUNT + ETA, xce)
    store(p, HESSIAN + OMEGA * COUNT + ETA, xoe)
    store(p, HESSIAN + ALPHA * COUNT + ETA, xae)
    store(p, HESSIAN + GAMMA * COUNT + ETA, xge)
    store(p, HESSIAN + BETA * COUNT + ETA, xbe)
    store(p, GRADIENT + ETA, load(p, LAW + K + 1) * days - m1 * logs - m * kappa1 * ratio)
    bend = load(p, LAW + K + 2) * days - m2 * logs - (2.0 * m1 * kappa1 + m * kappa2) * ratio
    store(p, HESSIAN + ETA * COUNT + ETA, bend + m * kappa1 * kappa1 * fourth)


@inner
def constant_gjr_skew(p: np.ndarray, x: np.ndarray, skip: int) -> None:
    """Run a pass: constant mean, gjr variance, skew law; after ``begin`` for every lane."""
    zero, one = spread(0.0), spread(1.0)
    omega = load(p, THETA + OMEGA)
    alpha = load(p, THETA + ALPHA)
    beta = load(p, THETA + BETA)
    c = load(p, THETA + C)
    h = load(p, AFTER)
    gamma = load(p, THETA + GAMMA)
    kappa, kappa1, kappa2 = load(p, LAW + KAPPA), load(p, LAW + KAPPA + 1), load(p, LAW + KAPPA + 2)
    m, m1, m2 = load(p, LAW + M), load(p, LAW + M + 1), load(p, LAW + M + 2)
    logs = zero
    weights = one
    turn = load(p, LAW + TURN)
    A_left = load(p, LAW + SIDE[0] + 0)
    A_l_left = load(p, LAW + SIDE[0] + 1)
    A_e_left = load(p, LAW + SIDE[0] + 2)
    A_ll_left = load(p, LAW + SIDE[0] + 3)
    A_le_left = load(p, LAW + SIDE[0] + 4)
    A_ee_left = load(p, LAW + SIDE[0] + 5)
    B_left = load(p, LAW + SIDE[0] + 6)
    B_l_left = load(p, LAW + SIDE[0] + 7)
    B_e_left = load(p, LAW + SIDE[0] + 8)
    B_ll_left = load(p, LAW + SIDE[0] + 9)
    B_le_left = load(p, LAW + SIDE[0] + 10)
    B_ee_left = load(p, LAW + SIDE[0] + 11)
    A_right = load(p, LAW + SIDE[1] + 0)
    A_l_right = load(p, LAW + SIDE[1] + 1)
    A_e_right = load(p, LAW + SIDE[1] + 2)
    A_ll_right = load(p, LAW + SIDE[1] + 3)
    A_le_right = load(p, LAW + SIDE[1] + 4)
    A_ee_right = load(p, LAW + SIDE[1] + 5)
    B_right = load(p, LAW + SIDE[1] + 6)
    B_l_right = load(p, LAW + SIDE[1] + 7)
    B_e_right = load(p, LAW + SIDE[1] + 8)
    B_ll_right = load(p, LAW + SIDE[1] + 9)
    B_le_right = load(p, LAW + SIDE[1] + 10)
    B_ee_right = load(p, LAW + SIDE[1] + 11)
    hc = load(p, D + C)
    ho = load(p, D + OMEGA)
    ha = load(p, D + ALPHA)
    hg = load(p, D + GAMMA)
    hb = load(p, D + BETA)
    hcc = load(p, DD + C * COUNT + C)
    hca = load(p, DD + C * COUNT + ALPHA)
    hcg = load(p, DD + C * COUNT + GAMMA)
    hcb = load(p, DD + C * COUNT + BETA)
    hob = load(p, DD + OMEGA * COUNT + BETA)
    hab = load(p, DD + ALPHA * COUNT + BETA)
    hgb = load(p, DD + GAMMA * COUNT + BETA)
    hbb = load(p, DD + BETA * COUNT + BETA)
    gc = zero
    go = zero
    ga = zero
    gg = zero
    gb = zero
    scc = zero
    sco = zero
    sca = zero
    scg = zero
    scb = zero
    soo = zero
    soa = zero
    sog = zero
    sob = zero
    saa = zero
    sag = zero
    sab = zero
    sgg = zero
    sgb = zero
    sbb = zero
    f_l = zero
    f_e = zero
    f_ll = zero
    f_le = zero
    f_ee = zero
    xce = zero
    xoe = zero
    xae = zero
    xge = zero
    xbe = zero
    xcl = zero
    xol = zero
    xal = zero
    xgl = zero
    xbl = zero
    decay, faded, product = one, zero, one
    lag = load(x, 0) if skip else zero
    for t in range(skip, x.shape[0]):
        now = load(x, t)
        e = now - c
        r = 1.0 / h
        square = e * e
        q = square * r
        product = product * h
        s = square_root(r)
        z = e * s
        side = z - turn
        A = where_positive(side, A_right, A_left)
        A_l = where_positive(side, A_l_right, A_l_left)
        A_e = where_positive(side, A_e_right, A_e_left)
        A_ll = where_positive(side, A_ll_right, A_ll_left)
        A_le = where_positive(side, A_le_right, A_le_left)
        A_ee = where_positive(side, A_ee_right, A_ee_left)
        B = where_positive(side, B_right, B_left)
        B_l = where_positive(side, B_l_right, B_l_left)
        B_e = where_positive(side, B_e_right, B_e_left)
        B_ll = where_positive(side, B_ll_right, B_ll_left)
        B_le = where_positive(side, B_le_right, B_le_left)
        B_ee = where_positive(side, B_ee_right, B_ee_left)
        y, y_l, y_e = A * z + B, A_l * z + B_l, A_e * z + B_e
        w = 1.0 + kappa * y * y
        v = 1.0 / w
        weights = weights * w
        yy = y * y * v
        U, V = 2.0 * m * kappa * y * v, 2.0 * m * kappa * (2.0 - w) * v * v
        U_e = (2.0 * (m1 * kappa + m * kappa1) - 2.0 * m * kappa1 * kappa * yy) * y * v
        l1, l2, le, lee, leh = skew_terms(z, s, r, -1.0 * U * A, -1.0 * V * A * A)
        f_l -= U * y_l
        f_e -= m * kappa1 * yy + U * y_e
        f_ll -= V * y_l * y_l + U * (A_ll * z + B_ll)
        f_le -= U_e * y_l + V * y_l * y_e + U * (A_le * z + B_le)
        f_ee += m * kappa1 * kappa1 * yy * yy - (2.0 * m1 * kappa1 + m * kappa2) * yy
        f_ee -= 2.0 * U_e * y_e + V * y_e * y_e + U * (A_ee * z + B_ee)
        p_l, p_e = -1.0 * (V * y_l * A + U * A_l), -1.0 * ((U_e + V * y_e) * A + U * A_e)
        les, lhs, lls, lhl = p_e * s, -0.5 * z * p_e * r, p_l * s, -0.5 * z * p_l * r
        if (t & 31) == 31:
            add_logs(p, product)
            product = one
            logs += each_log(p, weights)
            weights = one
        gc += l1 * hc - le
        go += l1 * ho
        ga += l1 * ha
        gg += l1 * hg
        gb += l1 * hb
        uc = l2 * hc - leh
        uo = l2 * ho
        ua = l2 * ha
        ug = l2 * hg
        ub = l2 * hb
        vc = leh * hc - lee
        scc += l1 * hcc + uc * hc - vc
        sco += uc * ho
        sca += l1 * hca + uc * ha
        scg += l1 * hcg + uc * hg
        scb += l1 * hcb + uc * hb
        soo += uo * ho
        soa += uo * ha
        sog += uo * hg
        sob += l1 * hob + uo * hb
        saa += ua * ha
        sag += ua * hg
        sab += l1 * hab + ua * hb
        sgg += ug * hg
        sgb += l1 * hgb + ug * hb
        sbb += l1 * hbb + ub * hb
        xce += lhs * hc - les
        xoe += lhs * ho
        xae += lhs * ha
        xge += lhs * hg
        xbe += lhs * hb
        xcl += lhl * hc - lls
        xol += lhl * ho
        xal += lhl * ha
        xgl += lhl * hg
        xbl += lhl * hb
        faded += l1 * decay
        decay = decay * beta
        twice = 2.0 * e
        up, rising = where_positive(e, square, zero), where_positive(e, twice, zero)
        slope = where_positive(e, alpha + gamma, alpha)
        slope2, steep = 2.0 * slope, slope * twice
        hcc = beta * hcc + slope2
        hca = beta * hca - twice
        hcg = beta * hcg - rising
        hcb = beta * hcb + hc
        hob = beta * hob + ho
        hab = beta * hab + ha
        hgb = beta * hgb + hg
        hbb = beta * hbb + 2.0 * hb
        hc = beta * hc - steep
        ho = beta * ho + 1.0
        ha = beta * ha + square
        hg = beta * hg + up
        hb = beta * hb + h
        h = omega + alpha * square + gamma * up + beta * h
        lag = now
    add_logs(p, product)
    days = x.shape[0] - skip
    logs += each_log(p, weights)
    store(p, VALUE, load(p, VALUE) + load(p, LAW + K) * days - m * logs)
    store(p, AFTER, h)
    store(p, GRADIENT + C, gc)
    store(p, GRADIENT + OMEGA, go)
    store(p, GRADIENT + ALPHA, ga)
    store(p, GRADIENT + GAMMA, gg)
    store(p, GRADIENT + BETA, gb)
    store(p, D + C, hc)
    store(p, D + OMEGA, ho)
    store(p, D + ALPHA, ha)
    store(p, D + GAMMA, hg)
    store(p, D + BETA, hb)
    store(p, HESSIAN + C * COUNT + C, scc)
    store(p, HESSIAN + C * COUNT + OMEGA, sco + load(p, DD + C * COUNT + OMEGA) * faded)
    store(p, HESSIAN + C * COUNT + ALPHA, sca)
    store(p, HESSIAN + C * COUNT + GAMMA, scg)
    store(p, HESSIAN + C * COUNT + BETA, scb)
    store(p, HESSIAN + OMEGA * COUNT + OMEGA, soo + load(p, DD + OMEGA * COUNT + OMEGA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + ALPHA, soa + load(p, DD + OMEGA * COUNT + ALPHA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + GAMMA, sog + load(p, DD + OMEGA * COUNT + GAMMA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + BETA, sob)
    store(p, HESSIAN + ALPHA * COUNT + ALPHA, saa + load(p, DD + ALPHA * COUNT + ALPHA) * faded)
    store(p, HESSIAN + ALPHA * COUNT + GAMMA, sag + load(p, DD + ALPHA * COUNT + GAMMA) * faded)
    store(p, HESSIAN + ALPHA * COUNT + BETA, sab)
    store(p, HESSIAN + GAMMA * COUNT + GAMMA, sgg + load(p, DD + GAMMA * COUNT + GAMMA) * faded)
    store(p, HESSIAN + GAMMA * COUNT + BETA, sgb)
    store(p, HESSIAN + BETA * COUNT + BETA, sbb)
    store(p, HESSIAN + C * COUNT + ETA, xce)
    store(p, HESSIAN + OMEGA * COUNT + ETA, xoe)
    store(p, HESSIAN + ALPHA * COUNT + ETA, xae)
    store(p, HESSIAN + GAMMA * COUNT + ETA, xge)
    store(p, HESSIAN + BETA * COUNT + ETA, xbe)
    store(p, HESSIAN + C * COUNT + LAMBDA, xcl)
    store(p, HESSIAN + OMEGA * COUNT + LAMBDA, xol)
    store(p, HESSIAN + ALPHA * COUNT + LAMBDA, xal)
    store(p, HESSIAN + GAMMA * COUNT + LAMBDA, xgl)
    store(p, HESSIAN + BETA * COUNT + LAMBDA, xbl)
    store(p, GRADIENT + ETA, load(p, LAW + K + 1) * days - m1 * logs + f_e)
    store(p, GRADIENT + LAMBDA, load(p, LAW + K_L) * days + f_l)
    store(p, HESSIAN + ETA * COUNT + ETA, load(p, LAW + K + 2) * days - m2 * logs + f_ee)
    store(p, HESSIAN + ETA * COUNT + LAMBDA, load(p, LAW + K_LE) * days + f_le)
    store(p, HESSIAN + LAMBDA * COUNT + LAMBDA, load(p, LAW + K_LL) * days + f_ll)


@inner
def ar1_garch_normal(p: np.ndarray, x: np.ndarray, skip: int) -> None:
    """Run a pass: ar1 mean, garch variance, normal law; after ``begin`` for every lane."""
    zero, one = spread(0.0), spread(1.0)
    omega = load(p, THETA + OMEGA)
    alpha = load(p, THETA + ALPHA)
    beta = load(p, THETA + BETA)
    c = load(p, THETA + C)
    h = load(p, AFTER)
    phi = load(p, THETA + PHI)
    hc = load(p, D + C)
    hp = load(p, D + PHI)
    ho = load(p, D + OMEGA)
    ha = load(p, D + ALPHA)
    hb = load(p, D + BETA)
    hcc = load(p, DD + C * COUNT + C)
    hcp = load(p, DD + C * COUNT + PHI)
    hca = load(p, DD + C * COUNT + ALPHA)
    hcb = load(p, DD + C * COUNT + BETA)
    hpp = load(p, DD + PHI * COUNT + PHI)
    hpa = load(p, DD + PHI * COUNT + ALPHA)
    hpb = load(p, DD + PHI * COUNT + BETA)
    hob = load(p, DD + OMEGA * COUNT + BETA)
    hab = load(p, DD + ALPHA * COUNT + BETA)
    hbb = load(p, DD + BETA * COUNT + BETA)
    gc = zero
    gp = zero
    go = zero
    ga = zero
    gb = zero
    scc = zero
    scp = zero
    sco = zero
    sca = zero
    scb = zero
    spp = zero
    spo = zero
    spa = zero
    spb = zero
    soo = zero
    soa = zero
    sob = zero
    saa = zero
    sab = zero
    sbb = zero
    total = zero
    decay, faded, product = one, zero, one
    lag = load(x, 0) if skip else zero
    for t in range(skip, x.shape[0]):
        now = load(x, t)
        e = now - c - phi * lag
        r = 1.0 / h
        square = e * e
        q = square * r
        product = product * h
        total += q
        l1, l2, le, lee, leh = even_terms(e, r, q, 1.0, 1.0)
        if (t & 31) == 31:
            add_logs(p, product)
            product = one
        gc += l1 * hc - le
        gp += l1 * hp - le * lag
        go += l1 * ho
        ga += l1 * ha
        gb += l1 * hb
        uc = l2 * hc - leh
        up = l2 * hp - leh * lag
        uo = l2 * ho
        ua = l2 * ha
        ub = l2 * hb
        vc = leh * hc - lee
        vp = leh * hp - lee * lag
        scc += l1 * hcc + uc * hc - vc
        scp += l1 * hcp + uc * hp - vc * lag
        sco += uc * ho
        sca += l1 * hca + uc * ha
        scb += l1 * hcb + uc * hb
        spp += l1 * hpp + up * hp - vp * lag
        spo += up * ho
        spa += l1 * hpa + up * ha
        spb += l1 * hpb + up * hb
        soo += uo * ho
        soa += uo * ha
        sob += l1 * hob + uo * hb
        saa += ua * ha
        sab += l1 * hab + ua * hb
        sbb += l1 * hbb + ub * hb
        faded += l1 * decay
        decay = decay * beta
        twice = 2.0 * e
        slope = alpha
        slope2, steep = 2.0 * slope, slope * twice
        hcc = beta * hcc + slope2
        hcp = beta * hcp + slope2 * lag
        hca = beta * hca - twice
        hcb = beta * hcb + hc
        hpp = beta * hpp + slope2 * lag * lag
        hpa = beta * hpa - twice * lag
        hpb = beta * hpb + hp
        hob = beta * hob + ho
        hab = beta * hab + ha
        hbb = beta * hbb + 2.0 * hb
        hc = beta * hc - steep
        hp = beta * hp - steep * lag
        ho = beta * ho + 1.0
        ha = beta * ha + square
        hb = beta * hb + h
        h = omega + alpha * square + beta * h
        lag = now
    add_logs(p, product)
    days = x.shape[0] - skip
    store(p, VALUE, load(p, VALUE) - 0.5 * total - HALF_LOG_2PI * days)
    store(p, AFTER, h)
    store(p, GRADIENT + C, gc)
    store(p, GRADIENT + PHI, gp)
    store(p, GRADIENT + OMEGA, go)
    store(p, GRADIENT + ALPHA, ga)
    store(p, GRADIENT + BETA, gb)
    store(p, D + C, hc)
    store(p, D + PHI, hp)
    store(p, D + OMEGA, ho)
    store(p, D + ALPHA, ha)
    store(p, D + BETA, hb)
    store(p, HESSIAN + C * COUNT + C, scc)
    store(p, HESSIAN + C * COUNT + PHI, scp)
    store(p, HESSIAN + C * COUNT + OMEGA, sco + load(p, DD + C * COUNT + OMEGA) * faded)
    store(p, HESSIAN + C * COUNT + ALPHA, sca)
    store(p, HESSIAN + C * COUNT + BETA, scb)
    store(p, HESSIAN + PHI * COUNT + PHI, spp)
    store(p, HESSIAN + PHI * COUNT + OMEGA, spo + load(p, DD + PHI * COUNT + OMEGA) * faded)
    store(p, HESSIAN + PHI * COUNT + ALPHA, spa)
    store(p, HESSIAN + PHI * COUNT + BETA, spb)
    store(p, HESSIAN + OMEGA * COUNT + OMEGA, soo + load(p, DD + OMEGA * COUNT + OMEGA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + ALPHA, soa + load(p, DD + OMEGA * COUNT + ALPHA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + BETA, sob)
    store(p, HESSIAN + ALPHA * COUNT + ALPHA, saa + load(p, DD + ALPHA * COUNT + ALPHA) * faded)
    store(p, HESSIAN + ALPHA * COUNT + BETA, sab)
    store(p, HESSIAN + BETA * COUNT + BETA, sbb)


@inner
def ar1_garch_tails(p: np.ndarray, x: np.ndarray, skip: int) -> None:
    """Run a pass: ar1 mean, garch variance, tails law; after ``begin`` for every lane."""
    zero, one = spread(0.0), spread(1.0)
    omega = load(p, THETA + OMEGA)
    alpha = load(p, THETA + ALPHA)
    beta = load(p, THETA + BETA)
    c = load(p, THETA + C)
    h = load(p, AFTER)
    phi = load(p, THETA + PHI)
    kappa, kappa1, kappa2 = load(p, LAW + KAPPA), load(p, LAW + KAPPA + 1), load(p, LAW + KAPPA + 2)
    m, m1, m2 = load(p, LAW + M), load(p, LAW + M + 1), load(p, LAW + M + 2)
    logs = zero
    weights = one
    hc = load(p, D + C)
    hp = load(p, D + PHI)
    ho = load(p, D + OMEGA)
    ha = load(p, D + ALPHA)
    hb = load(p, D + BETA)
    hcc = load(p, DD + C * COUNT + C)
    hcp = load(p, DD + C * COUNT + PHI)
    hca = load(p, DD + C * COUNT + ALPHA)
    hcb = load(p, DD + C * COUNT + BETA)
    hpp = load(p, DD + PHI * COUNT + PHI)
    hpa = load(p, DD + PHI * COUNT + ALPHA)
    hpb = load(p, DD + PHI * COUNT + BETA)
    hob = load(p, DD + OMEGA * COUNT + BETA)
    hab = load(p, DD + ALPHA * COUNT + BETA)
    hbb = load(p, DD + BETA * COUNT + BETA)
    gc = zero
    gp = zero
    go = zero
    ga = zero
    gb = zero
    scc = zero
    scp = zero
    sco = zero
    sca = zero
    scb = zero
    spp = zero
    spo = zero
    spa = zero
    spb = zero
    soo = zero
    soa = zero
    sob = zero
    saa = zero
    sab = zero
    sbb = zero
    ratio = zero
    fourth = zero
    xce = zero
    xpe = zero
    xoe = zero
    xae = zero
    xbe = zero
    decay, faded, product = one, zero, one
    lag = load(x, 0) if skip else zero
    for t in range(skip, x.shape[0]):
        now = load(x, t)
        e = now - c - phi * lag
        r = 1.0 / h
        square = e * e
        q = square * r
        product = product * h
        w = 1.0 + kappa * q
        v = 1.0 / w
        weights = weights * w
        ratio += q * v
        fourth += q * q * v * v
        G = 2.0 * m * kappa * v
        l1, l2, le, lee, leh = even_terms(e, r, q, G, (2.0 - w) * v)
        G_e = 2.0 * (m1 * kappa + m * kappa1) * v - 2.0 * m * kappa * kappa1 * q * v * v
        les, lhs = -1.0 * G_e * e * r, 0.5 * G_e * q * r
        if (t & 31) == 31:
            add_logs(p, product)
            product = one
            logs += each_log(p, weights)
            weights = one
        gc += l1 * hc - le
        gp += l1 * hp - le * lag
        go += l1 * ho
        ga += l1 * ha
        gb += l1 * hb
        uc = l2 * hc - leh
        up = l2 * hp - leh * lag
        uo = l2 * ho
        ua = l2 * ha
        ub = l2 * hb
        vc = leh * hc - lee
        vp = leh * hp - lee * lag
        scc += l1 * hcc + uc * hc - vc
        scp += l1 * hcp + uc * hp - vc * lag
        sco += uc * ho
        sca += l1 * hca + uc * ha
        scb += l1 * hcb + uc * hb
        spp += l1 * hpp + up * hp - vp * lag
        spo += up * ho
        spa += l1 * hpa + up * ha
        spb += l1 * hpb + up * hb
        soo += uo * ho
        soa += uo * ha
        sob += l1 * hob + uo * hb
        saa += ua * ha
        sab += l1 * hab + ua * hb
        sbb += l1 * hbb + ub * hb
        xce += lhs * hc - les
        xpe += lhs * hp - les * lag
        xoe += lhs * ho
        xae += lhs * ha
        xbe += lhs * hb
        faded += l1 * decay
        decay = decay * beta
        twice = 2.0 * e
        slope = alpha
        slope2, steep = 2.0 * slope, slope * twice
        hcc = beta * hcc + slope2
        hcp = beta * hcp + slope2 * lag
        hca = beta * hca - twice
        hcb = beta * hcb + hc
        hpp = beta * hpp + slope2 * lag * lag
        hpa = beta * hpa - twice * lag
        hpb = beta * hpb + hp
        hob = beta * hob + ho
        hab = beta * hab + ha
        hbb = beta * hbb + 2.0 * hb
        hc = beta * hc - steep
        hp = beta * hp - steep * lag
        ho = beta * ho + 1.0
        ha = beta * ha + square
        hb = beta * hb + h
        h = omega + alpha * square + beta * h
        lag = now
    add_logs(p, product)
    days = x.shape[0] - skip
    logs += each_log(p, weights)
    store(p, VALUE, load(p, VALUE) + load(p, LAW + K) * days - m * logs)
    store(p, AFTER, h)
    store(p, GRADIENT + C, gc)
    store(p, GRADIENT + PHI, gp)
    store(p, GRADIENT + OMEGA, go)
    store(p, GRADIENT + ALPHA, ga)
    store(p, GRADIENT + BETA, gb)
    store(p, D + C, hc)
    store(p, D + PHI, hp)
    store(p, D + OMEGA, ho)
    store(p, D + ALPHA, ha)
    store(p, D + BETA, hb)
    store(p, HESSIAN + C * COUNT + C, scc)
    store(p, HESSIAN + C * COUNT + PHI, scp)
    store(p, HESSIAN + C * COUNT + OMEGA, sco + load(p, DD + C * COUNT + OMEGA) * faded)
    store(p, HESSIAN + C * COUNT + ALPHA, sca)
    store(p, HESSIAN + C * COUNT + BETA, scb)
    store(p, HESSIAN + PHI * COUNT + PHI, spp)
    store(p, HESSIAN + PHI * COUNT + OMEGA, spo + load(p, DD + PHI * COUNT + OMEGA) * faded)
    store(p, HESSIAN + PHI * COUNT + ALPHA, spa)
    store(p, HESSIAN + PHI * COUNT + BETA, spb)
    store(p, HESSIAN + OMEGA * COUNT + OMEGA, soo + load(p, DD + OMEGA * COUNT + OMEGA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + ALPHA, soa + load(p, DD + OMEGA * COUNT + ALPHA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + BETA, sob)
    store(p, HESSIAN + ALPHA * COUNT + ALPHA, saa + load(p, DD + ALPHA * COUNT + ALPHA) * faded)
    store(p, HESSIAN + ALPHA * COUNT + BETA, sab)
    store(p, HESSIAN + BETA * COUNT + BETA, sbb)
    store(p, HESSIAN + C * COUNT + ETA, xce)
    store(p, HESSIAN + PHI * COUNT + ETA, xpe)
    store(p, HESSIAN + OMEGA * COUNT + ETA, xoe)
    store(p, HESSIAN + ALPHA * COUNT + ETA, xae)
    store(p, HESSIAN + BETA * COUNT + ETA, xbe)
    store(p, GRADIENT + ETA, load(p, LAW + K + 1) * days - m1 * logs - m * kappa1 * ratio)
    bend = load(p, LAW + K + 2) * days - m2 * logs - (2.0 * m1 * kappa1 + m * kappa2) * ratio
    store(p, HESSIAN + ETA * COUNT + ETA, bend + m * kappa1 * kappa1 * fourth)


@inner
def ar1_garch_skew(p: np.ndarray, x: np.ndarray, skip: int) -> None:
    """Run a pass: ar1 mean, garch variance, skew law; after ``begin`` for every lane."""
    zero, one = spread(0.0), spread(1.0)
    omega = load(p, THETA + OMEGA)
    alpha = load(p, THETA + ALPHA)
    beta = load(p, THETA + BETA)
    c = load(p, THETA + C)
    h = load(p, AFTER)
    phi = load(p, THETA + PHI)
    kappa, kappa1, kappa2 = load(p, LAW + KAPPA), load(p, LAW + KAPPA + 1), load(p, LAW + KAPPA + 2)
    m, m1, m2 = load(p, LAW + M), load(p, LAW + M + 1), load(p, LAW + M + 2)
    logs = zero
    weights = one
    turn = load(p, LAW + TURN)
    A_left = load(p, LAW + SIDE[0] + 0)
    A_l_left = load(p, LAW + SIDE[0] + 1)
    A_e_left = load(p, LAW + SIDE[0] + 2)
    A_ll_left = load(p, LAW + SIDE[0] + 3)
    A_le_left = load(p, LAW + SIDE[0] + 4)
    A_ee_left = load(p, LAW + SIDE[0] + 5)
    B_left = load(p, LAW + SIDE[0] + 6)
    B_l_left = load(p, LAW + SIDE[0] + 7)
    B_e_left = load(p, LAW + SIDE[0] + 8)
    B_ll_left = load(p, LAW + SIDE[0] + 9)
    B_le_left = load(p, LAW + SIDE[0] + 10)
    B_ee_left = load(p, LAW + SIDE[0] + 11)
    A_right = load(p, LAW + SIDE[1] + 0)
    A_l_right = load(p, LAW + SIDE[1] + 1)
    A_e_right = load(p, LAW + SIDE[1] + 2)
    A_ll_right = load(p, LAW + SIDE[1] + 3)
    A_le_right = load(p, LAW + SIDE[1] + 4)
    A_ee_right = load(p, LAW + SIDE[1] + 5)
    B_right = load(p, LAW + SIDE[1] + 6)
    B_l_right = load(p, LAW + SIDE[1] + 7)
    B_e_right = load(p, LAW + SIDE[1] + 8)
    B_ll_right = load(p, LAW + SIDE[1] + 9)
    B_le_right = load(p, LAW + SIDE[1] + 10)
    B_ee_right = load(p, LAW + SIDE[1] + 11)
    hc = load(p, D + C)
    hp = load(p, D + PHI)
    ho = load(p, D + OMEGA)
    ha = load(p, D + ALPHA)
    hb = load(p, D + BETA)
    hcc = load(p, DD + C * COUNT + C)
    hcp = load(p, DD + C * COUNT + PHI)
    hca = load(p, DD + C * COUNT + ALPHA)
    hcb = load(p, DD + C * COUNT + BETA)
    hpp = load(p, DD + PHI * COUNT + PHI)
    hpa = load(p, DD + PHI * COUNT + ALPHA)
    hpb = load(p, DD + PHI * COUNT + BETA)
    hob = load(p, DD + OMEGA * COUNT + BETA)
    hab = load(p, DD + ALPHA * COUNT + BETA)
    hbb = load(p, DD + BETA * COUNT + BETA)
    gc = zero
    gp = zero
    go = zero
    ga = zero
    gb = zero
    scc = zero
    scp = zero
    sco = zero
    sca = zero
    scb = zero
    spp = zero
    spo = zero
    spa = zero
    spb = zero
    soo = zero
    soa = zero
    sob = zero
    saa = zero
    sab = zero
    sbb = zero
    f_l = zero
    f_e = zero
    f_ll = zero
    f_le = zero
    f_ee = zero
    xce = zero
    xpe = zero
    xoe = zero
    xae = zero
    xbe = zero
    xcl = zero
    xpl = zero
    xol = zero
    xal = zero
    xbl = zero
    decay, faded, product = one, zero, one
    lag = load(x, 0) if skip else zero
    for t in range(skip, x.shape[0]):
        now = load(x, t)
        e = now - c - phi * lag
        r = 1.0 / h
        square = e * e
        q = square * r
        product = product * h
        s = square_root(r)
        z = e * s
        side = z - turn
        A = where_positive(side, A_right, A_left)
        A_l = where_positive(side, A_l_right, A_l_left)
        A_e = where_positive(side, A_e_right, A_e_left)
        A_ll = where_positive(side, A_ll_right, A_ll_left)
        A_le = where_positive(side, A_le_right, A_le_left)
        A_ee = where_positive(side, A_ee_right, A_ee_left)
        B = where_positive(side, B_right, B_left)
        B_l = where_positive(side, B_l_right, B_l_left)
        B_e = where_positive(side, B_e_right, B_e_left)
        B_ll = where_positive(side, B_ll_right, B_ll_left)
        B_le = where_positive(side, B_le_right, B_le_left)
        B_ee = where_positive(side, B_ee_right, B_ee_left)
        y, y_l, y_e = A * z + B, A_l * z + B_l, A_e * z + B_e
        w = 1.0 + kappa * y * y
        v = 1.0 / w
        weights = weights * w
        yy = y * y * v
        U, V = 2.0 * m * kappa * y * v, 2.0 * m * kappa * (2.0 - w) * v * v
        U_e = (2.0 * (m1 * kappa + m * kappa1) - 2.0 * m * kappa1 * kappa * yy) * y * v
        l1, l2, le, lee, leh = skew_terms(z, s, r, -1.0 * U * A, -1.0 * V * A * A)
        f_l -= U * y_l
        f_e -= m * kappa1 * yy + U * y_e
        f_ll -= V * y_l * y_l + U * (A_ll * z + B_ll)
        f_le -= U_e * y_l + V * y_l * y_e + U * (A_le * z + B_le)
        f_ee += m * kappa1 * kappa1 * yy * yy - (2.0 * m1 * kappa1 + m * kappa2) * yy
        f_ee -= 2.0 * U_e * y_e + V * y_e * y_e + U * (A_ee * z + B_ee)
        p_l, p_e = -1.0 * (V * y_l * A + U * A_l), -1.0 * ((U_e + V * y_e) * A + U * A_e)
        les, lhs, lls, lhl = p_e * s, -0.5 * z * p_e * r, p_l * s, -0.5 * z * p_l * r
        if (t & 31) == 31:
            add_logs(p, product)
            product = one
            logs += each_log(p, weights)
            weights = one
        gc += l1 * hc - le
        gp += l1 * hp - le * lag
        go += l1 * ho
        ga += l1 * ha
        gb += l1 * hb
        uc = l2 * hc - leh
        up = l2 * hp - leh * lag
        uo = l2 * ho
        ua = l2 * ha
        ub = l2 * hb
        vc = leh * hc - lee
        vp = leh * hp - lee * lag
        scc += l1 * hcc + uc * hc - vc
        scp += l1 * hcp + uc * hp - vc * lag
        sco += uc * ho
        sca += l1 * hca + uc * ha
        scb += l1 * hcb + uc * hb
        spp += l1 * hpp + up * hp - vp * lag
        spo += up * ho
        spa += l1 * hpa + up * ha
        spb += l1 * hpb + up * hb
        soo += uo * ho
        soa += uo * ha
        sob += l1 * hob + uo * hb
        saa += ua * ha
        sab += l1 * hab + ua * hb
        sbb += l1 * hbb + ub * hb
        xce += lhs * hc - les
        xpe += lhs * hp - les * lag
        xoe += lhs * ho
        xae += lhs * ha
        xbe += lhs * hb
        xcl += lhl * hc - lls
        xpl += lhl * hp - lls * lag
        xol += lhl * ho
        xal += lhl * ha
        xbl += lhl * hb
        faded += l1 * decay
        decay = decay * beta
        twice = 2.0 * e
        slope = alpha
        slope2, steep = 2.0 * slope, slope * twice
        hcc = beta * hcc + slope2
        hcp = beta * hcp + slope2 * lag
        hca = beta * hca - twice
        hcb = beta * hcb + hc
        hpp = beta * hpp + slope2 * lag * lag
        hpa = beta * hpa - twice * lag
        hpb = beta * hpb + hp
        hob = beta * hob + ho
        hab = beta * hab + ha
        hbb = beta * hbb + 2.0 * hb
        hc = beta * hc - steep
        hp = beta * hp - steep * lag
        ho = beta * ho + 1.0
        ha = beta * ha + square
        hb = beta * hb + h
        h = omega + alpha * square + beta * h
        lag = now
    add_logs(p, product)
    days = x.shape[0] - skip
    logs += each_log(p, weights)
    store(p, VALUE, load(p, VALUE) + load(p, LAW + K) * days - m * logs)
    store(p, AFTER, h)
    store(p, GRADIENT + C, gc)
    store(p, GRADIENT + PHI, gp)
    store(p, GRADIENT + OMEGA, go)
    store(p, GRADIENT + ALPHA, ga)
    store(p, GRADIENT + BETA, gb)
    store(p, D + C, hc)
    store(p, D + PHI, hp)
    store(p, D + OMEGA, ho)
    store(p, D + ALPHA, ha)
    store(p, D + BETA, hb)
    store(p, HESSIAN + C * COUNT + C, scc)
    store(p, HESSIAN + C * COUNT + PHI, scp)
    store(p, HESSIAN + C * COUNT + OMEGA, sco + load(p, DD + C * COUNT + OMEGA) * faded)
    store(p, HESSIAN + C * COUNT + ALPHA, sca)
    store(p, HESSIAN + C * COUNT + BETA, scb)
    store(p, HESSIAN + PHI * COUNT + PHI, spp)
    store(p, HESSIAN + PHI * COUNT + OMEGA, spo + load(p, DD + PHI * COUNT + OMEGA) * faded)
    store(p, HESSIAN + PHI * COUNT + ALPHA, spa)
    store(p, HESSIAN + PHI * COUNT + BETA, spb)
    store(p, HESSIAN + OMEGA * COUNT + OMEGA, soo + load(p, DD + OMEGA * COUNT + OMEGA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + ALPHA, soa + load(p, DD + OMEGA * COUNT + ALPHA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + BETA, sob)
    store(p, HESSIAN + ALPHA * COUNT + ALPHA, saa + load(p, DD + ALPHA * COUNT + ALPHA) * faded)
    store(p, HESSIAN + ALPHA * COUNT + BETA, sab)
    store(p, HESSIAN + BETA * COUNT + BETA, sbb)
    store(p, HESSIAN + C * COUNT + ETA, xce)
    store(p, HESSIAN + PHI * COUNT + ETA, xpe)
    store(p, HESSIAN + OMEGA * COUNT + ETA, xoe)
    store(p, HESSIAN + ALPHA * COUNT + ETA, xae)
    store(p, HESSIAN + BETA * COUNT + ETA, xbe)
    store(p, HESSIAN + C * COUNT + LAMBDA, xcl)
    store(p, HESSIAN + PHI * COUNT + LAMBDA, xpl)
    store(p, HESSIAN + OMEGA * COUNT + LAMBDA, xol)
    store(p, HESSIAN + ALPHA * COUNT + LAMBDA, xal)
    store(p, HESSIAN + BETA * COUNT + LAMBDA, xbl)
    store(p, GRADIENT + ETA, load(p, LAW + K + 1) * days - m1 * logs + f_e)
    store(p, GRADIENT + LAMBDA, load(p, LAW + K_L) * days + f_l)
    store(p, HESSIAN + ETA * COUNT + ETA, load(p, LAW + K + 2) * days - m2 * logs + f_ee)
    store(p, HESSIAN + ETA * COUNT + LAMBDA, load(p, LAW + K_LE) * days + f_le)
    store(p, HESSIAN + LAMBDA * COUNT + LAMBDA, load(p, LAW + K_LL) * days + f_ll)


@inner
def ar1_gjr_normal(p: np.ndarray, x: np.ndarray, skip: int) -> None:
    """Run a pass: ar1 mean, gjr variance, normal law; after ``begin`` for every lane."""
    zero, one = spread(0.0), spread(1.0)
    omega = load(p, THETA + OMEGA)
    alpha = load(p, THETA + ALPHA)
    beta = load(p, THETA + BETA)
    c = load(p, THETA + C)
    h = load(p, AFTER)
    phi = load(p, THETA + PHI)
    gamma = load(p, THETA + GAMMA)
    hc = load(p, D + C)
    hp = load(p, D + PHI)
    ho = load(p, D + OMEGA)
    ha = load(p, D + ALPHA)
    hg = load(p, D + GAMMA)
    hb = load(p, D + BETA)
    hcc = load(p, DD + C * COUNT + C)
    hcp = load(p, DD + C * COUNT + PHI)
    hca = load(p, DD + C * COUNT + ALPHA)
    hcg = load(p, DD + C * COUNT + GAMMA)
    hcb = load(p, DD + C * COUNT + BETA)
    hpp = load(p, DD + PHI * COUNT + PHI)
    hpa = load(p, DD + PHI * COUNT + ALPHA)
    hpg = load(p, DD + PHI * COUNT + GAMMA)
    hpb = load(p, DD + PHI * COUNT + BETA)
    hob = load(p, DD + OMEGA * COUNT + BETA)
    hab = load(p, DD + ALPHA * COUNT + BETA)
    hgb = load(p, DD + GAMMA * COUNT + BETA)
    hbb = load(p, DD + BETA * COUNT + BETA)
    gc = zero
    gp = zero
    go = zero
    ga = zero
    gg = zero
    gb = zero
    scc = zero
    scp = zero
    sco = zero
    sca = zero
    scg = zero
    scb = zero
    spp = zero
    spo = zero
    spa = zero
    spg = zero
    spb = zero
    soo = zero
    soa = zero
    sog = zero
    sob = zero
    saa = zero
    sag = zero
    sab = zero
    sgg = zero
    sgb = zero
    sbb = zero
    total = zero
    decay, faded, product = one, zero, one
    lag = load(x, 0) if skip else zero
    for t in range(skip, x.shape[0]):
        now = load(x, t)
        e = now - c - phi * lag
        r = 1.0 / h
        square = e * e
        q = square * r
        product = product * h
        total += q
        l1, l2, le, lee, leh = even_terms(e, r, q, 1.0, 1.0)
        if (t & 31) == 31:
            add_logs(p, product)
            product = one
        gc += l1 * hc - le
        gp += l1 * hp - le * lag
        go += l1 * ho
        ga += l1 * ha
        gg += l1 * hg
        gb += l1 * hb
        uc = l2 * hc - leh
        up = l2 * hp - leh * lag
        uo = l2 * ho
        ua = l2 * ha
        ug = l2 * hg
        ub = l2 * hb
        vc = leh * hc - lee
        vp = leh * hp - lee * lag
        scc += l1 * hcc + uc * hc - vc
        scp += l1 * hcp + uc * hp - vc * lag
        sco += uc * ho
        sca += l1 * hca + uc * ha
        scg += l1 * hcg + uc * hg
        scb += l1 * hcb + uc * hb
        spp += l1 * hpp + up * hp - vp * lag
        spo += up * ho
        spa += l1 * hpa + up * ha
        spg += l1 * hpg + up * hg
        spb += l1 * hpb + up * hb
        soo += uo * ho
        soa += uo * ha
        sog += uo * hg
        sob += l1 * hob + uo * hb
        saa += ua * ha
        sag += ua * hg
        sab += l1 * hab + ua * hb
        sgg += ug * hg
        sgb += l1 * hgb + ug * hb
        sbb += l1 * hbb + ub * hb
        faded += l1 * decay
        decay = decay * beta
        twice = 2.0 * e
        up, rising = where_positive(e, square, zero), where_positive(e, twice, zero)
        slope = where_positive(e, alpha + gamma, alpha)
        slope2, steep = 2.0 * slope, slope * twice
        hcc = beta * hcc + slope2
        hcp = beta * hcp + slope2 * lag
        hca = beta * hca - twice
        hcg = beta * hcg - rising
        hcb = beta * hcb + hc
        hpp = beta * hpp + slope2 * lag * lag
        hpa = beta * hpa - twice * lag
        hpg = beta * hpg - rising * lag
        hpb = beta * hpb + hp
        hob = beta * hob + ho
        hab = beta * hab + ha
        hgb = beta * hgb + hg
        hbb = beta * hbb + 2.0 * hb
        hc = beta * hc - steep
        hp = beta * hp - steep * lag
        ho = beta * ho + 1.0
        ha = beta * ha + square
        hg = beta * hg + up
        hb = beta * hb + h
        h = omega + alpha * square + gamma * up + beta * h
        lag = now
    add_logs(p, product)
    days = x.shape[0] - skip
    store(p, VALUE, load(p, VALUE) - 0.5 * total - HALF_LOG_2PI * days)
    store(p, AFTER, h)
    store(p, GRADIENT + C, gc)
    store(p, GRADIENT + PHI, gp)
    store(p, GRADIENT + OMEGA, go)
    store(p, GRADIENT + ALPHA, ga)
    store(p, GRADIENT + GAMMA, gg)
    store(p, GRADIENT + BETA, gb)
    store(p, D + C, hc)
    store(p, D + PHI, hp)
    store(p, D + OMEGA, ho)
    store(p, D + ALPHA, ha)
    store(p, D + GAMMA, hg)
    store(p, D + BETA, hb)
    store(p, HESSIAN + C * COUNT + C, scc)
    store(p, HESSIAN + C * COUNT + PHI, scp)
    store(p, HESSIAN + C * COUNT + OMEGA, sco + load(p, DD + C * COUNT + OMEGA) * faded)
    store(p, HESSIAN + C * COUNT + ALPHA, sca)
    store(p, HESSIAN + C * COUNT + GAMMA, scg)
    store(p, HESSIAN + C * COUNT + BETA, scb)
    store(p, HESSIAN + PHI * COUNT + PHI, spp)
    store(p, HESSIAN + PHI * COUNT + OMEGA, spo + load(p, DD + PHI * COUNT + OMEGA) * faded)
    store(p, HESSIAN + PHI * COUNT + ALPHA, spa)
    store(p, HESSIAN + PHI * COUNT + GAMMA, spg)
    store(p, HESSIAN + PHI * COUNT + BETA, spb)
    store(p, HESSIAN + OMEGA * COUNT + OMEGA, soo + load(p, DD + OMEGA * COUNT + OMEGA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + ALPHA, soa + load(p, DD + OMEGA * COUNT + ALPHA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + GAMMA, sog + load(p, DD + OMEGA * COUNT + GAMMA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + BETA, sob)
    store(p, HESSIAN + ALPHA * COUNT + ALPHA, saa + load(p, DD + ALPHA * COUNT + ALPHA) * faded)
    store(p, HESSIAN + ALPHA * COUNT + GAMMA, sag + load(p, DD + ALPHA * COUNT + GAMMA) * faded)
    store(p, HESSIAN + ALPHA * COUNT + BETA, sab)
    store(p, HESSIAN + GAMMA * COUNT + GAMMA, sgg + load(p, DD + GAMMA * COUNT + GAMMA) * faded)
    store(p, HESSIAN + GAMMA * COUNT + BETA, sgb)
    store(p, HESSIAN + BETA * COUNT + BETA, sbb)


@inner
def ar1_gjr_tails(p: np.ndarray, x: np.ndarray, skip: int) -> None:
    """Run a pass: ar1 mean, gjr variance, tails law; after ``begin`` for every lane."""
    zero, one = spread(0.0), spread(1.0)
    omega = load(p, THETA + OMEGA)
    alpha = load(p, THETA + ALPHA)
    beta = load(p, THETA + BETA)
    c = load(p, THETA + C)
    h = load(p, AFTER)
    phi = load(p, THETA + PHI)
    gamma = load(p, THETA + GAMMA)
    kappa, kappa1, kappa2 = load(p, LAW + KAPPA), load(p, LAW + KAPPA + 1), load(p, LAW + KAPPA + 2)
    m, m1, m2 = load(p, LAW + M), load(p, LAW + M + 1), load(p, LAW + M + 2)
    logs = zero
    weights = one
    hc = load(p, D + C)
    hp = load(p, D + PHI)
    ho = load(p, D + OMEGA)
    ha = load(p, D + ALPHA)
    hg = load(p, D + GAMMA)
    hb = load(p, D + BETA)
    hcc = load(p, DD + C * COUNT + C)
    hcp = load(p, DD + C * COUNT + PHI)
    hca = load(p, DD + C * COUNT + ALPHA)
    hcg = load(p, DD + C * COUNT + GAMMA)
    hcb = load(p, DD + C * COUNT + BETA)
    hpp = load(p, DD + PHI * COUNT + PHI)
    hpa = load(p, DD + PHI * COUNT + ALPHA)
    hpg = load(p, DD + PHI * COUNT + GAMMA)
    hpb = load(p, DD + PHI * COUNT + BETA)
    hob = load(p, DD + OMEGA * COUNT + BETA)
    hab = load(p, DD + ALPHA * COUNT + BETA)
    hgb = load(p, DD + GAMMA * COUNT + BETA)
    hbb = load(p, DD + BETA * COUNT + BETA)
    gc = zero
    gp = zero
    go = zero
    ga = zero
    gg = zero
    gb = zero
    scc = zero
    scp = zero
    sco = zero
    sca = zero
    scg = zero
    scb = zero
    spp = zero
    spo = zero
    spa = zero
    spg = zero
    spb = zero
    soo = zero
    soa = zero
    sog = zero
    sob = zero
    saa = zero
    sag = zero
    sab = zero
    sgg = zero
    sgb = zero
    sbb = zero
    ratio = zero
    fourth = zero
    xce = zero
    xpe = zero
    xoe = zero
    xae = zero
    xge = zero
    xbe = zero
    decay, faded, product = one, zero, one
    lag = load(x, 0) if skip else zero
    for t in range(skip, x.shape[0]):
        now = load(x, t)
        e = now - c - phi * lag
        r = 1.0 / h
        square = e * e
        q = square * r
        product = product * h
        w = 1.0 + kappa * q
        v = 1.0 / w
        weights = weights * w
        ratio += q * v
        fourth += q * q * v * v
        G = 2.0 * m * kappa * v
        l1, l2, le, lee, leh = even_terms(e, r, q, G, (2.0 - w) * v)
        G_e = 2.0 * (m1 * kappa + m * kappa1) * v - 2.0 * m * kappa * kappa1 * q * v * v
        les, lhs = -1.0 * G_e * e * r, 0.5 * G_e * q * r
        if (t & 31) == 31:
            add_logs(p, product)
            product = one
            logs += each_log(p, weights)
            weights = one
        gc += l1 * hc - le
        gp += l1 * hp - le * lag
        go += l1 * ho
        ga += l1 * ha
        gg += l1 * hg
        gb += l1 * hb
        uc = l2 * hc - leh
        up = l2 * hp - leh * lag
        uo = l2 * ho
        ua = l2 * ha
        ug = l2 * hg
        ub = l2 * hb
        vc = leh * hc - lee
        vp = leh * hp - lee * lag
        scc += l1 * hcc + uc * hc - vc
        scp += l1 * hcp + uc * hp - vc * lag
        sco += uc * ho
        sca += l1 * hca + uc * ha
        scg += l1 * hcg + uc * hg
        scb += l1 * hcb + uc * hb
        spp += l1 * hpp + up * hp - vp * lag
        spo += up * ho
        spa += l1 * hpa + up * ha
        spg += l1 * hpg + up * hg
        spb += l1 * hpb + up * hb
        soo += uo * ho
        soa += uo * ha
        sog += uo * hg
        sob += l1 * hob + uo * hb
        saa += ua * ha
        sag += ua * hg
        sab += l1 * hab + ua * hb
        sgg += ug * hg
        sgb += l1 * hgb + ug * hb
        sbb += l1 * hbb + ub * hb
        xce += lhs * hc - les
        xpe += lhs * hp - les * lag
        xoe += lhs * ho
        xae += lhs * ha
        xge += lhs * hg
        xbe += lhs * hb
        faded += l1 * decay
        decay = decay * beta
        twice = 2.0 * e
        up, rising = where_positive(e, square, zero), where_positive(e, twice, zero)
        slope = where_positive(e, alpha + gamma, alpha)
        slope2, steep = 2.0 * slope, slope * twice
        hcc = beta * hcc + slope2
        hcp = beta * hcp + slope2 * lag
        hca = beta * hca - twice
        hcg = beta * hcg - rising
        hcb = beta * hcb + hc
        hpp = beta * hpp + slope2 * lag * lag
        hpa = beta * hpa - twice * lag
        hpg = beta * hpg - rising * lag
        hpb = beta * hpb + hp
        hob = beta * hob + ho
        hab = beta * hab + ha
        hgb = beta * hgb + hg
        hbb = beta * hbb + 2.0 * hb
        hc = beta * hc - steep
        hp = beta * hp - steep * lag
        ho = beta * ho + 1.0
        ha = beta * ha + square
        hg = beta * hg + up
        hb = beta * hb + h
        h = omega + alpha * square + gamma * up + beta * h
        lag = now
    add_logs(p, product)
    days = x.shape[0] - skip
    logs += each_log(p, weights)
    store(p, VALUE, load(p, VALUE) + load(p, LAW + K) * days - m * logs)
    store(p, AFTER, h)
    store(p, GRADIENT + C, gc)
    store(p, GRADIENT + PHI, gp)
    store(p, GRADIENT + OMEGA, go)
    store(p, GRADIENT + ALPHA, ga)
    store(p, GRADIENT + GAMMA, gg)
    store(p, GRADIENT + BETA, gb)
    store(p, D + C, hc)
    store(p, D + PHI, hp)
    store(p, D + OMEGA, ho)
    store(p, D + ALPHA, ha)
    store(p, D + GAMMA, hg)
    store(p, D + BETA, hb)
    store(p, HESSIAN + C * COUNT + C, scc)
    store(p, HESSIAN + C * COUNT + PHI, scp)
    store(p, HESSIAN + C * COUNT + OMEGA, sco + load(p, DD + C * COUNT + OMEGA) * faded)
    store(p, HESSIAN + C * COUNT + ALPHA, sca)
    store(p, HESSIAN + C * COUNT + GAMMA, scg)
    store(p, HESSIAN + C * COUNT + BETA, scb)
    store(p, HESSIAN + PHI * COUNT + PHI, spp)
    store(p, HESSIAN + PHI * COUNT + OMEGA, spo + load(p, DD + PHI * COUNT + OMEGA) * faded)
    store(p, HESSIAN + PHI * COUNT + ALPHA, spa)
    store(p, HESSIAN + PHI * COUNT + GAMMA, spg)
    store(p, HESSIAN + PHI * COUNT + BETA, spb)
    store(p, HESSIAN + OMEGA * COUNT + OMEGA, soo + load(p, DD + OMEGA * COUNT + OMEGA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + ALPHA, soa + load(p, DD + OMEGA * COUNT + ALPHA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + GAMMA, sog + load(p, DD + OMEGA * COUNT + GAMMA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + BETA, sob)
    store(p, HESSIAN + ALPHA * COUNT + ALPHA, saa + load(p, DD + ALPHA * COUNT + ALPHA) * faded)
    store(p, HESSIAN + ALPHA * COUNT + GAMMA, sag + load(p, DD + ALPHA * COUNT + GAMMA) * faded)
    store(p, HESSIAN + ALPHA * COUNT + BETA, sab)
    store(p, HESSIAN + GAMMA * COUNT + GAMMA, sgg + load(p, DD + GAMMA * COUNT + GAMMA) * faded)
    store(p, HESSIAN + GAMMA * COUNT + BETA, sgb)
    store(p, HESSIAN + BETA * COUNT + BETA, sbb)
    store(p, HESSIAN + C * COUNT + ETA, xce)
    store(p, HESSIAN + PHI * COUNT + ETA, xpe)
    store(p, HESSIAN + OMEGA * COUNT + ETA, xoe)
    store(p, HESSIAN + ALPHA * COUNT + ETA, xae)
    store(p, HESSIAN + GAMMA * COUNT + ETA, xge)
    store(p, HESSIAN + BETA * COUNT + ETA, xbe)
    store(p, GRADIENT + ETA, load(p, LAW + K + 1) * days - m1 * logs - m * kappa1 * ratio)
    bend = load(p, LAW + K + 2) * days - m2 * logs - (2.0 * m1 * kappa1 + m * kappa2) * ratio
    store(p, HESSIAN + ETA * COUNT + ETA, bend + m * kappa1 * kappa1 * fourth)


@inner
def ar1_gjr_skew(p: np.ndarray, x: np.ndarray, skip: int) -> None:
    """Run a pass: ar1 mean, gjr variance, skew law; after ``begin`` for every lane."""
    zero, one = spread(0.0), spread(1.0)
    omega = load(p, THETA + OMEGA)
    alpha = load(p, THETA + ALPHA)
    beta = load(p, THETA + BETA)
    c = load(p, THETA + C)
    h = load(p, AFTER)
    phi = load(p, THETA + PHI)
    gamma = load(p, THETA + GAMMA)
    kappa, kappa1, kappa2 = load(p, LAW + KAPPA), load(p, LAW + KAPPA + 1), load(p, LAW + KAPPA + 2)
    m, m1, m2 = load(p, LAW + M), load(p, LAW + M + 1), load(p, LAW + M + 2)
    logs = zero
    weights = one
    turn = load(p, LAW + TURN)
    A_left = load(p, LAW + SIDE[0] + 0)
    A_l_left = load(p, LAW + SIDE[0] + 1)
    A_e_left = load(p, LAW + SIDE[0] + 2)
    A_ll_left = load(p, LAW + SIDE[0] + 3)
    A_le_left = load(p, LAW + SIDE[0] + 4)
    A_ee_left = load(p, LAW + SIDE[0] + 5)
    B_left = load(p, LAW + SIDE[0] + 6)
    B_l_left = load(p, LAW + SIDE[0] + 7)
    B_e_left = load(p, LAW + SIDE[0] + 8)
    B_ll_left = load(p, LAW + SIDE[0] + 9)
    B_le_left = load(p, LAW + SIDE[0] + 10)
    B_ee_left = load(p, LAW + SIDE[0] + 11)
    A_right = load(p, LAW + SIDE[1] + 0)
    A_l_right = load(p, LAW + SIDE[1] + 1)
    A_e_right = load(p, LAW + SIDE[1] + 2)
    A_ll_right = load(p, LAW + SIDE[1] + 3)
    A_le_right = load(p, LAW + SIDE[1] + 4)
    A_ee_right = load(p, LAW + SIDE[1] + 5)
    B_right = load(p, LAW + SIDE[1] + 6)
    B_l_right = load(p, LAW + SIDE[1] + 7)
    B_e_right = load(p, LAW + SIDE[1] + 8)
    B_ll_right = load(p, LAW + SIDE[1] + 9)
    B_le_right = load(p, LAW + SIDE[1] + 10)
    B_ee_right = load(p, LAW + SIDE[1] + 11)
    hc = load(p, D + C)
    hp = load(p, D + PHI)
    ho = load(p, D + OMEGA)
    ha = load(p, D + ALPHA)
    hg = load(p, D + GAMMA)
    hb = load(p, D + BETA)
    hcc = load(p, DD + C * COUNT + C)
    hcp = load(p, DD + C * COUNT + PHI)
    hca = load(p, DD + C * COUNT + ALPHA)
    hcg = load(p, DD + C * COUNT + GAMMA)
    hcb = load(p, DD + C * COUNT + BETA)
    hpp = load(p, DD + PHI * COUNT + PHI)
    hpa = load(p, DD + PHI * COUNT + ALPHA)
    hpg = load(p, DD + PHI * COUNT + GAMMA)
    hpb = load(p, DD + PHI * COUNT + BETA)
    hob = load(p, DD + OMEGA * COUNT + BETA)
    hab = load(p, DD + ALPHA * COUNT + BETA)
    hgb = load(p, DD + GAMMA * COUNT + BETA)
    hbb = load(p, DD + BETA * COUNT + BETA)
    gc = zero
    gp = zero
    go = zero
    ga = zero
    gg = zero
    gb = zero
    scc = zero
    scp = zero
    sco = zero
    sca = zero
    scg = zero
    scb = zero
    spp = zero
    spo = zero
    spa = zero
    spg = zero
    spb = zero
    soo = zero
    soa = zero
    sog = zero
    sob = zero
    saa = zero
    sag = zero
    sab = zero
    sgg = zero
    sgb = zero
    sbb = zero
    f_l = zero
    f_e = zero
    f_ll = zero
    f_le = zero
    f_ee = zero
    xce = zero
    xpe = zero
    xoe = zero
    xae = zero
    xge = zero
    xbe = zero
    xcl = zero
    xpl = zero
    xol = zero
    xal = zero
    xgl = zero
    xbl = zero
    decay, faded, product = one, zero, one
    lag = load(x, 0) if skip else zero
    for t in range(skip, x.shape[0]):
        now = load(x, t)
        e = now - c - phi * lag
        r = 1.0 / h
        square = e * e
        q = square * r
        product = product * h
        s = square_root(r)
        z = e * s
        side = z - turn
        A = where_positive(side, A_right, A_left)
        A_l = where_positive(side, A_l_right, A_l_left)
        A_e = where_positive(side, A_e_right, A_e_left)
        A_ll = where_positive(side, A_ll_right, A_ll_left)
        A_le = where_positive(side, A_le_right, A_le_left)
        A_ee = where_positive(side, A_ee_right, A_ee_left)
        B = where_positive(side, B_right, B_left)
        B_l = where_positive(side, B_l_right, B_l_left)
        B_e = where_positive(side, B_e_right, B_e_left)
        B_ll = where_positive(side, B_ll_right, B_ll_left)
        B_le = where_positive(side, B_le_right, B_le_left)
        B_ee = where_positive(side, B_ee_right, B_ee_left)
        y, y_l, y_e = A * z + B, A_l * z + B_l, A_e * z + B_e
        w = 1.0 + kappa * y * y
        v = 1.0 / w
        weights = weights * w
        yy = y * y * v
        U, V = 2.0 * m * kappa * y * v, 2.0 * m * kappa * (2.0 - w) * v * v
        U_e = (2.0 * (m1 * kappa + m * kappa1) - 2.0 * m * kappa1 * kappa * yy) * y * v
        l1, l2, le, lee, leh = skew_terms(z, s, r, -1.0 * U * A, -1.0 * V * A * A)
        f_l -= U * y_l
        f_e -= m * kappa1 * yy + U * y_e
        f_ll -= V * y_l * y_l + U * (A_ll * z + B_ll)
        f_le -= U_e * y_l + V * y_l * y_e + U * (A_le * z + B_le)
        f_ee += m * kappa1 * kappa1 * yy * yy - (2.0 * m1 * kappa1 + m * kappa2) * yy
        f_ee -= 2.0 * U_e * y_e + V * y_e * y_e + U * (A_ee * z + B_ee)
        p_l, p_e = -1.0 * (V * y_l * A + U * A_l), -1.0 * ((U_e + V * y_e) * A + U * A_e)
        les, lhs, lls, lhl = p_e * s, -0.5 * z * p_e * r, p_l * s, -0.5 * z * p_l * r
        if (t & 31) == 31:
            add_logs(p, product)
            product = one
            logs += each_log(p, weights)
            weights = one
        gc += l1 * hc - le
        gp += l1 * hp - le * lag
        go += l1 * ho
        ga += l1 * ha
        gg += l1 * hg
        gb += l1 * hb
        uc = l2 * hc - leh
        up = l2 * hp - leh * lag
        uo = l2 * ho
        ua = l2 * ha
        ug = l2 * hg
        ub = l2 * hb
        vc = leh * hc - lee
        vp = leh * hp - lee * lag
        scc += l1 * hcc + uc * hc - vc
        scp += l1 * hcp + uc * hp - vc * lag
        sco += uc * ho
        sca += l1 * hca + uc * ha
        scg += l1 * hcg + uc * hg
        scb += l1 * hcb + uc * hb
        spp += l1 * hpp + up * hp - vp * lag
        spo += up * ho
        spa += l1 * hpa + up * ha
        spg += l1 * hpg + up * hg
        spb += l1 * hpb + up * hb
        soo += uo * ho
        soa += uo * ha
        sog += uo * hg
        sob += l1 * hob + uo * hb
        saa += ua * ha
        sag += ua * hg
        sab += l1 * hab + ua * hb
        sgg += ug * hg
        sgb += l1 * hgb + ug * hb
        sbb += l1 * hbb + ub * hb
        xce += lhs * hc - les
        xpe += lhs * hp - les * lag
        xoe += lhs * ho
        xae += lhs * ha
        xge += lhs * hg
        xbe += lhs * hb
        xcl += lhl * hc - lls
        xpl += lhl * hp - lls * lag
        xol += lhl * ho
        xal += lhl * ha
        xgl += lhl * hg
        xbl += lhl * hb
        faded += l1 * decay
        decay = decay * beta
        twice = 2.0 * e
        up, rising = where_positive(e, square, zero), where_positive(e, twice, zero)
        slope = where_positive(e, alpha + gamma, alpha)
        slope2, steep = 2.0 * slope, slope * twice
        hcc = beta * hcc + slope2
        hcp = beta * hcp + slope2 * lag
        hca = beta * hca - twice
        hcg = beta * hcg - rising
        hcb = beta * hcb + hc
        hpp = beta * hpp + slope2 * lag * lag
        hpa = beta * hpa - twice * lag
        hpg = beta * hpg - rising * lag
        hpb = beta * hpb + hp
        hob = beta * hob + ho
        hab = beta * hab + ha
        hgb = beta * hgb + hg
        hbb = beta * hbb + 2.0 * hb
        hc = beta * hc - steep
        hp = beta * hp - steep * lag
        ho = beta * ho + 1.0
        ha = beta * ha + square
        hg = beta * hg + up
        hb = beta * hb + h
        h = omega + alpha * square + gamma * up + beta * h
        lag = now
    add_logs(p, product)
    days = x.shape[0] - skip
    logs += each_log(p, weights)
    store(p, VALUE, load(p, VALUE) + load(p, LAW + K) * days - m * logs)
    store(p, AFTER, h)
    store(p, GRADIENT + C, gc)
    store(p, GRADIENT + PHI, gp)
    store(p, GRADIENT + OMEGA, go)
    store(p, GRADIENT + ALPHA, ga)
    store(p, GRADIENT + GAMMA, gg)
    store(p, GRADIENT + BETA, gb)
    store(p, D + C, hc)
    store(p, D + PHI, hp)
    store(p, D + OMEGA, ho)
    store(p, D + ALPHA, ha)
    store(p, D + GAMMA, hg)
    store(p, D + BETA, hb)
    store(p, HESSIAN + C * COUNT + C, scc)
    store(p, HESSIAN + C * COUNT + PHI, scp)
    store(p, HESSIAN + C * COUNT + OMEGA, sco + load(p, DD + C * COUNT + OMEGA) * faded)
    store(p, HESSIAN + C * COUNT + ALPHA, sca)
    store(p, HESSIAN + C * COUNT + GAMMA, scg)
    store(p, HESSIAN + C * COUNT + BETA, scb)
    store(p, HESSIAN + PHI * COUNT + PHI, spp)
    store(p, HESSIAN + PHI * COUNT + OMEGA, spo + load(p, DD + PHI * COUNT + OMEGA) * faded)
    store(p, HESSIAN + PHI * COUNT + ALPHA, spa)
    store(p, HESSIAN + PHI * COUNT + GAMMA, spg)
    store(p, HESSIAN + PHI * COUNT + BETA, spb)
    store(p, HESSIAN + OMEGA * COUNT + OMEGA, soo + load(p, DD + OMEGA * COUNT + OMEGA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + ALPHA, soa + load(p, DD + OMEGA * COUNT + ALPHA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + GAMMA, sog + load(p, DD + OMEGA * COUNT + GAMMA) * faded)
    store(p, HESSIAN + OMEGA * COUNT + BETA, sob)
    store(p, HESSIAN + ALPHA * COUNT + ALPHA, saa + load(p, DD + ALPHA * COUNT + ALPHA) * faded)
    store(p, HESSIAN + ALPHA * COUNT + GAMMA, sag + load(p, DD + ALPHA * COUNT + GAMMA) * faded)
    store(p, HESSIAN + ALPHA * COUNT + BETA, sab)
    store(p, HESSIAN + GAMMA * COUNT + GAMMA, sgg + load(p, DD + GAMMA * COUNT + GAMMA) * faded)
    store(p, HESSIAN + GAMMA * COUNT + BETA, sgb)
    store(p, HESSIAN + BETA * COUNT + BETA, sbb)
    store(p, HESSIAN + C * COUNT + ETA, xce)
    store(p, HESSIAN + PHI * COUNT + ETA, xpe)
    store(p, HESSIAN + OMEGA * COUNT + ETA, xoe)
    store(p, HESSIAN + ALPHA * COUNT + ETA, xae)
    store(p, HESSIAN + GAMMA * COUNT + ETA, xge)
    store(p, HESSIAN + BETA * COUNT + ETA, xbe)
    store(p, HESSIAN + C * COUNT + LAMBDA, xcl)
    store(p, HESSIAN + PHI * COUNT + LAMBDA, xpl)
    store(p, HESSIAN + OMEGA * COUNT + LAMBDA, xol)
    store(p, HESSIAN + ALPHA * COUNT + LAMBDA, xal)
    store(p, HESSIAN + GAMMA * COUNT + LAMBDA, xgl)
    store(p, HESSIAN + BETA * COUNT + LAMBDA, xbl)
    store(p, GRADIENT + ETA, load(p, LAW + K + 1) * days - m1 * logs + f_e)
    store(p, GRADIENT + LAMBDA, load(p, LAW + K_L) * days + f_l)
    store(p, HESSIAN + ETA * COUNT + ETA, load(p, LAW + K + 2) * days - m2 * logs + f_ee)
    store(p, HESSIAN + ETA * COUNT + LAMBDA, load(p, LAW + K_LE) * days + f_le)
    store(p, HESSIAN + LAMBDA * COUNT + LAMBDA, load(p, LAW + K_LL) * days + f_ll)
