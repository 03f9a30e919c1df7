"""The four cells {no filter, GARCH} x {empirical, GPD}: what the filter and what the tail is worth.

A gain is a mean score difference, positive where the score falls (lower scores are better). The filter's part is its
gain averaged over the two tails, the tail's part its gain averaged over the two filters: together they are the gain of
filter and tail. "Together beyond apart" is the gain of both less the two alone.
"""

from collections.abc import Sequence
from typing import Any

import numpy as np
import numpy.typing as npt
import pandas as pd

from backtest.judging.answers import ends
from backtest.judging.ranking import mean_difference, shared_days
from backtest.judging.samples import Desk, Sample, read_book
from backtest.judging.scores import score_together
from backtest.records import FOUR_CELLS_COLUMNS

Floats = npt.NDArray[np.float64]
Row = dict[str, object]
Widths = dict[str, Floats]
Known = dict[Any, pd.Series]

CELLS = {
    ("none", "empirical"): "historical",
    ("garch", "empirical"): "filtered-historical",
    ("none", "gpd"): "unconditional-evt",
    ("garch", "gpd"): "conditional-evt",
}
"""The model of each cell, by filter and tail."""
FEWEST_DECIDED = 1000
"""Shared days below which there is no decision."""
_NUMBERS = (
    "level", "average_var", "interval_width", "interval_percent", "interval_ratio", "score", "gain", "low", "high",
    "statistic", "p_value", "share", "share_low", "share_high",
)  # fmt: skip


def four_cells(
    pnl: pd.DataFrame,
    forecasts: pd.DataFrame,
    *,
    levels: Sequence[float],
    window: int | None = None,
    significance: float = 0.05,
    as_of: np.datetime64 | None = None,
) -> pd.DataFrame:
    """Return the four cells of every desk, level and P&L kind, with the columns FOUR_CELLS_COLUMNS.

    Tables as samples.read_book takes them, with ``var_low, var_high`` where known; ``window``: days the models learn
    from. All numbers are on the days that the four models share. Rows by ``part``: "cell" (four: exceptions, average
    VaR, width of the VaR interval in money and in percent of VaR on ``interval_days``, mean score); "effect" (filter,
    tail, filter and tail, together beyond apart: gain with its Newey-West 95% interval, t and p; ``share`` in percent
    of the whole gain with an interval by the delta method, where that gain is above zero with confidence); "interval"
    (GPD's width over the empirical one, unfiltered and filtered). The score is FZ0 where all four have ES, else tick.
    Fewer than FEWEST_DECIDED shared days: sizes without p or decision. A missing model: one row that says so.
    """
    book = read_book(pnl, forecasts, as_of=as_of)
    known = _known_widths(forecasts)
    rows = [
        {"desk": desk.name, "level": level, "pnl_kind": kind, **row}
        for desk in book.desks
        for level in levels
        for kind in desk.losses
        for row in _rows(desk, kind, level, known, window, significance)
    ]
    table = pd.DataFrame(rows, columns=list(FOUR_CELLS_COLUMNS))
    whole = dict.fromkeys(("days", "exceptions", "interval_days"), "Int64")
    return table.astype(whole | dict.fromkeys(_NUMBERS, "float64"))


def _rows(desk: Desk, kind: str, level: float, known: Known, window: int | None, significance: float) -> list[Row]:
    lacking = [name for name in CELLS.values() if (name, level) not in desk.forecasts]
    if lacking:
        return [{"note": f"not tested: needs {', '.join(lacking)} at {level:g}"}]
    samples = shared_days(*(desk.sample(name, kind, level, "all") for name in CELLS.values()))
    if samples[0].days < 2:
        return [{"days": samples[0].days, "note": f"not tested: needs 2 shared days, has {samples[0].days}"}]
    scored = score_together(samples)
    first, last = ends(samples[0].dates)
    widths = {s.model: _width(s, known) for s in samples}
    cells = [
        {
            **_cell(place, s, widths[s.model], _reach(place[1], level, window)),
            "score_name": scored.name, "score": float(score.mean()),
        }
        for place, s, score in zip(CELLS, samples, scored.scores, strict=True)
    ]  # fmt: skip
    cells = [{**cell, "note": "; ".join(str(n) for n in (cell["note"], scored.note) if n)} for cell in cells]
    effects = _effects(dict(zip(CELLS, scored.scores, strict=True)), samples[0].days, significance, scored.name)
    beside = "exceptions " + ", ".join(f"{s.exceptions} ({s.model})" for s in samples)
    effects = [{**effect, "note": beside} for effect in effects]
    rows = cells + effects + _intervals(widths, _reach("empirical", level, window))
    return [{"from": first, "to": last, "days": samples[0].days, **row} for row in rows]


def _reach(tail: str, level: float, window: int | None) -> str:
    """Say where an empirical tail of ``window`` losses has no answer of its own; empty where it has, or is another."""
    if tail != "empirical" or window is None:
        return ""
    if level > 1.0 - 1.0 / window + 1e-12:
        return f"cannot answer: beyond 1 - 1/{window} every empirical quantile is the largest loss of the window"
    if level**window > 0.025:
        return f"the interval's upper end lies beyond the largest of {window} losses"
    return ""


