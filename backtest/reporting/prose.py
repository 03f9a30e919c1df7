"""What tests wrote down, as it reads on the page: no column name or symbol of theirs, plural forms, power beside it."""

import re

from backtest.reporting import wording as say
from backtest.reporting.book import Book, Row, given, text
from backtest.reporting.effects import test_name

_WORDS = {
    "could_see:": "power:",
    "pi11 - pi01": "chance of an exception after one less that after none",
    "days against: ": "days against ",
    "needs pit": "needs a PIT",
    "needs L - ES that differ": "needs losses less ES that differ",
    "(L - ES)/sigma": "the loss less ES, over sigma,",
}
_LEVEL = re.compile(r"(?<= at )0\.9\d*\b")
_OUTSIDE_BRACKETS = re.compile(r"; (?![^()]*\))")
_ONE = re.compile(r"(?<![\d.,])1 (exception|day|business day|remark|desk|forecast|review)s\b")


def prose(said: str) -> str:
    """Return a recorded note or phrase in words."""
    for symbol, words in _WORDS.items():
        said = said.replace(symbol, words)
    said = _LEVEL.sub(lambda found: say.level(float(found.group())), said)
    return _ONE.sub(r"1 \1", said)


def answer(row: Row, book: Book) -> str:
    """Return the answer of a result in words, with its power where that is known; a dash where there is none."""
    phrase = text(row["phrase"])
    if phrase == "not tested: needs es":
        return f"not tested: {_lacking_es(row, book)}"
    words = prose(phrase or _of_size(row)) or say.DASH
    power = given(row["could_see"])
    if power is None or given(row["p_value"]) is None:
        return words
    return f"{words} (power{_against(row)} {say.power(power)})"


def _of_size(row: Row) -> str:
    """Say what a result without a phrase has to say: its direction, or why it has no estimate."""
    return text(row["note"]) if given(row["estimate"]) is None else text(row["direction"])


def _against(row: Row) -> str:
    """Say what the power is against, where the result speaks of the other side."""
    few = given(row["exceptions"]) is not None and row["exceptions"] < row["days"] * (1 - row["level"])
    phrase = text(row["phrase"])
    if "too high" in phrase or (row["question"] == "how often" and few):
        return " against VaR too low"
    return " against a tail too thin" if "too heavy" in phrase else ""


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


Said = tuple[str, tuple[float, ...]]
"""A part of a note with the levels it is said of; none where it is said of all."""


def notes_on(rows: list[Row]) -> str:
    """Return the notes of results, test by test, what several tests say once and last.

    A part that is not said of every level names its levels.
    """
    said = _said(rows)
    tests: dict[Said, list[str]] = {}
    for name, parts in said.items():
        for part in parts:
            tests.setdefault(part, []).append(name)
    own = {name: [part for part in parts if len(tests[part]) == 1] for name, parts in said.items()}
    texts = [f"{name}: {_in_words(parts)}." for name, parts in own.items() if parts]
    together: dict[tuple[str, ...], list[Said]] = {}
    for part, of in tests.items():
        if len(of) > 1:
            together.setdefault(tuple(of), []).append(part)
    return " ".join(texts + [f"{'; '.join(of)}: {_in_words(parts)}." for of, parts in together.items()])


def _said(rows: list[Row]) -> dict[str, list[Said]]:
    """Return the parts of the notes of each test, in the order of levels; untested rows without a note do not count."""
    levels: dict[str, dict[float, list[str]]] = {}
    for row in sorted(rows, key=lambda r: r["level"]):
        if parts := _parts(row):
            levels.setdefault(test_name(row["test"]), {}).setdefault(row["level"], []).extend(parts)
    said = {}
    for name, found in levels.items():
        every = dict.fromkeys(part for parts in found.values() for part in parts)
        where = {part: tuple(level for level, parts in found.items() if part in parts) for part in every}
        said[name] = [(part, () if len(at) == len(found) else at) for part, at in where.items()]
    return said


def _in_words(parts: list[Said]) -> str:
    """Return parts as one text: those of every level, then level by level."""
    groups: dict[tuple[float, ...], list[str]] = {}
    for part, at in sorted(parts, key=lambda p: p[1]):
        groups.setdefault(at, []).append(part)
    return "; ".join(f"at {_levels(at)}: {'; '.join(own)}" if at else "; ".join(own) for at, own in groups.items())


def _parts(row: Row) -> list[str]:
    return [prose(part) for part in _OUTSIDE_BRACKETS.split(text(row["note"])) if part]


def _levels(found: tuple[float, ...]) -> str:
    return say.listed([say.level(level) for level in sorted(found)])
