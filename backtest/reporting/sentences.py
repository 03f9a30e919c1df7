"""The six sentences of the first page: facts in, words out. No sentence may claim that a model is right."""

from collections.abc import Sequence
from dataclasses import dataclass

from backtest.records import Record
from backtest.reporting import wording as say
from backtest.reporting.book import Book
from backtest.reporting.drawn import main_bridge, often, person, power, scope_of, size, when
from backtest.reporting.facts import Bridge, Count, Often, Person, Power, RuleCount, Scope, Size, Step, Sufficient, When

QUESTIONS = (
    "How often?", "When?", "By how much?", "Why?", "What could this review not see?", "What needs a person?",
)  # fmt: skip
POSITIONS = "Challengers learn from past P&L (or vectors); the reported VaR from current positions."
CAPITAL_ES = "The ten-day stressed ES used for capital was not tested."
NOTHING = "Not tested: the record holds no day with both a forecast and a P&L."


@dataclass(frozen=True)
class Sentence:
    """One of the six: its question and its answer."""

    question: str
    answer: str


def six_sentences(record: Record) -> list[str]:
    """Return the six sentences as plain lines of text, each beginning with its question."""
    return [f"{s.question} {s.answer}" for s in sentences(Book(record))]


def sentences(book: Book) -> tuple[Sentence, ...]:
    """Return the six sentences of a record."""
    scope = scope_of(book)
    if scope is None:
        answers: tuple[str, ...] = (NOTHING,) * 4 + (unseen(power(book)), "A run with days to judge.")
    else:
        answers = (
            how_often(often(book, scope)),
            when_they_fell(when(book, scope)),
            by_how_much(size(book, scope)),
            why(main_bridge(book, scope)),
            unseen(power(book)),
            needs_person(person(book, scope)),
        )
    return tuple(Sentence(q, a) for q, a in zip(QUESTIONS, answers, strict=True))


def about(scope: Scope) -> str:
    """Say which desk and model the first page is about, and why that one."""
    desk, model = say.name(scope.desk), say.name(scope.model)
    who = f"{desk}, the whole firm" if scope.is_firm else desk
    chosen = ""
    if not scope.is_firm and scope.desks > 1:
        chosen = (
            f", of {scope.desks} desks the one whose count is furthest above its expectation; no firm row was judged"
        )
    what = f"the reported model {model}" if scope.is_subject else f"no reported model was supplied, challenger {model}"
    return f"{who}{chosen}; {what}"


def how_often(facts: Often) -> str:
    """Say how often losses exceeded the VaR, beside what the level lets expect."""
    scope = facts.scope
    if not facts.counts:
        return f"Not tested: no count of exceptions was asked for at {say.level(scope.count_level)}."
    level, days = say.level(scope.count_level), max(c.days for c in facts.counts)
    expectation = f"{say.expected(days, scope.count_level)} were to be expected"
    if not scope.is_subject:
        each = ", ".join(f"{say.name(c.name)} {say.whole(c.exceptions)}" for c in facts.counts)
        return (
            f"{say.name(scope.desk)}: no reported VaR was supplied. In {say.whole(days)} days on {scope.kind} P&L "
            f"losses exceeded the challengers' {level} VaR on this many days: {each}; {expectation}."
        )
    counts = " and ".join(f"on {_rate(c, 1 - scope.count_level)} on {c.name} P&L" for c in facts.counts)
    parts = [
        f"{say.name(scope.desk)}: losses exceeded the {level} VaR of {say.name(scope.model)} {counts}; {expectation}."
    ]
    parts += [_evidence(facts.counts, scope), _rule(facts), _length(scope, days, facts.rule)]
    return " ".join(p for p in parts if p)


def _rate(count: Count, share: float) -> str:
    return (
        say.rate(count.exceptions, count.days, share) if count.exceptions else f"none of {say.whole(count.days)} days"
    )


