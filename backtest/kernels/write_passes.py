"""Write ``passes.py``: the likelihood pass of every member of the GARCH family, its derivatives written out.

Run ``python backtest/kernels/write_passes.py`` after a change here; a test holds the file to it. Straight lines of
assignments keep the recursions in registers; loops over lists of parameters cost three times as much. The terms:

  gradient  g_i  += l1 h_i + le e_i
  Hessian   s_ij += l1 h_ij + (l2 h_i + leh e_i) h_j + (leh h_i + lee e_i) e_j
  next day  h_i  <- beta h_i + f_i,   h_ij <- beta h_ij + F_ij

with e_c = -1, e_p = -lag, others 0. f: 2 slope e e_i for the mean; 1, e^2, e^2 [e > 0], h for omega, alpha, gamma,
beta. F_ij: 2 slope e_i e_j (mean, mean), 2 e e_i (mean, alpha), 2 e [e > 0] e_i (mean, gamma), h_i (i, beta), 2 h_b
(beta, beta).
"""

from pathlib import Path

LETTERS = {"c": "C", "p": "PHI", "o": "OMEGA", "a": "ALPHA", "g": "GAMMA", "b": "BETA"}
MEANS = {"constant": "c", "ar1": "cp"}
VARIANCES = {"garch": "oab", "gjr": "oagb"}
LAWS = ("normal", "tails", "skew")
HEAD = '''"""Written by write_passes.py, not by hand: one likelihood pass a member, eight pasts at once."""

import numpy as np

from backtest.kernels.compiled import inner
from backtest.kernels.lanes import load, spread, square_root, store, where_positive
from backtest.kernels.laws import K_L, K_LE, K_LL, KAPPA, SIDE, TURN, K, M
from backtest.kernels.parameters import ALPHA, BETA, COUNT, ETA, GAMMA, LAMBDA, OMEGA, PHI, C
from backtest.kernels.terms import (
    AFTER, D, DD, GRADIENT, HALF_LOG_2PI, HESSIAN, LAW, THETA, VALUE, add_logs, each_log, even_terms, skew_terms,
)
'''
E = {"c": "", "p": " * lag"}
"""What -e_i multiplies a term with."""


def pairs(names: str) -> list[tuple[str, str]]:
    """Return the pairs of parameters, the first not after the second."""
    return [(i, j) for n, i in enumerate(names) for j in names[n:]]


def moves(i: str, j: str) -> bool:
    """Tell whether h has a second derivative by i and j that days feed."""
    return j == "b" or (i in "cp" and j in "cpag")


def gradient_lines(names: str) -> list[str]:
    """Return the lines that add a day to the gradient."""
    return [f"g{i} += l1 * h{i}" + (f" - le{E[i]}" if i in E else "") for i in names]


def hessian_lines(names: str) -> list[str]:
    """Return the lines that add a day to the Hessian."""
    lines = [f"u{i} = l2 * h{i}" + (f" - leh{E[i]}" if i in E else "") for i in names]
    lines += [f"v{i} = leh * h{i} - lee{E[i]}" for i in names if i in E]
    for i, j in pairs(names):
        terms = [f"l1 * h{i}{j}"] if moves(i, j) else []
        terms.append(f"u{i} * h{j}")
        lines.append(f"s{i}{j} += " + " + ".join(terms) + (f" - v{i}{E[j]}" if j in E else ""))
    return lines


def step_lines(names: str) -> list[str]:
    """Return the lines that move the derivatives of h to the next day: second ones first, they need the old first."""
    lines = []
    for i, j in pairs(names):
        if not moves(i, j):
            continue
        if j == "b":
            feed = "2.0 * hb" if i == "b" else f"h{i}"
        elif j in E:
            feed = "slope2" + E[i] + E[j]
        else:
            feed = f"{'rising' if j == 'g' else 'twice'}{E[i]}"
        sign = "-" if j in "ag" else "+"
        lines.append(f"h{i}{j} = beta * h{i}{j} {sign} {feed}")
    feeds = {"c": "- steep", "p": "- steep * lag", "o": "+ 1.0", "a": "+ square", "g": "+ up", "b": "+ h"}
    return lines + [f"h{i} = beta * h{i} {feeds[i]}" for i in names]


