"""Vectors on their target days, and what a reader should know of them: days without, too few or old scenarios."""

from collections.abc import Mapping

import numpy as np
import pandas as pd

from backtest.errors import StudyError
from backtest.reading.desks import lives
from backtest.reading.history import windows_needed
from backtest.reading.remarks import desk_remark, per_desk
from backtest.records import VECTORS, DeskVectors, Inputs, Remark
from backtest.study_form import Study


def refuse_without_vectors(study: Study) -> None:
    """Refuse a study that learns from vectors and names neither vectors nor factors with exposures."""
    data = study.data
    if study.forecast.learn_from == VECTORS and data.vectors is None and data.exposures is None:
        raise StudyError(
            "there are no vectors to learn from",
            rule="learn_from = 'vectors' needs data.vectors, or data.factors and data.exposures",
            value=VECTORS,
            place=f"{study.path.name}, forecast.learn_from",
            remedy="Name the file in data.vectors, or learn from 'hypothetical'.",
        )


def on_target_days(
    vectors: Mapping[str, DeskVectors], days: np.ndarray, as_of: np.datetime64, source: str, *, as_of_dated: bool
) -> tuple[dict[str, DeskVectors], list[Remark]]:
    """Return vectors under their target days; ``as_of_dated`` ones move to the next business day.

    ``days``: the business days known (datetime64[D], sorted). Left out, each with a remark: vectors of a day that is no
    business day, of a target beyond the last one known, and of a target after the cut-off.
    """
    kept, off, beyond, after = {}, [], [], []
    for desk, own in vectors.items():
        at = np.searchsorted(days, own.days)
        on = days[np.minimum(at, len(days) - 1)] == own.days
        target = at + int(as_of_dated)
        inside = target < len(days)
        targets = days[np.minimum(target, len(days) - 1)]
        good = on & inside & (targets <= as_of)
        off.append(_rows(desk, own.days[~on]))
        beyond.append(_rows(desk, own.days[on & ~inside]))
        after.append(_rows(desk, targets[on & inside & ~good]))
        if good.any():
            kept[desk] = own.kept(good, targets[good])
    found = (
        ("vectors-off-calendar", off, "vectors of a day that is no business day of the calendar, left out: {count}"),
        ("vectors-beyond", beyond, "vectors for a day beyond the last business day known, left out: {count}"),
        ("after-cut-off", after, f"vectors after the cut-off {as_of}, left out: {{count}}"),
    )
    return kept, [remark for rule, parts, text in found for remark in per_desk(rule, source, pd.concat(parts), text)]


def _rows(desk: str, days: np.ndarray) -> pd.DataFrame:
    return pd.DataFrame({"date": days.astype("datetime64[us]"), "desk": desk})


def vector_remarks(study: Study, inputs: Inputs, source: str) -> list[Remark]:
    """Return the remarks on vectors: unused, absent, on days that are no target, missing, short, or not up to date."""
    vectors, learn_from = inputs.vectors, study.forecast.learn_from
    if learn_from != VECTORS:
        days = sum(len(own.days) for own in vectors.values())
        text = f"vectors were read and checked and are not learnt from: forecast.learn_from is {learn_from!r}"
        return [Remark("vectors-unused", source, "", "", "", days, text)] if vectors else []
    first = inputs.pnl.groupby("desk", sort=True)["date"].min()
    life = lives(inputs.desks)
    remarks = [desk_remark("no-vectors", source, str(desk), day, inputs.as_of, 0, _NONE) for desk, day in first.items()
               if desk not in vectors]  # fmt: skip
    for desk, own in vectors.items():
        start = np.datetime64(first[desk], "D") if desk in first else None
        end = life[desk][1]
        last = inputs.as_of if end is None else min(inputs.as_of, np.datetime64(end, "D"))
        remarks += _of_desk(desk, own, inputs.calendar, start, last, windows_needed(study), source)
    return remarks


_NONE = "no P&L vector of this desk, and models learn from vectors: no forecast of ours"


def _of_desk(
    desk: str,
    own: DeskVectors,
    calendar: np.ndarray,
    start: np.datetime64 | None,
    last: np.datetime64,
    windows: list[int],
    source: str,
) -> list[Remark]:
    """Return the remarks on one desk, whose target days run from ``start`` (None: it has no P&L) to ``last``."""
    lived = np.zeros(len(own.days), dtype=bool) if start is None else (own.days >= start) & (own.days <= last)
    text = "vectors outside the desk's days (from its first P&L to its valid_to), no forecast of ours: {count}"
    remarks = per_desk("vectors-outside-pnl", source, _rows(desk, own.days[~lived]), text)
    days, counts = own.days[lived], own.counts[lived]
    if not len(days):
        return remarks
    due = calendar[(calendar >= days[0]) & (calendar <= last)]
    text = "business days without a vector since the first, no forecast of ours: {count}, first {first}, last {last}"
    remarks += per_desk("missing-vectors", source, _rows(desk, np.setdiff1d(due, days)), text)
    for window in windows:
        short = counts < window
        text = f"vectors with fewer than {window} scenarios: {{count}} of {len(days)}, the shortest {counts.min()}"
        text += f"; no forecast of ours with that window on {'any' if short.all() else 'those'} days"
        remarks += per_desk("short-vectors", source, _rows(desk, days[short]), text)
    before = calendar[np.maximum(np.searchsorted(calendar, days) - 1, 0)]
    old = own.scenarios[own.ends[lived] - 1] < before
    text = "vectors whose last scenario is older than the business day before: {count}"
    return remarks + per_desk("old-scenarios", source, _rows(desk, days[old & (before < days)]), text)