def _evidence(counts: Sequence[Count], scope: Scope) -> str:
    said: dict[str, list[str]] = {}
    for c in counts:
        if c.p is not None:
            said.setdefault(_verdict(c, scope), []).append(f"{say.p_value(c.p, scope.significance)} on {c.name}")
    return " ".join(f"{verdict} ({'; '.join(ps)}; exact binomial)." for verdict, ps in said.items())


def _verdict(count: Count, scope: Scope) -> str:
    if not count.rejected:
        return "The count does not reject the level"
    too_many = count.exceptions > count.days * (1 - scope.count_level)
    return "Evidence that the VaR is too low" if too_many else "So few are evidence that the VaR is too high"


def _rule(facts: Often) -> str:
    rule = facts.rule
    if rule is None:
        return ""
    if rule.count is None or not rule.zone:
        return f"Rule {rule.name}: {rule.note}."
    multiplier = "" if rule.multiplier is None else f", multiplier {say.multiple(rule.multiplier)}"
    more = rule.count > max(c.exceptions for c in facts.counts)
    how = " (days without P&L or VaR count as exceptions)" if more else ""
    return f"Rule {rule.name}: count {say.whole(rule.count)}{how}, {rule.zone}{multiplier}."


def _length(scope: Scope, days: int, rule: RuleCount | None) -> str:
    if scope.wanted_days is None or days >= scope.wanted_days:
        return ""
    zone = "" if rule else ": no zone"
    return f"Only {say.whole(days)} of {say.whole(scope.wanted_days)} days have both a P&L and a forecast{zone}."


def when_they_fell(facts: When) -> str:
    """Say how close together most exceptions fell, and what the independence test says."""
    scope, level = facts.scope, say.level(facts.scope.size_level)
    where = f"the {level} VaR of {say.name(scope.model)} ({scope.kind} P&L, {say.whole(facts.days)} days)"
    independence = _independence(facts)
    if facts.exceptions == 0:
        return f"No loss exceeded {where}, so nothing can be said about when they fall. {independence}"
    if facts.exceptions < 4:
        few = say.plural(facts.exceptions, "loss", "losses")
        return f"{few[0].upper()}{few[1:]} exceeded {where}: too few to speak of clusters. {independence}"
    even = say.whole(round(facts.inside * facts.days / facts.exceptions))
    return (
        f"{facts.inside} of the {facts.exceptions} losses beyond {where} fell within {say.whole(facts.width)} business "
        f"days, {facts.first} to {facts.last}; evenly spread they would take about {even}. {independence}"
    )


def _independence(facts: When) -> str:
    if facts.p is None:
        return f"Independence: {facts.note or 'not tested'}."
    verb = "is rejected" if facts.rejected else "is not rejected, which does not show it"
    p = say.p_value(facts.p, facts.scope.significance)
    return f"Independence from one day to the next {verb} (Christoffersen, {p})."


def by_how_much(facts: Size) -> str:
    """Say which multiple of the VaR, and of the ES, would have sufficed, and what that is in money."""
    parts = [_sufficient(facts.var, facts.scope)] + ([_sufficient(facts.es, facts.scope)] if facts.es else [])
    limits = " Intervals are 95%, if days were independent." if facts.var.estimate is not None else ""
    return " ".join(parts) + limits


def _sufficient(facts: Sufficient, scope: Scope) -> str:
    name = f"{say.level(scope.size_level)} {facts.measure}"
    if facts.estimate is None:
        return f"The multiple of the {name} that would have sufficed: {facts.note or 'not tested'}."
    short = facts.estimate > 1
    verb = "would have had to be" if short else "would have sufficed at"
    size = f"{say.multiple(facts.estimate)} times {'as large' if short else 'its size'}"
    return (
        f"The {name} {verb} {size} ({say.interval(facts.low, facts.high)}){_in_money(facts, scope)}{_holds_one(facts)}."
    )


def _in_money(facts: Sufficient, scope: Scope) -> str:
    if facts.average is None or facts.estimate is None:
        return ""
    before, after = facts.average, facts.average * facts.estimate
    change = f"{say.money(abs(after - before), scope.currency)} {'more' if after > before else 'less'}"
    return f", on average {say.money(after, scope.currency)} instead of {say.money(before, scope.currency)}, {change}"


