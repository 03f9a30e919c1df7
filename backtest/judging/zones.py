"""By rule: the firm-wide count of exceptions, its zone and multiplier under a dated profile."""

from dataclasses import dataclass

import numpy as np

from backtest.judging.answers import RuleTest, Ruling, ends
from backtest.judging.rules.basel_mar32 import PROFILE as BASEL_MAR32
from backtest.judging.rules.profiles import Profile, profile_named
from backtest.judging.samples import Book, Days, Desk, Floats
from backtest.records import PNL_KINDS, Result

PROFILES = (BASEL_MAR32,)


@dataclass(frozen=True)
class Count:
    """Exceptions under the rule on the business days ``dates`` (datetime64[D]): counts by P&L kind as the rule counts.

    ``missing`` is how many days lack a P&L of the kind or VaR, already in ``counts``; ``with_all_missing`` counts every
    such day once in every column (the other reading of the rule).
    """

    dates: Days
    counts: dict[str, int]
    missing: dict[str, int]
    with_all_missing: int

    @property
    def larger(self) -> int:
        """The count the rule takes: the larger of those there are."""
        return max(self.counts.values())


def resolve_rules(name: str | None) -> Profile | None:
    """Return the rule profile of that name, None for none; raises StudyError with the near miss."""
    return None if name is None else profile_named(name, PROFILES)


def count_exceptions(desk: Desk, model: str, level: float, days: int) -> Count:
    """Count exceptions on the last ``days`` business days up to the cut-off, from the first day with P&L and VaR on.

    Exception: loss strictly above VaR. A business day without P&L counts in that P&L's column, one without VaR in both.
    """
    forecast_days, measures = desk.forecasts[(model, level)]
    begun = max(_first(desk.dates, desk.losses[PNL_KINDS[0]]), _first(forecast_days, measures["var"]))
    business = desk.business[desk.business >= begun][-days:]
    var = _on(business, forecast_days, measures["var"])
    losses = {kind: _on(business, desk.dates, values) for kind, values in desk.losses.items()}
    missing = {kind: np.isnan(values) | np.isnan(var) for kind, values in losses.items()}
    beyond = {kind: int(np.count_nonzero(values > var)) for kind, values in losses.items()}
    counts = {kind: beyond[kind] + int(missing[kind].sum()) for kind in losses}
    anywhere = int(np.any(list(missing.values()), axis=0).sum())
    return Count(business, counts, {k: int(m.sum()) for k, m in missing.items()}, max(beyond.values()) + anywhere)


def _first(dates: Days, values: Floats) -> np.datetime64:
    known = dates[~np.isnan(values)]
    return known[0] if len(known) else np.datetime64("9999-12-31")


def _on(business: Days, dates: Days, values: Floats) -> Floats:
    found = np.full(len(business), np.nan)
    _, ours, theirs = np.intersect1d(business, dates, assume_unique=True, return_indices=True)
    found[ours] = values[theirs]
    return found


def _basel_zone(book: Book, ruling: Ruling) -> Result:
    desk, profile = _firm(book, ruling), ruling.profile
    if desk is None or profile is None or ruling.subject is None:
        return _row(ruling, missing="needs the reported firm-wide model: subject, firm and rules")
    if profile.level.value not in desk.levels(ruling.subject):
        return _row(ruling, missing=f"needs the reported VaR at {profile.level.value:g}")
    count = count_exceptions(desk, ruling.subject, profile.level.value, int(profile.days.value))
    notes = _notes(count, ruling, profile)
    if len(count.dates) < profile.days.value:
        lacking = f"{len(count.dates)} of {profile.days.value:g} business days, no zone"
        return _row(ruling, count, missing=lacking, notes=notes)
    zone, both = profile.zone(count.larger), len(count.counts) > 1
    multiplier = profile.multiplier(count.larger) if both else None
    text = f"{zone} zone: {count.larger} exceptions in {len(count.dates)} business days"
    text += f", multiplier {multiplier.value:.2f}" if multiplier else ", on hypothetical P&L only, no multiplier"
    return _row(ruling, count, zone=zone, phrase=text, notes=notes, multiplier=multiplier.value if multiplier else None)


def _firm(book: Book, ruling: Ruling) -> Desk | None:
    found = [d for d in book.desks if d.name == ruling.firm and ruling.subject in d.models]
    return found[0] if found else None


def _notes(count: Count, ruling: Ruling, profile: Profile) -> tuple[str, ...]:
    counts = ", ".join(f"{kind} {n}" for kind, n in count.counts.items())
    notes = [f"{profile.text}, {profile.date}", f"counts: {counts} ({profile.counting})"]
    if len(count.counts) == 1:
        notes.append("count on hypothetical only; the rule takes the larger")
    if any(count.missing.values()):
        lacking = ", ".join(f"{kind} {n}" for kind, n in count.missing.items())
        notes.append(f"days without P&L or VaR counted as exceptions in their column ({profile.missing}): {lacking}")
    if count.with_all_missing != count.larger:
        notes.append(f"counting every such day in both columns would give {count.with_all_missing}")
    firm = None if ruling.first_known is None else _firm(ruling.first_known, ruling)
    if firm is not None and ruling.subject is not None:
        first = count_exceptions(firm, ruling.subject, profile.level.value, int(profile.days.value))
        notes.append(f"on P&L as first known: {first.larger}")
    return tuple(notes)


def _row(
    ruling: Ruling, count: Count | None = None, *, zone: str = "not tested", phrase: str = "", missing: str = "",
    notes: tuple[str, ...] = (), multiplier: float | None = None,
) -> Result:  # fmt: skip
    first, last = ends(count.dates) if count else ("", "")
    kinds = "larger of hypothetical and actual" if count and len(count.counts) > 1 else PNL_KINDS[0]
    profile = ruling.profile
    return Result(
        desk=ruling.firm or "", model=ruling.subject or "", against="", pnl_kind=kinds,
        level=profile.level.value if profile else BASEL_MAR32.level.value, first=first, last=last,
        days=len(count.dates) if count else 0, exceptions=count.larger if count else None, question="by rule",
        test="basel-zone", statistic=float(count.larger) if count else None, p_value=None, law=None,
        estimate=multiplier, low=None, high=None,
        direction=f"multiplier, {profile.zones_paragraph}" if profile and multiplier else "", could_see=None,
        decision=zone, decision_across_desks="", phrase=phrase or f"not tested: {missing}", note="; ".join(notes),
        source=f"{profile.counting}; {profile.zones_paragraph}" if profile else _SOURCE,
    )  # fmt: skip


_SOURCE = f"{BASEL_MAR32.counting}; {BASEL_MAR32.zones_paragraph}"

TESTS = (RuleTest("basel-zone", "by rule", _SOURCE, _basel_zone),)
