"""The bridge: from the reported forecast, step by step, to the challenger, on the days all steps share."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from backtest.judging.answers import ends
from backtest.judging.ranking import mean_difference, shared_days
from backtest.judging.samples import Desk, Sample, read_book
from backtest.judging.scores import Scored, score_together
from backtest.records import BRIDGE_COLUMNS, PNL_KINDS

STEPS = ("reported", "re-performed", "longer window", "plus filter", "plus tail")
NO_HISTORY = "not tested: history"
FEWEST_SHARED_DAYS = 250
_MEASURED = ("average_var", "average_change", "score", "score_change", "low", "high")


@dataclass(frozen=True)
class Step:
    """A step of one desk: its name (of STEPS), model label, window in days (None: not known) and forecasts.

    ``forecasts``: the desk's rows, ``date, level, var`` and, where known, ``es``.
    """

    name: str
    model: str
    window: int | None
    forecasts: pd.DataFrame


def bridge_table(
    pnl: pd.DataFrame,
    steps: Mapping[str, Sequence[Step]],
    *,
    levels: Sequence[float],
    fewest: int = FEWEST_SHARED_DAYS,
    as_of: np.datetime64 | None = None,
) -> pd.DataFrame:
    """Return the bridge of every desk, level and P&L kind: one row a step, with the columns BRIDGE_COLUMNS.

    pnl: one row a date x desk as known at the cut-off ``as_of``; steps: by desk, in order. All numbers are on the days
    on which every step has VaR and the P&L is known. ``average_var`` and ``average_change`` (mean absolute change from
    one shared day to the next) are in money; ``score`` is the mean FZ0 where every step has ES, else the mean tick;
    ``score_change`` is against the step before, ``low, high`` its 95% interval (negative: better). Fewer than
    ``fewest`` shared days, or no steps: one row that says so.
    """
    rows = [row for desk in sorted(steps) for row in _desk_rows(pnl, desk, list(steps[desk]), levels, fewest, as_of)]
    table = pd.DataFrame(rows, columns=list(BRIDGE_COLUMNS))
    whole = dict.fromkeys(("window", "days", "exceptions"), "Int64")
    return table.astype(whole | dict.fromkeys(("level", *_MEASURED), "float64"))


def _desk_rows(
    pnl: pd.DataFrame, desk: str, steps: list[Step], levels: Sequence[float], fewest: int, as_of: np.datetime64 | None
) -> list[dict[str, object]]:
    if not steps:
        return [{"desk": desk, "note": NO_HISTORY}]
    names = [f"{place} {step.model}" for place, step in enumerate(steps)]
    table = pd.concat(
        [step.forecasts.assign(desk=desk, model=name) for step, name in zip(steps, names, strict=True)],
        ignore_index=True,
    )
    found = read_book(pnl[pnl["desk"] == desk], table, as_of=as_of).desks[0]
    kinds = [kind for kind in PNL_KINDS if kind in found.losses]
    return [
        row
        for level in levels
        for kind in kinds
        for row in _rows(found, steps, names, level, kind, fewest)
    ]  # fmt: skip


def _rows(
    desk: Desk, steps: list[Step], names: list[str], level: float, kind: str, fewest: int
) -> list[dict[str, object]]:
    lacking = [step.name for step, name in zip(steps, names, strict=True) if (name, level) not in desk.forecasts]
    address: dict[str, object] = {"desk": desk.name, "level": level, "pnl_kind": kind}
    if lacking:
        return [{**address, "note": f"not tested: needs VaR at {level:g} in every step, lacks {', '.join(lacking)}"}]
    samples = shared_days(*(desk.sample(name, kind, level, "all") for name in names))
    if samples[0].days < max(fewest, 1):
        return [{**address, "days": samples[0].days, "note": NO_HISTORY}]
    scored = score_together([_named(sample, step) for sample, step in zip(samples, steps, strict=True)])
    return [{**address, **_row(place, steps[place], samples[place], scored)} for place in range(len(steps))]


def _named(sample: Sample, step: Step) -> Sample:
    return Sample(**{**sample.__dict__, "model": step.name})


def _row(place: int, step: Step, sample: Sample, scored: Scored) -> dict[str, object]:
    first, last = ends(sample.dates)
    change = mean_difference(scored.scores[place] - scored.scores[place - 1]) if place else None
    return {
        "step": step.name, "model": step.model, "window": step.window, "from": first, "to": last, "days": sample.days,
        "exceptions": sample.exceptions, "average_var": float(sample.var.mean()),
        "average_change": _restlessness(sample), "score_name": scored.name, "score": float(scored.scores[place].mean()),
        "score_change": change.mean if change else None, "low": change.low if change else None,
        "high": change.high if change else None, "note": scored.note,
    }  # fmt: skip


def _restlessness(sample: Sample) -> float | None:
    return float(np.abs(np.diff(sample.var)).mean()) if sample.days > 1 else None
