"""The only place where a number becomes text, and rounding may not change what the number says.

A p-value never reads 0.000 and never lands on the other side of a threshold; a rate stands beside its count; money
carries its unit; an interval without upper limit says so. Absent numbers (None, NaN) are the callers' concern except
in ``cell``, which shows them as a dash.
"""

import datetime as dt
import math
import unicodedata
from collections.abc import Sequence
from decimal import Decimal

import numpy as np
import pandas as pd

DASH = "–"
MINUS = "−"
P_THRESHOLDS = (0.001, 0.01, 0.05, 0.1)


def p_value(p: float, significance: float = 0.05) -> str:
    """Return "p = 0.012", "p < 0.001" or "p > 0.99"; digits shown stay on the side of each threshold where p is."""
    if not 0 <= p <= 1:
        raise ValueError(f"a p-value lies in [0, 1], found {p!r}")
    if p < 0.001:
        return "p < 0.001"
    if p > 0.99:
        return "p > 0.99"
    marks = (*P_THRESHOLDS, significance)
    shown = _apart(p, 3 if p < 0.1 else 2, marks)
    if shown is None:
        mark = min(marks, key=lambda m: abs(m - p))
        return f"p just {'below' if p < mark else 'above'} {mark:g}"
    return f"p = {shown}"


def p_cell(p: float, significance: float = 0.05) -> str:
    """Return a p-value for a table column headed p: "0.012", "< 0.001"."""
    return p_value(p, significance).removeprefix("p ").removeprefix("= ")


def _apart(value: float, decimals: int, marks: Sequence[float], most: int = 6) -> str | None:
    """Return the value with the fewest decimals that keep it on its side of every mark; None where ``most`` do not."""
    for places in range(decimals, most + 1):
        text = f"{value:.{places}f}"
        if all(_side(float(text), m) == _side(value, m) for m in marks):
            return text
    return None


def _side(value: float, mark: float) -> int:
    return (value > mark) - (value < mark)


def level(confidence: float) -> str:
    """Return a confidence level as a percentage: 97.5%, 99%."""
    percent = (Decimal(repr(round(confidence, 12))) * 100).normalize()
    return f"{percent:f}%"


def rate(count: int, days: int, expected_share: float | None = None) -> str:
    """Return "6 of 250 days (2.4%)"; the percentage stays on the side of the expected share where the rate is."""
    if days <= 0:
        return "0 days"
    return f"{whole(count)} of {plural(days, 'day')} ({percent(count / days, expected_share)})"


def percent(share: float, mark: float | None = None) -> str:
    """Return a share as a percentage: two figures below 10%; never 0% for what is not zero, nor on the mark."""
    value = 100 * share
    if value == 0:
        return "0%"
    decimals = 0 if abs(value) >= 99.95 else 1 if abs(value) >= 1 else 1 - math.floor(math.log10(abs(value)))
    marks = (0.0, 100.0) if mark is None else (0.0, 100.0, 100 * mark)
    shown = _apart(value, decimals, marks, most=12) or repr(value)
    return f"{shown.removesuffix('.0')}%"


def expected(days: int, confidence: float) -> str:
    """Return the number of exceptions that the level lets expect: 2.5 for 250 days at 99%."""
    value = days * (1 - confidence)
    return f"{value:.1f}" if value >= 0.95 else f"{value:.2g}"


def whole(count: float | np.integer) -> str:
    """Return a count with thousands separated."""
    return f"{int(count):,}".replace("-", MINUS)


def number(value: float, figures: int = 4) -> str:
    """Return a plain number with that many significant figures; thousands separated, powers of ten only far from 1."""
    if math.isinf(value):
        return "infinite" if value > 0 else f"{MINUS}infinite"
    if value == 0:
        return "0"
    places = max(figures - 1 - math.floor(math.log10(abs(value))), 0)
    text = f"{value:,.{places}f}" if places <= 8 and abs(value) < 1e15 else f"{value:.{figures - 1}e}"
    if "." in text and "e" not in text:
        text = text.rstrip("0").rstrip(".")
    return text.replace("-", MINUS)


def multiple(value: float) -> str:
    """Return a multiple with two decimals, more where two would read 1 though it is not."""
    return _apart(value, 2, (0.0, 1.0)) or (f"just {'below' if value < 1 else 'above'} 1")


def points(value: float) -> str:
    """Return percentage points with one decimal, more where one would read 0 though it is not."""
    return (_apart(value, 1, (0.0,)) or number(value, 1)).replace("-", MINUS)


