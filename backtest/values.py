"""Values that a caller hands over: whole numbers, fractions, lists; what does not fit is a StudyError."""

import math
import numbers
import operator
from collections.abc import Hashable, Iterable, Mapping
from typing import Any

from backtest.errors import StudyError

LARGEST = 1_000_000
"""Largest whole number taken for days, paths or simulations: beyond it nothing would be computed in a lifetime."""


def whole(value: Any, place: str, *, least: int, most: int | None = LARGEST) -> int:
    """Return a whole number as int; raise StudyError for a bool, a float, text, or one out of ``least`` to ``most``."""
    rule = f"a whole number, at least {least}" + (f", at most {most}" if most is not None else "")
    try:
        number = operator.index(value)
    except TypeError:
        number = None
    if number is None or type(value).__name__ in ("bool", "bool_") or number < least or (most or number) < number:
        raise StudyError("the value cannot be used", value=_named(value), rule=rule, place=place)
    return number


def fraction(value: Any, place: str, *, above: float, below: float, remedy: str = "") -> float:
    """Return a number strictly between ``above`` and ``below`` as float; raise StudyError for anything else."""
    number = math.nan
    real: Any = value if isinstance(value, numbers.Real) and not isinstance(value, bool) else math.nan
    if -1.0 < real < 2.0:  # an integer may be too large for a float
        number = float(real)
    if not above < number < below:
        rule = f"a number between {above:g} and {below:g}, both excluded"
        raise StudyError("the value cannot be used", value=_named(value), rule=rule, place=place, remedy=remedy)
    return number


def listed(value: Any, place: str, example: str) -> tuple[Any, ...]:
    """Return the items of a list; raise StudyError for text, a mapping or what is no list, with an example of one."""
    if isinstance(value, str | bytes | Mapping) or not isinstance(value, Iterable):
        remedy = f"Write a list such as {example}."
        raise StudyError("not a list", value=_named(value), place=place, remedy=remedy)
    try:
        return tuple(value)
    except TypeError:  # an array without dimension
        raise StudyError("not a list", value=_named(value), place=place) from None


def once(values: Iterable[Hashable], place: str) -> None:
    """Raise StudyError where a value stands twice."""
    seen: set[Hashable] = set()
    for value in values:
        if value in seen:
            raise StudyError("a value stands twice", value=value, place=place, remedy="Name it once.")
        seen.add(value)


def levels_of(levels: Any) -> tuple[float, ...]:
    """Return levels (confidences) as floats in the order given; raise StudyError where they cannot be levels."""
    remedy = "A level is a confidence such as 0.99, never 1 or 99."
    found = tuple(
        fraction(level, "levels", above=0.5, below=1.0, remedy=remedy)
        for level in listed(levels, "levels", "[0.975, 0.99]")
    )
    if not found:
        raise StudyError("no level is asked for", place="levels", remedy="Name at least one, such as 0.99.")
    once(found, "levels")
    return found


def _named(value: Any) -> object:
    return "None" if value is None else value
