"""The calendar: business days as supplied, else the union of the data's days; and the cut-off."""

import numpy as np
import pandas as pd

from backtest.errors import DataError, StudyError
from backtest.reading.cells import dates
from backtest.reading.columns import refuse_missing
from backtest.reading.remarks import iso
from backtest.reading.tables import Table
from backtest.records import Remark
from backtest.study_form import Study


def read_calendar(table: Table) -> tuple[np.ndarray, set[str]]:
    """Return the business days of a calendar file (datetime64[D], sorted, each once) and the column used."""
    if "date" not in table.columns:
        refuse_missing(table, "the calendar's column", "date")
    return np.unique(dates(table, "date").astype("datetime64[D]")), {"date"}


def days_of_data(*frames: pd.DataFrame | None) -> np.ndarray:
    """Return the union of the dates of the frames (datetime64[D], sorted)."""
    found = [frame["date"].to_numpy().astype("datetime64[D]") for frame in frames if frame is not None]
    return np.unique(np.concatenate(found))


def cut_off(study: Study, pnl: pd.DataFrame, name: str) -> np.datetime64:
    """Return ``review.as_of``, else the last P&L day; refuse a cut-off that lies before all P&L."""
    first, last = pnl["date"].min(), pnl["date"].max()
    if study.review.as_of is None:
        return np.datetime64(iso(last), "D")
    as_of = np.datetime64(study.review.as_of, "D")
    if as_of < np.datetime64(iso(first), "D"):
        raise StudyError(
            f"all P&L of {name} lies after the cut-off (first day {iso(first)})",
            rule="nothing after review.as_of is used",
            value=as_of,
            place=f"{study.path.name}, review.as_of",
            remedy="Move review.as_of, or check data.date_format.",
        )
    return as_of


def within(days: np.ndarray, first: object, as_of: np.datetime64) -> np.ndarray:
    """Return the business days from the first P&L day to the cut-off; refuse a calendar that has none there."""
    found = days[(days >= np.datetime64(iso(first), "D")) & (days <= as_of)]
    if not len(found):
        remedy = "Check the calendar and review.as_of."
        raise DataError(f"there is no business day from {iso(first)} to {as_of}", place="calendar", remedy=remedy)
    return found


def refuse_short_calendar(days: np.ndarray, pnl: pd.DataFrame, name: str) -> None:
    """Refuse a supplied calendar that does not span the P&L: days outside it could be neither forecast nor judged."""
    first, last = iso(pnl["date"].min()), iso(pnl["date"].max())
    if days[0] > np.datetime64(first) or days[-1] < np.datetime64(last):
        raise DataError(
            f"the calendar does not span the P&L ({first} to {last})",
            rule="a supplied calendar covers the P&L up to the cut-off",
            value=f"{days[0]} to {days[-1]}",
            place=name,
            remedy="Extend the calendar, or leave it out (data.calendar): then the union of the data's days is used.",
        )


def calendar_from_data(days: np.ndarray) -> list[Remark]:
    """Remark that no calendar was supplied, and how many weekdays between first and last day the data do not have."""
    weekdays = np.busday_count(days[0], days[-1] + 1)
    present = int(np.is_busday(days).sum())
    missing = int(weekdays) - present
    text = (
        f"no calendar supplied: business days are the union of the data's days; {missing} weekdays between "
        f"{days[0]} and {days[-1]} are in no table, and whether they were holidays cannot be seen"
    )
    return [Remark("calendar-from-data", "calendar", "", str(days[0]), str(days[-1]), missing, text)]
