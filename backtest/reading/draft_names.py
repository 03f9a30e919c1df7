"""What a column's name says: which key it is, and for risk columns the measure, the level and the horizon."""

import re
from dataclasses import dataclass

KEYS = {
    "date": ("date", "business_date", "cob_date", "cob", "as_of_date", "asof_date", "value_date", "day", "datum",
             "trade_date", "position_date", "reporting_date"),
    "desk": ("desk", "desk_id", "desk_name", "book", "portfolio", "trading_desk", "business_unit", "unit", "deskname"),
    "currency": ("currency", "ccy", "curr", "crncy"),
    "known_on": ("known_on", "known_at", "restated_on", "revision_date", "load_date", "version_date"),
    "flag": ("flag", "data_flag"),
    "model": ("model", "model_name", "var_model", "model_id"),
    "level": ("level", "confidence", "confidence_level", "conf_level", "quantile"),
    "sigma": ("sigma", "volatility", "vol"),
    "pit": ("pit",),
}  # fmt: skip
PNL_WORDS = {
    "hypothetical": ("hypothetical", "hyp", "hypo", "hpl", "clean"),
    "actual": ("actual", "act", "apl", "dirty"),
    "risk_theoretical": ("risk_theoretical", "rtpl", "theoretical"),
    "risk_theoretical_aligned": ("risk_theoretical_aligned", "rtpl_aligned", "aligned_rtpl", "theoretical_aligned"),
}
_PNL_MARKS = ("profit_and_loss", "profit_loss", "pnl", "p_l", "pl", "loss", "losses")
_RUN_TOGETHER = {
    kind: {
        "".join(pair).replace("_", "") for word in words for mark in _PNL_MARKS for pair in ((word, mark), (mark, word))
    }
    for kind, words in PNL_WORDS.items()
}
"""Names such as HypPnL or pnlactual, in which nothing parts the words."""
_MEASURES = {"var": "var", "es": "es", "cvar": "es", "etl": "es", "expected_shortfall": "es", "shortfall": "es"}
_MEASURE = re.compile(r"(?:^|_)(" + "|".join(sorted(_MEASURES, key=len, reverse=True)) + r")(?=_|\d|$)")
_HORIZON = re.compile(r"(?:^|_)(\d+)_?(?:d|day|days)(?=_|$)")
_OTHER_RISK = ("stressed", "stress", "svar", "incremental", "component", "marginal", "limit", "diversified")


@dataclass(frozen=True, slots=True)
class RiskColumn:
    """A column that looks like VaR or ES: ``level`` None where the name has none; ``why_not`` where it is not ours."""

    column: str
    measure: str
    level: float | None
    why_not: str = ""


def plain(name: str) -> str:
    """Return a name in lower case with underscores for everything that is no letter or digit."""
    return re.sub(r"[^a-z0-9]+", "_", name.lower()).strip("_")


def key_of(name: str) -> str | None:
    """Return the key whose usual names include this one, or None."""
    return next((key for key, usual in KEYS.items() if plain(name) in usual), None)


def pnl_kind(name: str) -> str | None:
    """Return the P&L kind a name says, "any" for P&L of no named kind, or None."""
    text = plain(name)
    bare, marked = text, False
    for mark in _PNL_MARKS:
        shorter = re.sub(rf"(?:^|_){mark}(?=_|$)", "", bare).strip("_")
        marked, bare = marked or shorter != bare, shorter
    for kind, words in PNL_WORDS.items():
        if text in words or bare in words or text.replace("_", "") in _RUN_TOGETHER[kind]:
            return kind
    return "any" if marked and not bare else None


def says_loss(name: str) -> bool:
    """Say whether a P&L column's name speaks of losses alone."""
    text = plain(name)
    return bool(re.search(r"loss(es)?(?=_|$)", text)) and "profit" not in text


def risk_column(name: str) -> RiskColumn | None:
    """Read measure and level from names such as VaR_99_1d, es_975, var975, 1d_var_97_5; None for other names."""
    text = plain(name)
    horizon = _HORIZON.search(text)
    bare = _HORIZON.sub("", text).strip("_")
    found = _MEASURE.search(bare)
    if found is None:
        return None
    measure = _MEASURES[found[1]]
    words = [word for word in _OTHER_RISK if word in bare.split("_")]
    if words:
        return RiskColumn(name, measure, None, f"its name says {words[0]!r}")
    if horizon and int(horizon[1]) != 1:
        return RiskColumn(name, measure, None, f"its name says {horizon[1]} days, judged are one-day forecasts")
    return RiskColumn(name, measure, _level("".join(re.findall(r"\d+", bare))))


def _level(digits: str) -> float | None:
    """Return 0.975 for 975, 0975 and 97_5; None for what is no usual level."""
    digits = digits.removeprefix("0")
    return float(f"0.{digits}") if re.fullmatch(r"9\d{1,3}", digits) else None
