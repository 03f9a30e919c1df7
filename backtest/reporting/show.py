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
    rows = forecasts[forecasts["date"] == pd.Timestamp(day)]
    return lines + (_forecast_lines(rows, losses) if len(rows) else ["No model forecast this day."])


def _day(date: str | dt.date | np.datetime64) -> np.datetime64:
    try:
        return np.datetime64(str(date), "D")
    except ValueError:
        raise RecordError("this is no date", value=str(date), remedy="Write it as 2025-12-31.") from None


def _pnl_lines(losses: pd.DataFrame, currency: str) -> list[str]:
    names = [c for c in losses.columns if c not in ("date", "desk", "known_on", "currency", "flag")]
    lines = []
    for name in names:
        value = given(losses[name].iloc[0]) if len(losses) else None
        shown = "not known" if value is None else f"{currency} {say.amount(value)}"
        lines.append(f"  P&L {str(name).replace('_', ' ')}: {shown}")
    return lines or ["  P&L: not known"]


_WIDTHS = (24, 6, 10, 14, 14, 22)


def _forecast_lines(rows: pd.DataFrame, losses: pd.DataFrame) -> list[str]:
    head = ("model", "level", "origin", "VaR", "ES", "exception")
    return [_line(head, "status")] + [_line(_cells(r, losses), text(r["status"])) for _, r in _ordered(rows).iterrows()]


def _ordered(rows: pd.DataFrame) -> pd.DataFrame:
    return rows.assign(place=pd.factorize(rows["model"])[0]).sort_values(["place", "level"])


def _cells(row: "pd.Series", losses: pd.DataFrame) -> tuple[str, ...]:
    var, es = given(row["var"]), given(row["es"])
    amounts = [say.DASH if v is None else say.amount(v) for v in (var, es)]
    return (str(row["model"]), say.level(row["level"]), say.date(row["origin"]), *amounts, _exception(var, losses))


def _exception(var: float | None, losses: pd.DataFrame) -> str:
    found = {k: given(losses[k].iloc[0]) for k in PNL_KINDS if k in losses and len(losses)}
    known = {k: v for k, v in found.items() if v is not None}
    if var is None or not known:
        return "not tested"
    hit = [k for k, v in known.items() if -v > var]
    return "none" if not hit else " and ".join(hit)


def _line(cells: tuple[str, ...], status: str) -> str:
    fitted = [c if len(c) <= w else c[: w - 1] + "…" for c, w in zip(cells, _WIDTHS, strict=True)]
    left = [
        f"{c:<{w}}" if i in (0, 2, 5) else f"{c:>{w}}" for i, (c, w) in enumerate(zip(fitted, _WIDTHS, strict=True))
    ]
    return f"{'  '.join(left)}  {status}".rstrip()