def _known_widths(forecasts: pd.DataFrame) -> Known:
    """Return the widths of one-day VaR intervals of the cells' models by (desk, model, level), on their dates."""
    if "var_low" not in forecasts or "var_high" not in forecasts:
        return {}
    wanted = forecasts["model"].isin(list(CELLS.values()))
    if "horizon" in forecasts:
        wanted &= forecasts["horizon"].eq(1)
    rows = forecasts.loc[wanted, ["date", "desk", "model", "level"]]
    rows = rows.assign(width=forecasts["var_high"] - forecasts["var_low"])
    days = rows["date"].to_numpy().astype("datetime64[D]")
    whole = pd.Series(rows["width"].to_numpy(dtype=np.float64), index=days)
    places = rows.groupby(["desk", "model", "level"]).indices
    return {key: whole.iloc[place] for key, place in places.items()}


def _width(sample: Sample, known: Known) -> Floats:
    """Return the width of the VaR interval on the days of the sample, NaN where it is not known: float64[T]."""
    widths = known.get((sample.desk, sample.model, sample.level))
    return np.full(sample.days, np.nan) if widths is None else widths.reindex(sample.dates).to_numpy()


def _cell(place: tuple[str, str], sample: Sample, width: Floats, reach: str) -> Row:
    row: Row = {
        "part": "cell", "name": sample.model, "filter": place[0], "tail": place[1], "exceptions": sample.exceptions,
        "average_var": float(sample.var.mean()), "note": reach,
    }  # fmt: skip
    known = ~np.isnan(width)
    row["interval_days"] = int(np.count_nonzero(known))
    if not known.any() or reach.startswith("cannot"):
        return row
    mean, var = float(width[known].mean()), float(sample.var[known].mean())
    return {**row, "interval_width": mean, "interval_percent": 100.0 * mean / var if var > 0.0 else None}


def gains(scores: dict[tuple[str, str], Floats]) -> dict[str, Floats]:
    """Return the daily gains float64[T] of filter, tail, both, and of both beyond each alone, from scores by cell."""
    none, filtered, tailed, both = (scores[cell] for cell in CELLS)
    return {
        "filter": 0.5 * ((none - filtered) + (tailed - both)),
        "tail": 0.5 * ((none - tailed) + (filtered - both)),
        "filter and tail": none - both,
        "together beyond apart": filtered + tailed - none - both,
    }


def _effects(scores: dict[tuple[str, str], Floats], days: int, significance: float, name: str) -> list[Row]:
    series = gains(scores)
    whole = mean_difference(series["filter and tail"])
    rows = []
    for effect, daily in series.items():
        found = mean_difference(daily)
        row: Row = {
            "part": "effect", "name": effect, "score_name": name, "gain": found.mean, "low": found.low,
            "high": found.high, "statistic": found.statistic, "decision": _decision(found.mean, None, days, 0.0),
        }  # fmt: skip
        if days >= FEWEST_DECIDED:
            row |= {
                "p_value": found.p_value,
                "decision": _decision(found.mean, found.p_value, days, significance),
            }
        if effect in ("filter", "tail") and whole.low is not None and whole.low > 0.0:
            row |= _share(daily, series["filter and tail"])
        rows.append(row)
    return rows


def _decision(gain: float, p_value: float | None, days: int, significance: float) -> str:
    if days < FEWEST_DECIDED:
        return f"no decision: {days} shared days, needs {FEWEST_DECIDED:,}"
    if p_value is None:
        return "no decision: the scores differ by the same amount every day"
    if p_value > significance:
        return "no evidence"
    return "evidence of a gain" if gain > 0.0 else "evidence of a loss"


def _share(part: Floats, whole: Floats) -> Row:
    """Return a part of the whole gain in percent, with the interval of the ratio of means by the delta method."""
    ratio = float(part.mean() / whole.mean())
    spread = mean_difference((part - ratio * whole) / whole.mean())
    half = spread.high - spread.mean if spread.high is not None else 0.0
    return {"share": 100.0 * ratio, "share_low": 100.0 * (ratio - half), "share_high": 100.0 * (ratio + half)}


def _intervals(widths: Widths, reach: str) -> list[Row]:
    """Compare the widths of GPD and empirical VaR intervals, on the days on which both are known."""
    rows = []
    for kind, name in (("none", "unfiltered"), ("garch", "filtered")):
        empirical, gpd = (widths[CELLS[(kind, tail)]] for tail in ("empirical", "gpd"))
        known = ~np.isnan(empirical) & ~np.isnan(gpd)
        row: Row = {
            "part": "interval", "name": f"GPD against empirical, {name}", "filter": kind,
            "interval_days": int(np.count_nonzero(known)), "note": reach,
        }  # fmt: skip
        if known.any() and empirical[known].mean() > 0.0 and not reach.startswith("cannot"):
            row["interval_ratio"] = float(gpd[known].mean() / empirical[known].mean())
        rows.append(row)
    return rows
