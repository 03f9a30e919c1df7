"""The six sentences of the first page: facts in, words out. No sentence may claim that a model is right."""

from collections.abc import Sequence
from dataclasses import dataclass

from backtest.records import Record
from backtest.reporting import wording as say
from backtest.reporting.book import Book
from backtest.reporting.drawn import main_bridge, often, other_bridges, scope_of, size, when
from backtest.reporting.effects import test_name
from backtest.reporting.facts import Count, Often, Rejection, RuleCount, Scope, Size, Sufficient, When
from backtest.reporting.open_points import needs_person, person
from backtest.reporting.parts import main_parts
from backtest.reporting.prose import prose
from backtest.reporting.steps import why
from backtest.reporting.unseen import hardly, power, unseen

QUESTIONS = (
    "How often?", "When?", "By how much?", "Why?", "What could this review not see?", "What needs a person?",
)  # fmt: skip
POSITIONS = "Challengers learn from past P&L (or vectors); the reported VaR from current positions."
JOINT = "christoffersen-coverage"
BUNCHED = 0.8
"""Exceptions are said to be bunched where they take less than this share of what even spacing would take."""
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
        answers: tuple[str, ...] = (NOTHING,) * 4 + (unseen(power(book), False), "A run with days to judge.")
    else:
        counts = often(book, scope)
        answers = (
            how_often(counts),
            when_they_fell(when(book, scope)),
            by_how_much(size(book, scope)),
            why(main_bridge(book, scope), other_bridges(book, scope), main_parts(book, scope)),
            unseen(power(book), scope.is_subject and any(c.p is not None for c in counts.counts), hardly(book, scope)),
            needs_person(person(book, scope)),
        )
    return tuple(Sentence(q, a) for q, a in zip(QUESTIONS, answers, strict=True))


def about(scope: Scope) -> str:
    """Say which desk and model the first page is about, and why that one."""
    desk, model = say.name(scope.desk), say.name(scope.model)
    who = f"{desk}, the whole firm" if scope.is_firm else desk
    chosen = f"{_chosen(scope)}; no firm row was judged" if _chosen(scope) else ""
    what = f"the reported model {model}" if scope.is_subject else f"no reported model was supplied, challenger {model}"
    return f"{who}{chosen}; {what}"


def _chosen(scope: Scope) -> str:
    """Say why the page speaks of this desk, where it is one of several and not the firm."""
    if scope.is_firm or scope.desks < 2:
        return ""
    return f", of {scope.desks} desks the one whose count is furthest above its expectation"


def how_often(facts: Often) -> str:
    """Say how often losses exceeded the VaR, beside what the level lets expect."""
    scope = facts.scope
    if not facts.counts:
        return f"Not tested: no count of exceptions was asked for at {say.level(scope.count_level)}."
    level, days = say.level(scope.count_level), max(c.days for c in facts.counts)
    desk, expectation = (
        say.name(scope.desk) + _chosen(scope),
        f"{say.expected(days, scope.count_level)} were to be expected",
    )
    more = _more(facts.more, scope)
    if not scope.is_subject:
        each = ", ".join(f"{say.name(c.name)} {say.whole(c.exceptions)}" for c in facts.counts)
        head = (
            f"{desk}: no reported VaR was supplied. In {say.plural(days, 'day')} on {scope.kind} P&L "
            f"losses exceeded the challengers' {level} VaR on this many days: {each}; {expectation}."
        )
        return " ".join(p for p in (head, _of_model(more, scope), _rule(facts)) if p)
    counts = " and ".join(f"on {_rate(c, 1 - scope.count_level)} on {c.name} P&L" for c in facts.counts)
    parts = [f"{desk}: losses exceeded the {level} VaR of {say.name(scope.model)} {counts}; {expectation}."]
    parts += [_evidence(facts.counts, scope), more, _rule(facts), _length(scope, days, facts.rule)]
    return " ".join(p for p in parts if p)


def _rate(count: Count, share: float) -> str:
    return (
        say.rate(count.exceptions, count.days, share)
        if count.exceptions
        else f"none of {say.plural(count.days, 'day')}"
    )


def _evidence(counts: Sequence[Count], scope: Scope) -> str:
    said: dict[str, list[str]] = {}
    for c in counts:
        if c.p is not None:
            said.setdefault(_verdict(c, scope), []).append(f"{say.p_value(c.p, scope.significance)} on {c.name}")
    return " ".join(f"{verdict} ({'; '.join(ps)}; exact binomial, two-sided)." for verdict, ps in said.items())


def _verdict(count: Count, scope: Scope) -> str:
    if not count.rejected:
        return "The count does not reject the level"
    too_many = count.exceptions > count.days * (1 - scope.count_level)
    return "Evidence that the VaR is too low" if too_many else "So few are evidence that the VaR is too high"


