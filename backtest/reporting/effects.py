"""Effect sizes as text: what a test is called, the unit of its estimate, the estimate with its interval."""

from collections.abc import Callable

from backtest.reporting import wording as say
from backtest.reporting.book import Row, given, text

TESTS = {
    "binomial": ("Exact binomial", "share"),
    "kupiec": ("Kupiec, share of failures", "share"),
    "first-exception": ("Kupiec, day of the first exception", "share"),
    "spectral-window": ("Gordy and McNeil, uniform window", "share"),
    "christoffersen-independence": ("Christoffersen, independence", "points"),
    "christoffersen-coverage": ("Christoffersen, coverage", "points"),
    "dynamic-quantile": ("Dynamic quantile", "points"),
    "ljung-box": ("Ljung and Box, exceptions", "points"),
    "duration-weibull": ("Durations, Weibull", "points"),
    "duration-gmm": ("Durations, GMM", "points"),
    "du-escanciano-conditional": ("Du and Escanciano, depths", "points"),
    "mcneil-frey": ("McNeil and Frey, ES residuals", "multiple"),
    "es-zones": ("ES zones", "multiple"),
    "acerbi-szekely-1": ("Acerbi and Szekely, statistic 1", "multiple"),
    "acerbi-szekely-2": ("Acerbi and Szekely, statistic 2", "multiple"),
    "acerbi-szekely-3": ("Acerbi and Szekely, statistic 3", "multiple"),
    "acerbi-szekely-ridge": ("Acerbi and Szekely, minimally biased", "multiple"),
    "nolde-ziegel-one-sided": ("Nolde and Ziegel, one-sided", "multiple"),
    "nolde-ziegel-two-sided": ("Nolde and Ziegel, two-sided", "multiple"),
    "nolde-ziegel-general": ("Nolde and Ziegel, ES residuals", "multiple"),
    "bayer-dimitriadis-intercept": ("Bayer and Dimitriadis, intercept", "multiple"),
    "bayer-dimitriadis-auxiliary": ("Bayer and Dimitriadis, regression", "multiple"),
    "multinomial-nass": ("Multinomial, Nass", "number"),
    "berkowitz": ("Berkowitz, all days", "deviation"),
    "berkowitz-tail": ("Berkowitz, tail", "multiple"),
    "spectral-probit": ("Gordy and McNeil, probit scores", "multiple"),
    "diebold-mariano": ("Diebold and Mariano, scores", "score"),
    "giacomini-white": ("Giacomini and White, scores", "score"),
    "three-zone": ("Nolde and Ziegel, three zones", "score"),
    "confidence-set": ("Model confidence set", "score"),
    "e-process": ("Running evidence", "capital"),
    "basel-zone": ("Zone by rule", "multiplier"),
    "sufficient-var-multiple": ("sufficient multiple of VaR", "multiple"),
    "sufficient-es-multiple": ("sufficient multiple of ES", "multiple"),
}
"""Readable name of a test and the unit of its estimate; a test that is not listed shows its key and a plain number."""
VAST = 1e6
"""Capital of the running evidence above which only this is said."""
TICK, NO_UNIT = "tick", "no unit"
_UNITS: dict[str, Callable[[float], str]] = {
    "share": say.percent,
    "points": lambda value: f"{say.points(value)} points",
    "number": say.number,
    "multiple": lambda value: f"{say.multiple(value)} times",
    "multiplier": say.multiple,
    "deviation": lambda value: f"deviation {say.multiple(value)}",
    "capital": lambda value: (
        f"{say.number(value, 3)} times the start" if value < VAST else "over a million times the start"
    ),
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
    ends = [show(end).removesuffix(" points").removeprefix("deviation ") for end in (low, high)]
    return f"{show(value)} [{ends[0]} to {ends[1]}]"


def score_amount(value: float, money: bool, currency: str) -> str:
    """Return a difference of scores: in money where the score is in the unit of the P&L, else a plain number."""
    return say.money(value, currency) if money else say.number(value, 3)


def mean_score(value: float, money: bool, currency: str) -> str:
    """Return a mean score: in money where the score is in the unit of the P&L, else with three decimals."""
    return say.money(value, currency) if money else f"{value:,.3f}".replace("-", say.MINUS)


def _score(row: Row, value: float, low: float | None, high: float | None, currency: str) -> str:
    """Return a score difference; the record says in its direction or note which score it is."""
    said = f"{text(row['direction'])} {text(row['note'])}"
    money = f"{TICK} score" in said
    shown = score_amount(value, money, currency)
    if low is not None and high is not None:
        shown += f" [{score_amount(low, money, currency)} to {score_amount(high, money, currency)}]"
    return f"{shown} (FZ0, {NO_UNIT})" if "FZ0 score" in said and not money else shown
