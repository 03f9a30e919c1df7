"""Effect sizes as text: what a test is called, the unit of its estimate, the estimate with its interval."""

from collections.abc import Callable

from backtest.reporting import wording as say
from backtest.reporting.book import Row, given, text

TESTS = {
    "binomial": ("Exact binomial", "share"),
    "kupiec": ("Kupiec, share of failures", "share"),
    "christoffersen-independence": ("Christoffersen, independence", "points"),
    "christoffersen-coverage": ("Christoffersen, coverage", "points"),
    "mcneil-frey": ("McNeil and Frey, ES residuals", "multiple"),
    "acerbi-szekely-2": ("Acerbi and Szekely, statistic 2", "multiple"),
    "diebold-mariano": ("Diebold and Mariano, scores", "score"),
    "basel-zone": ("Zone by rule", "multiplier"),
    "sufficient-var-multiple": ("sufficient multiple of VaR", "multiple"),
    "sufficient-es-multiple": ("sufficient multiple of ES", "multiple"),
}
"""Readable name of a test and the unit of its estimate; a test that is not listed shows its key and a plain number."""
TICK, NO_UNIT = "tick", "no unit"
_UNITS: dict[str, Callable[[float], str]] = {
    "share": say.percent,
    "points": lambda value: f"{say.points(value)} points",
    "number": say.number,
    "multiple": lambda value: f"{say.multiple(value)} times",
    "multiplier": say.multiple,
}


def test_name(test: str) -> str:
    """Return the readable name of a test, its key where it has none."""
    return TESTS.get(test, (test, ""))[0]


def estimate(row: Row, currency: str) -> str:
    """Return the effect size of a result with its interval, in its unit; a dash where there is none."""
    value, low, high = (given(row[c]) for c in ("estimate", "low", "high"))
    unit = TESTS.get(row["test"], ("", "number"))[1]
    if value is None:
        return say.DASH
    if unit == "score":
        return _score(row, value, low, high, currency)
    show = _UNITS[unit]
    if unit == "multiple":
        return f"{show(value)} [{say.interval(low, high)}]"
    if low is None or high is None:
        return show(value)
    return f"{show(value)} [{show(low).removesuffix(' points')} to {show(high).removesuffix(' points')}]"


def score_amount(value: float, money: bool, currency: str) -> str:
    """Return a difference of scores: in money where the score is in the unit of the P&L, else a plain number."""
    return say.money(value, currency) if money else say.number(value, 3)


def _score(row: Row, value: float, low: float | None, high: float | None, currency: str) -> str:
    """Return a score difference; the record says in its direction or note which score it is."""
    said = f"{text(row['direction'])} {text(row['note'])}"
    money = f"{TICK} score" in said
    shown = score_amount(value, money, currency)
    if low is not None and high is not None:
        shown += f" [{score_amount(low, money, currency)} to {score_amount(high, money, currency)}]"
    return f"{shown} (FZ0, {NO_UNIT})" if "FZ0 score" in said and not money else shown
