"""Lines of ``tailmark power``: what a review of a stated length could have seen, from the shipped table and exactly."""

from collections.abc import Sequence

from backtest.errors import StudyError, near_miss
from backtest.judging.alternatives import ALPHA, ALTERNATIVES, BETA, FREEDOM
from backtest.judging.answers import SampleTest
from backtest.judging.battery import TESTS
from backtest.judging.phrases import in_hundred
from backtest.judging.power import two_sided_power, upper_power
from backtest.judging.power_table import (
    AGAINST,
    LENGTHS,
    LEVELS,
    SIGNIFICANCE,
    Seen,
    length_used,
    level_used,
    power_table,
)
from backtest.values import fraction, whole

FACTORS = (1.0, 1.5, 2.0, 3.0)
"""True rates, as multiples of the nominal one, of the exact rows."""


def power_lines(days: int, level: float, test: str | None = None) -> list[str]:
    """Return the lines for one length and level: all tests as a table, or one test in words; then exact binomial rows.

    Raises StudyError for an unknown test, a level outside (0.5, 1) or fewer days than one.
    """
    days, level = whole(days, "--days", least=1), fraction(level, "--level", above=0.5, below=1.0)
    if test is not None and test not in TESTS:
        raise StudyError("unknown test", value=test, place="--test", remedy=near_miss(test, TESTS))
    length, known = length_used(days), level_used(level)
    if length is None or known is None:
        simulated = [_not_simulated(days, level)]
    elif test is None:
        simulated = _table(tuple(TESTS), length, known, days)
    else:
        simulated = _in_words(test, length, known, days)
    return [*simulated, "", *_exact(days, level)]


def _not_simulated(days: int, level: float) -> str:
    levels = " and ".join(_percent(known) for known in LEVELS)
    return (
        f"No simulated power at {_percent(level)}, {days} days: the table has {levels}, from {LENGTHS[0]} days on. "
        "Exact rows only."
    )


def _percent(level: float) -> str:
    return f"{100.0 * level:.10g}%"


def _head(length: int, level: float, days: int, seen: Sequence[Seen]) -> list[str]:
    used = "" if length == days else f" (the table's largest length not above {days} days)"
    reviews = " to ".join(str(n) for n in sorted({min(s.reviews for s in seen), max(s.reviews for s in seen)}))
    return [
        f"Simulated power at {_percent(level)}, {length} days{used}.",
        f"Of 100 such reviews, those in which the test rejects at {SIGNIFICANCE:.0%} for the p it shows;",
        f"{reviews} reviews simulated on a GARCH(1,1)-t{FREEDOM:g} path (alpha {ALPHA:.2f}, beta {BETA:.2f});",
        f"error (one standard deviation) up to {50.0 / min(s.reviews for s in seen) ** 0.5:.1f} of 100.",
    ]


def _known(key: str, level: float, length: int) -> dict[str, Seen]:
    """Return what is known of a test by alternative."""
    table = power_table()
    return {a: table[key, level, length, a] for a in ALTERNATIVES if (key, level, length, a) in table}


def _table(keys: Sequence[str], length: int, level: float, days: int) -> list[str]:
    known = {key: seen for key in keys if (seen := _known(key, level, length))}
    if not known:
        return [f"No simulated power at {_percent(level)}, {length} days. Exact rows only."]
    lines = _head(length, level, days, [s for seen in known.values() for s in seen.values()])
    lines += [f"  {a.heading}: {a.words}" for a in ALTERNATIVES.values()]
    lines += ["  *: the alternative of the test's question, the column could_see of a run's results", ""]
    lines += [_row("question", "test", [a.heading for a in ALTERNATIVES.values()])]
    for key, seen in known.items():
        against = AGAINST.get(TESTS[key].question)
        cells = [f"{_of_hundred(s.share)}{'*' if a == against else ' '}" for a, s in seen.items()]
        lines.append(_row(TESTS[key].question, key, cells))
    return lines


def _row(question: str, test: str, cells: Sequence[str]) -> str:
    widths = (len(a.heading) + 1 for a in ALTERNATIVES.values())
    return f"{question:<11}{test:<28}" + "".join(f"{cell:>{w}}" for cell, w in zip(cells, widths, strict=True)).rstrip()


def _of_hundred(share: float) -> str:
    text = in_hundred(share).removeprefix("in ").removesuffix(" of 100 such reviews")
    return {"fewer than 1": "<1", "more than 99": ">99"}.get(text, text)


def _in_words(key: str, length: int, level: float, days: int) -> list[str]:
    test, found = TESTS[key], _known(key, level, length)
    if not found:
        why = "" if isinstance(test, SampleTest) else ": it is no test of one model's forecasts alone"
        return [f"No simulated power for {key}{why}."]
    lines = [f"{key} ({test.question})", *_head(length, level, days, list(found.values()))]
    for name, seen in found.items():
        mark = " (could_see)" if name == AGAINST.get(test.question) else ""
        lines.append(f"  {ALTERNATIVES[name].words}: rejects {in_hundred(seen.share)}{mark}")
    return lines


def _exact(days: int, level: float) -> list[str]:
    rates = [f"{100.0 * factor * (1.0 - level):.3g}%" for factor in FACTORS if factor * (1.0 - level) < 1.0]
    kinds = {"two-sided, the test binomial": two_sided_power, "one-sided, too many exceptions": upper_power}
    lines = [
        f"Exact, count of exceptions at {_percent(level)}, {days} days, independent days, {SIGNIFICANCE:.0%}; of 100:",
        f"{'true rate of exceptions':<40}" + "".join(f"{rate:>9}" for rate in rates),
    ]
    for name, power in kinds.items():
        shares = (_of_hundred(power(days, level, factor, SIGNIFICANCE)) for factor in FACTORS[: len(rates)])
        lines.append(f"{name:<40}" + "".join(f"{share:>9}" for share in shares))
    return lines
