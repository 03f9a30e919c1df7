"""What tests wrote down, as it reads on the page: no column name or symbol of theirs, plural forms, power beside it."""

import re

from backtest.reporting import wording as say
from backtest.reporting.book import Book, Row, given, text
from backtest.reporting.effects import test_name

_WORDS = {
    "could_see:": "power:",
    "pi11 - pi01": "chance of an exception after one less that after none",
}
BOOTSTRAP = "interval by bootstrap over days, too short with few losses beyond the VaR"
_BOOTSTRAPPED = ("acerbi-szekely-2", "mcneil-frey", "sufficient-es-multiple")
"""Tests whose estimate is the multiple of ES with its bootstrap interval."""
_ONE = re.compile(r"(?<![\d.,])1 (exception|day|business day|remark|desk|forecast|review)s\b")


def prose(said: str) -> str:
    """Return a recorded note or phrase in words."""
    for symbol, words in _WORDS.items():
        said = said.replace(symbol, words)
    return _ONE.sub(r"1 \1", said)


def answer(row: Row, book: Book) -> str:
    """Return the answer of a result in words, with its power where that is known; a dash where there is none."""
    phrase = text(row["phrase"])
    if phrase == "not tested: needs es":
        return f"not tested: {_lacking_es(row, book)}"
    words = prose(phrase or text(row["note"])) or say.DASH
    power = given(row["could_see"])
    if power is None or given(row["p_value"]) is None:
        return words
    against = " against VaR too low" if _on_the_high_side(row) else ""
    return f"{words} (power{against} {say.power(power)})"


def _on_the_high_side(row: Row) -> bool:
    """Say whether the result speaks of VaR too high, which the power is not about."""
    few = given(row["exceptions"]) is not None and row["exceptions"] < row["days"] * (1 - row["level"])
    return "too high" in text(row["phrase"]) or (row["question"] == "how often" and few)


def _lacking_es(row: Row, book: Book) -> str:
    """Say which ES is missing: none at all, none at this level, none on these days."""
    own = book.forecasts(row["desk"])
    own = own[(own["model"] == row["model"]) & own["es"].notna()]
    if own.empty:
        return "needs ES, of which none was given"
    here = own[own["level"] == row["level"]]
    if here.empty:
        levels = say.listed([say.level(v) for v in sorted({float(at) for at in own["level"]})])
        return f"needs ES at {say.level(row['level'])}; it was given at {levels} only"
    return f"needs ES on days judged; it was given on {say.plural(len(here), 'other day')} only"


def notes_on(rows: list[Row]) -> str:
    """Return the notes of results, test by test; a part that is not said of every level names its levels."""
    levels: dict[str, set[float]] = {}
    parts: dict[str, dict[str, set[float]]] = {}
    for row in sorted(rows, key=lambda r: r["level"]):
        name = test_name(row["test"])
        levels.setdefault(name, set()).add(row["level"])
        for part in _parts(row):
            parts.setdefault(name, {}).setdefault(part, set()).add(row["level"])
    said = []
    for name, found in parts.items():
        words = [p if at == levels[name] else f"at {_levels(at)} {p}" for p, at in found.items()]
        said.append(f"{name}: {'; '.join(words)}.")
    return " ".join(said)


def _parts(row: Row) -> list[str]:
    own = [prose(part) for part in text(row["note"]).split("; ") if part]
    labelled = row["test"] in _BOOTSTRAPPED and given(row["low"]) is not None
    return own + [BOOTSTRAP] * (labelled and BOOTSTRAP not in own)


def _levels(found: set[float]) -> str:
    return say.listed([say.level(level) for level in sorted(found)])
