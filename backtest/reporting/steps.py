"""The sentence on the bridge: what each step changes, what is beyond chance, what it costs in movement."""

from collections.abc import Sequence

from backtest.reporting import wording as say
from backtest.reporting.facts import Bridge, Gain, Parts, Step
from backtest.reporting.parts import GAINS, LOSES, gain_words


def why(bridge: Bridge | None, others: Sequence[Bridge] = (), cells: Parts | None = None) -> str:
    """Say what each step of the bridge changes, over the days that all steps share; ``others``: at other levels.

    ``cells``: what filter and tail gain over neither, said where there were days enough to decide.
    """
    if bridge is None or bridge.level is None or not bridge.steps:
        built = f"The bridge was not built: {(bridge.note if bridge else '') or 'none was asked for'}."
        return " ".join(p for p in (built, _filter_or_tail(cells)) if p)
    head = (
        f"Over {say.plural(bridge.days, 'shared day')} at {say.level(bridge.level)} "
        f"({say.expected(bridge.days, bridge.level)} exceptions expected)"
    )
    taken = [s for s in bridge.steps if s.exceptions is not None and s.average_var is not None]
    left = [f"{s.name} {s.note}" for s in bridge.steps if s not in taken and s.note]
    counts = "; ".join(_step(s, bridge.currency, i == 0) for i, s in enumerate(taken))
    parts = [f"{head}: {counts}.", _gain(taken), *map(_elsewhere, others), _filter_or_tail(cells), _price(taken)] + [
        f"Not in it: {'; '.join(left)}."
    ] * bool(left)
    return " ".join(p for p in parts if p)


def _step(step: Step, currency: str, first: bool) -> str:
    shown = say.money(step.average_var or 0.0, currency)
    label = "" if not first else " exceptions at an average VaR of"
    return f"{step.name} {say.whole(step.exceptions or 0)}{label or ' at'} {shown}"


def _gain(steps: Sequence[Step]) -> str:
    known = [s.name for s in steps[1:] if s.low is not None and s.high is not None]
    found = _beyond_chance(steps)
    unclear = [name for name in known if not any(name in names for names in found.values())]
    parts = [f"{which} beyond chance: {say.listed(names)}" for which, names in found.items() if names]
    if len(unclear) == len(known) > 1:
        parts = ["no step can be told from no change"]
    elif unclear:
        parts.append(f"cannot be told from no change: {say.listed(unclear)}")
    return f"Step by step, by the {_score(steps)} score, {'; '.join(parts)}." if parts else ""


def _score(steps: Sequence[Step]) -> str:
    return say.listed(sorted({s.score_name for s in steps} - {""}))


def _beyond_chance(steps: Sequence[Step]) -> dict[str, list[str]]:
    """Return the steps whose score interval excludes 0, by what they are than the step before."""
    return {
        "better": [s.name for s in steps[1:] if s.high is not None and s.high < 0],
        "worse": [s.name for s in steps[1:] if s.low is not None and s.low > 0],
    }


def _elsewhere(bridge: Bridge) -> str:
    """Say which steps are beyond chance at another level; empty where none is."""
    found = [
        f"{which} beyond chance: {say.listed(names)}" for which, names in _beyond_chance(bridge.steps).items() if names
    ]
    where = f"At {say.level(bridge.level or 0.0)}, by the {_score(bridge.steps)} score,"
    return f"{where} {'; '.join(found)}." if found else ""


def _price(steps: Sequence[Step]) -> str:
    if len(steps) < 2 or not steps[0].average_change or steps[-1].average_change is None:
        return ""
    ratio = say.ratio(steps[-1].average_change / steps[0].average_change)
    return f"From day to day the last step's VaR moves {ratio} times as much as the first's."


def _filter_or_tail(parts: Parts | None) -> str:
    """Say how the gain of filter and tail over neither divides, size before evidence; empty without a decision."""
    if parts is None or not parts.decided:
        return ""
    head = f"Filter and tail together gain {gain_words(parts.both, parts)} at {say.level(parts.level)}"
    shares = [_share(name, gain) for name, gain in (("filter", parts.filter), ("tail", parts.tail))]
    return f"{head}: {' and '.join(shares)}." if all(shares) else f"{head}, too close to nothing to be divided."


def _share(name: str, part: Gain) -> str:
    if part.share is None or part.share_low is None or part.share_high is None:
        return ""
    low, high = (f"{say.points(end)}%" for end in (part.share_low, part.share_high))
    unclear = "" if part.decision in (GAINS, LOSES) else ", cannot be told from nothing"
    return f"the {name} brings {say.points(part.share)}% ({low} to {high}{unclear})"