def ratio(value: float) -> str:
    """Return how many times as large something is: two figures ("1.2", "12")."""
    return multiple(value) if value < 2 else f"{value:.1f}" if value < 9.95 else f"{value:,.0f}"


def interval(low: float | None, high: float | None) -> str:
    """Return "1.03 to 3.08"; where a side is open "at least 1.03; no upper limit at this length", and so on."""
    if low is None and high is None:
        return "no limits at this length"
    if high is None:
        return f"at least {multiple(low or 0.0)}; no upper limit at this length"
    if low is None:
        return f"at most {multiple(high)}; no lower limit at this length"
    return f"{multiple(low)} to {multiple(high)}"


_SCALES = ((1e9, " bn"), (1e6, " m"), (1e3, " k"), (1.0, ""))


def money(amount: float, currency: str) -> str:
    """Return an amount with its unit and scale, three figures: "EUR 3.21 m", "EUR −450 k"."""
    if amount == 0:
        return f"{currency} 0"
    size = float(f"{abs(amount):.3g}")  # rounded first, so that 999.9 thousand is 1.00 m and not 1,000 k
    scale, suffix = next(((s, n) for s, n in _SCALES if size >= s), (1.0, ""))
    scaled = size / scale
    places = max(2 - math.floor(math.log10(scaled)), 0)
    sign = MINUS if amount < 0 else ""
    return f"{currency} {sign}{scaled:,.{places}f}{suffix}"


def axis_scale(largest: float, currency: str) -> tuple[float, str]:
    """Return the divisor and the unit for an axis up to that amount: (1e6, "EUR m")."""
    scale, suffix = next(((s, n) for s, n in _SCALES if abs(largest) >= s), (1.0, ""))
    return scale, f"{currency}{suffix}"


def amount(value: float) -> str:
    """Return an amount in full, thousands separated: whole units from 1,000 up, else four figures."""
    return f"{value:,.0f}".replace("-", MINUS) if abs(value) >= 1000 else number(value)


def date(value: object) -> str:
    """Return a day as ISO text; a dash where there is none."""
    return DASH if value is None or bool(pd.isna(value)) else str(pd.Timestamp(str(value)).date())  # type: ignore[call-overload]


def in_hundred(share: float) -> str:
    """Return a probability as cases in 100: "38 of 100"; the ends read "fewer than 1" and "more than 99"."""
    cases = 100 * share
    if 0.5 < cases < 99.5:
        return f"{cases:.0f} of 100"
    return "fewer than 1 of 100" if cases <= 0.5 else "more than 99 of 100"


def power(share: float) -> str:
    """Return a power beside an answer: "60 in 100"."""
    return in_hundred(share).replace(" of ", " in ")


_TURNING = frozenset(("R", "AL", "RLE", "RLO", "LRE", "LRO", "RLI", "LRI", "FSI"))


def name(text: str) -> str:
    """Return a name as it stands in a sentence: written from right to left it cannot turn the words around it."""
    turning = any(unicodedata.bidirectional(c) in _TURNING for c in text)
    return f"\N{FIRST STRONG ISOLATE}{text}\N{POP DIRECTIONAL ISOLATE}" if turning else text


def listed(names: Sequence[str], most: int = 6) -> str:
    """Return names as a list in words, the first ``most`` and how many more."""
    shown = list(names[:most])
    more = len(names) - len(shown)
    if more > 0:
        return f"{', '.join(shown)} and {more} more"
    return " and ".join([", ".join(shown[:-1]), shown[-1]] if len(shown) > 1 else shown)


def plural(count: int, one: str, many: str = "") -> str:
    """Return a count with its noun: "1 exception", "12 exceptions", "no exceptions"."""
    noun = one if count == 1 else many or one + "s"
    return f"{'no' if count == 0 else whole(count)} {noun}"


def cell(value: object) -> str:
    """Return any recorded value as a table cell: text as it is, numbers in full, days as ISO, absent as a dash."""
    if isinstance(value, str):
        return value or DASH
    if isinstance(value, bool | np.bool_):
        return "yes" if value else "no"
    if value is None or bool(pd.isna(value)):  # type: ignore[call-overload]
        return DASH
    if isinstance(value, dt.date | np.datetime64):
        return date(value)
    if isinstance(value, int | np.integer):
        return whole(value)
    return amount(float(value)) if isinstance(value, float | np.floating) else str(value)