def law_lines(law: str) -> list[str]:
    """Return the lines that turn e, h into the terms l1, l2, le, lee, leh and add up what the law's shapes need."""
    if law == "normal":
        return ["total += q", "l1, l2, le, lee, leh = even_terms(e, r, q, 1.0, 1.0)"]
    if law == "tails":
        return [
            "w = 1.0 + kappa * q", "v = 1.0 / w", "weights = weights * w", "ratio += q * v", "fourth += q * q * v * v",
            "G = 2.0 * m * kappa * v", "l1, l2, le, lee, leh = even_terms(e, r, q, G, (2.0 - w) * v)",
            "G_e = 2.0 * (m1 * kappa + m * kappa1) * v - 2.0 * m * kappa * kappa1 * q * v * v",
            "les, lhs = -1.0 * G_e * e * r, 0.5 * G_e * q * r",
        ]  # fmt: skip
    sides = [
        f"{name} = where_positive(side, {name}_right, {name}_left)"
        for name in (f"{x}{d}" for x in "AB" for d in DERIVED)
    ]
    return ["s = square_root(r)", "z = e * s", "side = z - turn", *sides, *SKEW]


DERIVED = ("", "_l", "_e", "_ll", "_le", "_ee")
SKEW = [
    "y, y_l, y_e = A * z + B, A_l * z + B_l, A_e * z + B_e",
    "w = 1.0 + kappa * y * y", "v = 1.0 / w", "weights = weights * w", "yy = y * y * v",
    "U, V = 2.0 * m * kappa * y * v, 2.0 * m * kappa * (2.0 - w) * v * v",
    "U_e = (2.0 * (m1 * kappa + m * kappa1) - 2.0 * m * kappa1 * kappa * yy) * y * v",
    "l1, l2, le, lee, leh = skew_terms(z, s, r, -1.0 * U * A, -1.0 * V * A * A)",
    "f_l -= U * y_l", "f_e -= m * kappa1 * yy + U * y_e",
    "f_ll -= V * y_l * y_l + U * (A_ll * z + B_ll)",
    "f_le -= U_e * y_l + V * y_l * y_e + U * (A_le * z + B_le)",
    "f_ee += m * kappa1 * kappa1 * yy * yy - (2.0 * m1 * kappa1 + m * kappa2) * yy",
    "f_ee -= 2.0 * U_e * y_e + V * y_e * y_e + U * (A_ee * z + B_ee)",
    "p_l, p_e = -1.0 * (V * y_l * A + U * A_l), -1.0 * ((U_e + V * y_e) * A + U * A_e)",
    "les, lhs, lls, lhl = p_e * s, -0.5 * z * p_e * r, p_l * s, -0.5 * z * p_l * r",
]  # fmt: skip


def shape_lines(names: str, law: str) -> list[str]:
    """Return the lines that add a day to the cross derivatives with the law's shapes."""
    shapes = {"normal": (), "tails": (("e", "les", "lhs"),), "skew": (("e", "les", "lhs"), ("l", "lls", "lhl"))}[law]
    return [
        f"x{i}{shape} += {by_h} * h{i}" + (f" - {by_e}{E[i]}" if i in E else "")
        for shape, by_e, by_h in shapes
        for i in names
    ]


def opening(names: str, law: str) -> list[str]:
    """Return the lines before the loop: parameters, the first day's derivatives, sums at zero."""
    lines = ["zero, one = spread(0.0), spread(1.0)"]
    lines += [f"{name} = load(p, THETA + {name.upper()})" for name in ("omega", "alpha", "beta")]
    lines += ["c = load(p, THETA + C)", "h = load(p, AFTER)"]
    lines += ["phi = load(p, THETA + PHI)"] if "p" in names else []
    lines += ["gamma = load(p, THETA + GAMMA)"] if "g" in names else []
    if law != "normal":
        lines += ["kappa, kappa1, kappa2 = load(p, LAW + KAPPA), load(p, LAW + KAPPA + 1), load(p, LAW + KAPPA + 2)"]
        lines += [
            "m, m1, m2 = load(p, LAW + M), load(p, LAW + M + 1), load(p, LAW + M + 2)",
            "logs = zero",
            "weights = one",
        ]
    if law == "skew":
        lines += ["turn = load(p, LAW + TURN)"]
        for n, side in enumerate(("left", "right")):
            for k, name in enumerate(f"{x}{d}" for x in "AB" for d in DERIVED):
                lines.append(f"{name}_{side} = load(p, LAW + SIDE[{n}] + {k})")
    lines += [f"h{i} = load(p, D + {LETTERS[i]})" for i in names]
    moving = [(i, j) for i, j in pairs(names) if moves(i, j)]
    lines += [f"h{i}{j} = load(p, DD + {LETTERS[i]} * COUNT + {LETTERS[j]})" for i, j in moving]
    sums = [f"g{i}" for i in names] + [f"s{i}{j}" for i, j in pairs(names)]
    sums += {"normal": ["total"], "tails": ["ratio", "fourth"], "skew": ["f_l", "f_e", "f_ll", "f_le", "f_ee"]}[law]
    sums += [f"x{i}{s}" for s in {"normal": "", "tails": "e", "skew": "el"}[law] for i in names]
    lines += [f"{name} = zero" for name in sums]
    return [*lines, "decay, faded, product = one, zero, one", "lag = load(x, 0) if skip else zero"]


