"""Many desks: which rejections survive being picked out of many. It orders the list of desks; it decides nothing.

Adjusted within one question, across desks: rows of one test, model, P&L kind, level and span. Tests of the same
question are not added up, so that asking one more changes no other's decision.
"""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
import numpy.typing as npt

from backtest.records import Result

Floats = npt.NDArray[np.float64]

RUNNING = "running"
"""The question of evidence watched day by day: outside these decisions, as it is outside the criteria."""
HOLM, STEP_UP, NEITHER = "rejected by Holm", "rejected by Benjamini-Hochberg", "not rejected"
"""Words of ``decision_across_desks``; what Holm rejects, Benjamini-Hochberg rejects too."""


def holm(p_values: Floats) -> Floats:
    """Return Holm's (1979) adjusted p-values float64[m], valid under any dependence."""
    m, order = len(p_values), np.argsort(p_values, kind="stable")
    adjusted = np.empty(m)
    adjusted[order] = np.minimum(1.0, np.maximum.accumulate(p_values[order] * np.arange(m, 0, -1)))
    return adjusted


def benjamini_hochberg(p_values: Floats) -> Floats:
    """Return Benjamini and Hochberg's (1995) adjusted p-values float64[m], valid under positive dependence."""
    m, order = len(p_values), np.argsort(p_values, kind="stable")
    adjusted = np.empty(m)
    raised = p_values[order] * m / np.arange(1, m + 1)
    adjusted[order] = np.minimum(1.0, np.minimum.accumulate(raised[::-1])[::-1])
    return adjusted


def with_decisions(results: Sequence[Result], places: Sequence[int], significance: float) -> list[Result]:
    """Return the results with ``decision_across_desks`` filled where several desks have a p-value to compare.

    ``places`` (as many as results): the span of each among those asked for, since spans of desks differ in dates.
    """
    families: dict[tuple[object, ...], list[int]] = {}
    for i, (r, place) in enumerate(zip(results, places, strict=True)):
        if r.p_value is not None and r.question != RUNNING:
            families.setdefault((r.test, r.model, r.against, r.pnl_kind, r.level, place), []).append(i)
    decided = list(results)
    for members in families.values():
        if len({results[i].desk for i in members}) < 2:
            continue
        p = np.array([results[i].p_value for i in members], dtype=np.float64)
        strict, loose = holm(p) <= significance, benjamini_hochberg(p) <= significance
        for i, by_holm, by_step_up in zip(members, strict, loose, strict=True):
            words = HOLM if by_holm else STEP_UP if by_step_up else NEITHER
            decided[i] = replace(results[i], decision_across_desks=words)
    return decided


def span_places(results: Sequence[Result]) -> list[int]:
    """Return for each result the place of its span: tests answer the spans asked for in their order."""
    seen: dict[tuple[object, ...], int] = {}
    places = []
    for r in results:
        key = (r.desk, r.model, r.against, r.pnl_kind, r.level, r.test)
        places.append(seen.get(key, 0))
        seen[key] = places[-1] + 1
    return places
