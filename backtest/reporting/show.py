"""One day of one desk as recorded: what was forecast, from which day, and what happened. Nothing is computed."""

import datetime as dt

import numpy as np
import pandas as pd

from backtest.errors import RecordError, near_miss
from backtest.records import PNL_KINDS, Record
from backtest.reporting import wording as say
from backtest.reporting.book import Book, given, text


def day_view(record: Record, desk: str, date: str | dt.date | np.datetime64) -> list[str]:
    """Return the lines of one desk's day: P&L by kind, then each model and level with its forecast and exceptions.

    Raises RecordError with the near miss for an unknown desk, with the nearest recorded day for an unknown one.
    """
    book = Book(record)
    if desk not in book.desks:
        raise RecordError("the record has no such desk", value=desk, remedy=near_miss(desk, book.desks))
    day = _day(date)
    forecasts, pnl = book.forecasts(desk), book.pnl(desk)
    days = np.unique(pd.concat([forecasts["date"], pnl["date"]]).to_numpy().astype("datetime64[D]"))
    if day not in days:
        nearest = days[int(np.argmin(np.abs(days - day)))]
        remedy = f"The nearest recorded day is {nearest}."
        raise RecordError("the desk has no such day", value=str(day), place=desk, remedy=remedy)
    losses = pnl[pnl["date"] == pd.Timestamp(day)]
    lines = [f"{desk}, {day}", *_pnl_lines(losses, book.currency), ""]
    every = record.forecasts
    rows = every[(every["desk"] == desk) & (every["date"] == pd.Timestamp(day))]
    return lines + (_forecast_lines(rows, losses) if len(rows) else ["No model forecast this day."])


def _day(date: str | dt.date | np.datetime64) -> np.datetime64:
    try:
        return np.datetime64(str(date), "D")
    except ValueError:
        raise RecordError("this is no date", value=str(date), remedy="Write it as 2025-12-31.") from None


def _pnl_lines(losses: pd.DataFrame, currency: str) -> list[str]:
    names = [str(c) for c in losses.columns if c not in ("date", "desk", "known_on", "currency", "flag")]
    lines = []
    for name in names:
        value = given(losses[name].iloc[0]) if len(losses) else None
        if value is None and name.startswith("first_known"):  # recorded only where a day was restated
            continue
        shown = "not known" if value is None else f"{currency} {say.amount(value)}"
        lines.append(f"  P&L {name.replace('_', ' ')}: {shown}")
    return lines or ["  P&L: not known"]


_WIDTHS = (20, 6, 10, 13, 13, 12, 14)
"""Widths of the columns, two blanks between them: 100 in all."""


def _forecast_lines(rows: pd.DataFrame, losses: pd.DataFrame) -> list[str]:
    lines = _lines(("model", "level", "origin", "VaR", "ES", "exception", "status"))
    for _, row in _ordered(rows).iterrows():
        lines += _lines((*_cells(row, losses), text(row["status"]))) + _interval(row)
    return lines


def _interval(row: "pd.Series") -> list[str]:
    """Return the line of the 95% intervals from estimation error, none where the record has none."""
    ends = [given(row[name]) for name in ("var_low", "var_high", "es_low", "es_high")]
    if any(end is None for end in ends):
        return []
    low, high, es_low, es_high = (say.amount(end) for end in ends if end is not None)
    return [f"    95% interval from estimation error: VaR {low} to {high}, ES {es_low} to {es_high}"]


def _ordered(rows: pd.DataFrame) -> pd.DataFrame:
    return rows.assign(place=pd.factorize(rows["model"])[0]).sort_values(["horizon", "place", "level"])


def _cells(row: "pd.Series", losses: pd.DataFrame) -> tuple[str, ...]:
    var, es = given(row["var"]), given(row["es"])
    amounts = [say.DASH if v is None else say.amount(v) for v in (var, es)]
    days = int(row["horizon"])
    name = str(row["model"]) if days == 1 else f"{row['model']}, {days} days"
    exception = _exception(var, losses) if days == 1 else say.DASH
    return (name, say.level(row["level"]), say.date(row["origin"]), *amounts, exception)


def _exception(var: float | None, losses: pd.DataFrame) -> str:
    found = {k: given(losses[k].iloc[0]) for k in PNL_KINDS if k in losses and len(losses)}
    known = {k: v for k, v in found.items() if v is not None}
    if var is None or not known:
        return "not tested"
    hit = [k for k, v in known.items() if -v > var]
    return "none" if not hit else hit[0] if len(hit) == 1 else "both"


def _lines(cells: tuple[str, ...]) -> list[str]:
    """Return a row as a line; a model name or a status that is too long gets a line of its own, before or after it."""
    before = [cells[0]] if len(cells[0]) > _WIDTHS[0] else []
    after = [f"    status: {cells[-1]}"] if len(cells[-1]) > _WIDTHS[-1] else []
    fitted = ("" if before else cells[0], *cells[1:-1], "" if after else cells[-1])
    right = (1, 3, 4)
    padded = [f"{c:>{w}}" if i in right else f"{c:<{w}}" for i, (c, w) in enumerate(zip(fitted, _WIDTHS, strict=True))]
    return [*before, "  ".join(padded).rstrip(), *after]