def day(names: str, law: str) -> list[str]:
    """Return the lines of one day."""
    mean = " - phi * lag" if "p" in names else ""
    lines = ["now = load(x, t)", f"e = now - c{mean}", "r = 1.0 / h", "square = e * e", "q = square * r"]
    lines += ["product = product * h", *law_lines(law), "if (t & 31) == 31:", "    add_logs(p, product)"]
    lines += ["    product = one"]
    lines += ["    logs += each_log(p, weights)", "    weights = one"] if law != "normal" else []
    lines += gradient_lines(names) + hessian_lines(names) + shape_lines(names, law)
    lines += ["faded += l1 * decay", "decay = decay * beta", "twice = 2.0 * e"]
    if "g" in names:
        lines += ["up, rising = where_positive(e, square, zero), where_positive(e, twice, zero)"]
        lines += ["slope = where_positive(e, alpha + gamma, alpha)"]
    else:
        lines += ["slope = alpha"]
    lines += ["slope2, steep = 2.0 * slope, slope * twice", *step_lines(names)]
    gjr = " + gamma * up" if "g" in names else ""
    return [*lines, f"h = omega + alpha * square{gjr} + beta * h", "lag = now"]


def closing(names: str, law: str) -> list[str]:
    """Return the lines after the loop: logarithms left over, results stored."""
    lines = ["add_logs(p, product)", "days = x.shape[0] - skip"]
    value = "load(p, VALUE) - 0.5 * total - HALF_LOG_2PI * days"
    if law != "normal":
        lines += ["logs += each_log(p, weights)"]
        value = "load(p, VALUE) + load(p, LAW + K) * days - m * logs"
    lines += [f"store(p, VALUE, {value})", "store(p, AFTER, h)"]
    lines += [f"store(p, GRADIENT + {LETTERS[i]}, g{i})" for i in names]
    lines += [f"store(p, D + {LETTERS[i]}, h{i})" for i in names]
    for i, j in pairs(names):
        extra = "" if moves(i, j) else f" + load(p, DD + {LETTERS[i]} * COUNT + {LETTERS[j]}) * faded"
        lines.append(f"store(p, HESSIAN + {LETTERS[i]} * COUNT + {LETTERS[j]}, s{i}{j}{extra})")
    lines += [
        f"store(p, HESSIAN + {LETTERS[i]} * COUNT + {'ETA' if s == 'e' else 'LAMBDA'}, x{i}{s})"
        for s in {"normal": "", "tails": "e", "skew": "el"}[law]
        for i in names
    ]
    return lines + CLOSING[law]


CLOSING = {
    "normal": [],
    "tails": [
        "store(p, GRADIENT + ETA, load(p, LAW + K + 1) * days - m1 * logs - m * kappa1 * ratio)",
        "bend = load(p, LAW + K + 2) * days - m2 * logs - (2.0 * m1 * kappa1 + m * kappa2) * ratio",
        "store(p, HESSIAN + ETA * COUNT + ETA, bend + m * kappa1 * kappa1 * fourth)",
    ],
    "skew": [
        "store(p, GRADIENT + ETA, load(p, LAW + K + 1) * days - m1 * logs + f_e)",
        "store(p, GRADIENT + LAMBDA, load(p, LAW + K_L) * days + f_l)",
        "store(p, HESSIAN + ETA * COUNT + ETA, load(p, LAW + K + 2) * days - m2 * logs + f_ee)",
        "store(p, HESSIAN + ETA * COUNT + LAMBDA, load(p, LAW + K_LE) * days + f_le)",
        "store(p, HESSIAN + LAMBDA * COUNT + LAMBDA, load(p, LAW + K_LL) * days + f_ll)",
    ],
}


def function(mean: str, variance: str, law: str) -> str:
    """Return one pass as source text."""
    names = MEANS[mean] + VARIANCES[variance]
    head = f"@inner\ndef {mean}_{variance}_{law}(p: np.ndarray, x: np.ndarray, skip: int) -> None:\n"
    doc = f'    """Run a pass: {mean} mean, {variance} variance, {law} law; after ``begin`` for every lane."""\n'
    body = [*opening(names, law), "for t in range(skip, x.shape[0]):", *("    " + line for line in day(names, law))]
    return head + doc + "\n".join("    " + line for line in [*body, *closing(names, law)]) + "\n"


def text() -> str:
    """Return the whole file."""
    members = [function(mean, variance, law) for mean in MEANS for variance in VARIANCES for law in LAWS]
    return HEAD + "\n\n" + "\n\n".join(members)


if __name__ == "__main__":
    Path(__file__).with_name("passes.py").write_text(text(), encoding="utf-8")