def _more(found: Sequence[Rejection], scope: Scope) -> str:
    """Say what further tests reject, each answer once: tests, levels, P&L kinds and p-values in brackets."""
    said: dict[str, dict[str, list[str]]] = {}
    for r in found:
        p = f"{say.level(r.level)} {r.kind} {say.p_value(r.p, scope.significance)}"
        said.setdefault(prose(r.phrase), {}).setdefault(test_name(r.test), []).append(p)
    sentences = []
    for phrase, tests in said.items():
        where = "; ".join(f"{name}: {', '.join(ps)}" for name, ps in tests.items())
        sentences.append(f"{phrase[:1].upper()}{phrase[1:]} ({where}).")
    return " ".join(sentences)


def _of_model(more: str, scope: Scope) -> str:
    return f"Of {say.name(scope.model)}: {more[0].lower()}{more[1:]}" if more else ""


def _rule(facts: Often) -> str:
    rule = facts.rule
    if rule is None:
        return ""
    if rule.count is None or not rule.zone:
        return f"Rule {rule.name}: {prose(rule.note)}."
    multiplier = f", no multiplier ({rule.note})" if rule.note else ""
    multiplier = multiplier if rule.multiplier is None else f", multiplier {say.multiple(rule.multiplier)}"
    more = rule.count > max(c.exceptions for c in facts.counts)
    how = " (days without P&L or VaR count as exceptions)" if more else ""
    return f"Rule {rule.name}: count {say.whole(rule.count)}{how}, {rule.zone}{multiplier}."


def _length(scope: Scope, days: int, rule: RuleCount | None) -> str:
    if scope.wanted_days is None or days >= scope.wanted_days:
        return ""
    zone = "" if rule else ": no zone"
    return f"Only {say.whole(days)} of {say.plural(scope.wanted_days, 'day')} have both a P&L and a forecast{zone}."


def when_they_fell(facts: When) -> str:
    """Say how close together most exceptions fell, and what the independence test says."""
    scope, level = facts.scope, say.level(facts.scope.size_level)
    where = f"the {level} VaR of {say.name(scope.model)} ({scope.kind} P&L, {say.plural(facts.days, 'day')})"
    independence = " ".join(p for p in (_independence(facts), _together(facts)) if p)
    if facts.exceptions == 0:
        return f"No loss exceeded {where}, so nothing can be said about when they fall. {independence}"
    if facts.exceptions < 4:
        few = say.plural(facts.exceptions, "loss", "losses")
        return f"{few[0].upper()}{few[1:]} exceeded {where}: too few to speak of clusters. {independence}"
    spread = f"evenly spaced they would take about {say.whole(round(facts.even))}, by chance alone less"
    bunched = facts.width < BUNCHED * facts.even
    return (
        f"{facts.inside} of the {facts.exceptions} losses beyond {where} fell within "
        f"{say.plural(facts.width, 'business day')}, {facts.first} to {facts.last}"
        f"{f'; {spread}' if bunched else ': not bunched'}. {independence}"
    )


def _together(facts: When) -> str:
    """Say what else rejects: independence elsewhere, then rate and independence tested together."""
    joint = [r for r in facts.more if r.test == JOINT or "VaR is too" in r.phrase]
    alone = _more([r for r in facts.more if r not in joint], facts.scope)
    said = _more(joint, facts.scope)
    return " ".join(p for p in (alone, f"Together with the count: {said[0].lower()}{said[1:]}" if said else "") if p)


def _independence(facts: When) -> str:
    if facts.p is None:
        return f"Independence: {prose(facts.note) or 'not tested'}."
    verb = "is rejected" if facts.rejected else "is not rejected, which does not show it"
    p = say.p_value(facts.p, facts.scope.significance)
    return f"Independence from one day to the next {verb} (Christoffersen, {p})."


def by_how_much(facts: Size) -> str:
    """Say which multiple of the VaR, and of the ES, would have sufficed, and what that is in money."""
    scope, var, es = facts.scope, facts.var, facts.es
    of = f" of {say.name(scope.model)} ({scope.kind} P&L, {say.plural(var.days, 'day')})" if var.days else ""
    parts = [_sufficient(var, scope, of)]
    if es:
        parts.append(_sufficient(es, scope, "" if es.days == var.days else f" ({say.plural(es.days, 'day')})"))
    if var.estimate is not None:
        parts.append("The VaR interval is 95%, if days were independent.")
    if es and es.note:
        parts.append(f"The ES interval is 95% ({prose(es.note).removeprefix('interval ')}).")
    return " ".join(p for p in (*parts, _more(facts.more, scope)) if p)


def _sufficient(facts: Sufficient, scope: Scope, of: str) -> str:
    name = f"{say.level(scope.size_level)} {facts.measure}{of}"
    if facts.estimate is None:
        return f"The multiple of the {name} that would have sufficed: {prose(facts.note) or 'not tested'}."
    short = facts.estimate > 1
    verb = "would have had to be" if short else "would have sufficed at"
    size = f"{say.multiple(facts.estimate)} times {'as large' if short else 'its size'}"
    one = _holds_one(facts) if facts.measure == "VaR" else ""
    return f"The {name} {verb} {size} ({say.interval(facts.low, facts.high)}){_in_money(facts, scope)}{one}."


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
