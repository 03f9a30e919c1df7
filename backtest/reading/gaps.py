"""Remarks on days: missing, empty, at weekends, off the calendar, outside a desk's life, on one side only."""

import numpy as np
import pandas as pd

from backtest.reading.columns import PNL_VALUES
from backtest.reading.desks import lives
from backtest.reading.remarks import desk_remark, per_desk
from backtest.records import DATE_DTYPE, PNL_KINDS, Remark, first_known, latest_known


def missing_days(pnl: pd.DataFrame, desks: pd.DataFrame, calendar: np.ndarray, source: str) -> list[Remark]:
    """Remark on business days without a P&L row, from a desk's first row (or valid_from) to the cut-off (valid_to)."""
    life = lives(desks)
    days = calendar.astype(DATE_DTYPE)
    parts = []
    for desk, dates in pnl.groupby("desk", sort=True)["date"]:
        first, last = life[str(desk)]
        start, end = first or dates.min(), last or pd.Timestamp(days[-1])
        expected = days[(days >= start.to_datetime64()) & (days <= end.to_datetime64())]
        absent = np.setdiff1d(expected, dates.to_numpy())
        parts.append(pd.DataFrame({"date": absent, "desk": desk}))
    text = "business days without a P&L row: {count}, first {first}, last {last}"
    return per_desk("missing-days", source, pd.concat(parts, ignore_index=True), text)


def empty_values(pnl: pd.DataFrame, as_of: np.datetime64, source: str) -> list[Remark]:
    """Remark on days whose row carries no value of a P&L kind that the file has."""
    latest = latest_known(pnl, as_of)
    remarks = []
    for kind in PNL_VALUES:
        if kind in latest:
            text = f"rows without a value of {kind} P&L: {{count}}"
            remarks += per_desk(f"empty-{kind.replace('_', '-')}", source, latest[latest[kind].isna()], text)
    return remarks


def weekends(pnl: pd.DataFrame, reported: pd.DataFrame, sources: tuple[str, str]) -> list[Remark]:
    """Remark on Saturdays and Sundays among the dates of P&L and of reported forecasts."""
    remarks = []
    for frame, source in zip((pnl, reported), sources, strict=True):
        days = frame.drop_duplicates(["desk", "date"])
        at_weekend = days[days["date"].dt.day_of_week >= 5]
        remarks += per_desk("weekend", source, at_weekend, "dates on a Saturday or Sunday: {count}")
    return remarks


def off_calendar(frame: pd.DataFrame, days: np.ndarray, rule: str, source: str) -> list[Remark]:
    """Remark on dates that the supplied calendar does not have: such days are no target days."""
    unknown = frame[~frame["date"].isin(days.astype(DATE_DTYPE))].drop_duplicates(["desk", "date"])
    return per_desk(rule, source, unknown, "dates that are no business day of the calendar: {count}")


def outside_life(pnl: pd.DataFrame, desks: pd.DataFrame, source: str) -> list[Remark]:
    """Remark on P&L before a desk's valid_from or after its valid_to."""
    rows = pnl.drop_duplicates(["desk", "date"]).merge(desks[["desk", "valid_from", "valid_to"]], on="desk")
    outside = rows[(rows["date"] < rows["valid_from"]) | (rows["date"] > rows["valid_to"])]
    return per_desk("outside-validity", source, outside, "P&L days outside the desk's valid dates: {count}")


def one_side_only(pnl: pd.DataFrame, reported: pd.DataFrame, as_of: np.datetime64, source: str) -> list[Remark]:
    """Remark on reported days without P&L and, from the first forecast of a model x level on, P&L days without."""
    if reported.empty:
        return []
    rows = latest_known(pnl, as_of)
    values = [kind for kind in PNL_KINDS if kind in rows]
    with_value = rows.loc[rows[values].notna().any(axis=1), ["desk", "date"]]
    days = reported[["desk", "date"]]
    lonely = days[~_among(days, with_value)].drop_duplicates()
    gaps = []
    for _, series in reported.groupby(["model", "level"], sort=True):
        start = with_value["desk"].map(series.groupby("desk", sort=True)["date"].min())
        expected = with_value[(with_value["date"] >= start).to_numpy()]
        gaps.append(expected[~_among(expected, series)])
    silent = pd.concat(gaps).drop_duplicates()
    unjudged = with_value[~with_value["desk"].isin(reported["desk"].unique())]
    text = "P&L days without a reported VaR of a model and level that had begun by then: {count}"
    return [
        *per_desk("reported-without-pnl", source, lonely, "days with a reported VaR and no P&L: {count}"),
        *per_desk("pnl-without-reported", source, silent, text),
        *per_desk("nothing-reported", source, unjudged, "no reported forecast at all; P&L days: {count}"),
    ]


def _among(rows: pd.DataFrame, others: pd.DataFrame) -> np.ndarray:
    """Say, for each row, whether its desk x date is among ``others``."""
    both = pd.MultiIndex.from_frame(rows[["desk", "date"]])
    return both.isin(pd.MultiIndex.from_frame(others[["desk", "date"]]))


def restated(pnl: pd.DataFrame, as_of: np.datetime64, source: str) -> list[Remark]:
    """Remark on values restated by the cut-off: how many days, and the largest change of any P&L kind."""
    twice = pnl[pnl.duplicated(["desk", "date"], keep=False)]
    first, last = first_known(twice, as_of), latest_known(twice, as_of)
    kinds = [kind for kind in PNL_VALUES if kind in pnl]
    change = (last[kinds] - first[kinds]).abs()
    appeared = (last[kinds].notna() != first[kinds].notna()).any(axis=1)
    last = last.assign(size=change.max(axis=1).fillna(0.0))
    last = last[(last["size"] > 0) | appeared]
    remarks = []
    for desk, rows in last.groupby("desk", sort=True):
        largest = rows.sort_values(["size", "date"], ascending=[False, True], kind="stable").iloc[0]
        change_text = f"{largest['size']:,.6g} on {largest['date']:%Y-%m-%d}"
        text = f"restated days: {len(rows)}; the largest change is {change_text}"
        remarks.append(
            desk_remark("restated", source, str(desk), rows["date"].min(), rows["date"].max(), len(rows), text)
        )
    return remarks


def currencies(desks: pd.DataFrame, source: str) -> list[Remark]:
    """Remark on desks in different currencies: their amounts do not add up."""
    found = sorted(set(desks["currency"]))
    if len(found) < 2:
        return []
    text = f"the desks have {len(found)} currencies ({', '.join(found)}): amounts are not converted and do not add up"
    return [Remark("mixed-currencies", source, "", "", "", len(found), text)]