def _holds_one(facts: Sufficient) -> str:
    apart = (facts.low is not None and facts.low > 1) or (facts.high is not None and facts.high < 1)
    if apart or (facts.low is None and facts.high is None):
        return ""
    return "; the interval holds 1, the size reported"


def why(bridge: Bridge | None) -> str:
    """Say what each step of the bridge changes, over the days that all steps share."""
    if bridge is None or bridge.level is None or not bridge.steps:
        return f"The bridge was not built: {(bridge.note if bridge else '') or 'none was asked for'}."
    head = (
        f"Over {say.whole(bridge.days)} shared days at {say.level(bridge.level)} "
        f"({say.expected(bridge.days, bridge.level)} exceptions expected)"
    )
    taken = [s for s in bridge.steps if s.exceptions is not None and s.average_var is not None]
    left = [f"{s.name} {s.note}" for s in bridge.steps if s not in taken and s.note]
    counts = "; ".join(_step(s, bridge.currency, i == 0) for i, s in enumerate(taken))
    parts = [f"{head}: {counts}.", _gain(taken), _price(taken)] + [f"Not in it: {'; '.join(left)}."] * bool(left)
    return " ".join(p for p in parts if p)


def _step(step: Step, currency: str, first: bool) -> str:
    shown = say.money(step.average_var or 0.0, currency)
    label = "" if not first else " exceptions at an average VaR of"
    return f"{step.name} {say.whole(step.exceptions or 0)}{label or ' at'} {shown}"


def _gain(steps: Sequence[Step]) -> str:
    known = [s for s in steps[1:] if s.low is not None and s.high is not None]
    better = [s.name for s in known if s.high is not None and s.high < 0]
    worse = [s.name for s in known if s.low is not None and s.low > 0]
    unclear = [s.name for s in known if s.name not in better and s.name not in worse]
    parts = [f"score better beyond chance: {say.listed(better)}"] * bool(better)
    parts += [f"score worse beyond chance: {say.listed(worse)}"] * bool(worse)
    parts += [f"cannot be told from no change: {say.listed(unclear)}"] * bool(unclear)
    return f"Step by step, {'; '.join(parts)}." if parts else ""


def _price(steps: Sequence[Step]) -> str:
    if len(steps) < 2 or not steps[0].average_change or steps[-1].average_change is None:
        return ""
    ratio = say.ratio(steps[-1].average_change / steps[0].average_change)
    return f"From day to day the last step's VaR moves {ratio} times as much as the first's."


def unseen(facts: Power | None) -> str:
    """Say what a review of this length cannot see, and what was not tested at all."""
    if facts is None:
        return f"The power of the count was not computed. {CAPITAL_ES}"
    return (
        f"A {say.level(facts.level)} VaR whose true coverage is {say.level(1 - facts.true_rate)} is caught in "
        f"{say.in_hundred(facts.power)} reviews of {say.whole(facts.days)} days (one-sided exact binomial at 5%, days "
        f"independent). {CAPITAL_ES}"
    )


def needs_person(facts: Person) -> str:
    """Say what a person has to look at, decide or explain."""
    some = say.whole(facts.fallbacks) if facts.fallbacks else "None"
    fell = f"{some} of {say.plural(facts.forecasts, 'forecast')} fell back on a stated substitute"
    if not facts.forecasts:
        fell = "No challenger was forecast"
    log = say.plural(facts.exceptions, "desk-day") + f" with an exception since {facts.since} to explain"
    parts = [fell, f"{say.plural(facts.remarks, 'data remark')} to read", log]
    if facts.unforecast and facts.forecasts:
        parts.append(f"without any challenger: {say.listed([say.name(d) for d in facts.unforecast])}")
    if facts.short:
        short = [
            f"{say.name(name)} ({say.whole(n)} of {say.whole(facts.scope.wanted_days or 0)} days)"
            for name, n in facts.short
        ]
        parts.append(f"judged on less than was asked for: {say.listed(short)}")
    return "; ".join(parts) + ". The opinion is a person's to give; none is given here."
