"""What a review of this length could not see: drawn from a record, and said."""

from backtest.reporting import wording as say
from backtest.reporting.book import Book, given, text
from backtest.reporting.effects import test_name
from backtest.reporting.facts import Hardly, Power, Scope

CAPITAL_ES = "The ten-day stressed ES used for capital was not tested."
UNSEEN = "no evidence, but this test could hardly have seen it"
"""The phrase of a test whose power is below 0.8."""
NAMED = 3
"""Tests named in the sentence before it only counts them."""


def power(book: Book) -> Power | None:
    """Draw the power of the count at this length; None where the run did not record it."""
    kept = book.mapping("power")
    if not kept or given(kept.get("power")) is None:
        return None
    level, nominal, true = (float(kept[k]) for k in ("level", "nominal_rate", "true_rate"))
    return Power(level, nominal, true, int(kept["days"]), float(kept["power"]))


def hardly(book: Book, scope: Scope) -> Hardly | None:
    """Draw the results of the main span whose test could hardly have seen anything; the least power first."""
    rows = book.results(scope.desk, scope.model, place=scope.span.place)
    powers: dict[str, list[float]] = {}
    for row in rows:
        seen = given(row["could_see"])
        if text(row["phrase"]) == UNSEEN and seen is not None:
            powers.setdefault(str(row["test"]), []).append(seen)
    if not powers:
        return None
    tests = sorted(((test, min(found), max(found)) for test, found in powers.items()), key=lambda t: t[1])
    return Hardly(scope.model, sum(map(len, powers.values())), tuple(tests))


def unseen(facts: Power | None, beside_p: bool, weak: Hardly | None = None) -> str:
    """Say what a review of this length cannot see, and what was not tested; ``beside_p``: sentence 1 has a p-value."""
    return " ".join(part for part in (_of_count(facts, beside_p), _of_tests(weak), CAPITAL_ES) if part)


def _of_count(facts: Power | None, beside_p: bool) -> str:
    if facts is None:
        return "The power of the count was not computed."
    other = "; the two-sided p of sentence 1 sees less" if beside_p else ""
    return (
        f"A {say.level(facts.level)} VaR whose true coverage is {say.level(1 - facts.true_rate)} is caught in "
        f"{say.in_hundred(facts.power)} reviews of {say.plural(facts.days, 'day')} (one-sided exact binomial at 5%, "
        f"days independent{other})."
    )


def _of_tests(weak: Hardly | None) -> str:
    if weak is None:
        return ""
    named = [f"{test_name(test)} ({_range(low, high)})" for test, low, high in weak.tests[:NAMED]]
    left = len(weak.tests) - NAMED
    more = f"; and {say.plural(left, 'more test')}" if left > 0 else ""
    return (
        f"{say.plural(weak.results, 'result')} without evidence on {say.name(weak.model)}, of tests that could hardly "
        f"have seen it (power below 80 in 100): {'; '.join(named)}{more}."
    )


def _range(low: float, high: float) -> str:
    least, most = say.power(low), say.power(high)
    return least if least == most else f"{least.removesuffix(' in 100')} to {most}"
