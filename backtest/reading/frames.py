"""P&L handed over in memory: a long table or a Series, checked like a file."""

import numpy as np
import pandas as pd

from backtest.errors import DataError
from backtest.records import DATE_DTYPE

_NUMBERS = ("hypothetical", "actual", "risk_theoretical", "risk_theoretical_aligned")


def pnl_table(pnl: pd.DataFrame | pd.Series) -> pd.DataFrame:
    """Return P&L in the form of records.Inputs.pnl from a long table, or from a Series indexed by date.

    A Series is one desk called "desk" and hypothetical P&L, profit positive. Raises DataError (row, column, value) for
    a missing column, a value that is no date or number, an infinite value, a row that stands twice, an empty table.
    """
    if isinstance(pnl, pd.Series):
        pnl = pd.DataFrame({"date": pnl.index, "desk": "desk", "hypothetical": pnl.to_numpy()})
    for column in ("date", "desk", "hypothetical"):
        if column not in pnl:
            remedy = f"Name it {column!r}: the table needs date, desk and hypothetical."
            raise DataError("a column is missing", value=column, place="pnl", remedy=remedy)
    if pnl.empty:
        raise DataError("the table has no rows", place="pnl", remedy="Hand over at least one day.")
    table = pd.DataFrame({"date": _dates(pnl["date"], "date"), "desk": pnl["desk"].astype(str).to_numpy()})
    for column in _NUMBERS:
        if column in pnl:
            table[column] = _numbers(pnl[column], column)
    table["known_on"] = _known_on(pnl, table["date"])
    table = table.sort_values(["desk", "date", "known_on"], kind="stable").reset_index(drop=True)
    twice = table.duplicated(["desk", "date", "known_on"])
    if twice.any():
        row = table[twice].iloc[0]
        raise DataError(
            "the same date and desk stand twice", value=f"{row['date']:%Y-%m-%d} {row['desk']}", place="pnl",
            remedy="Keep one row, or say with known_on when each value became known.",
        )  # fmt: skip
    return table


def _known_on(pnl: pd.DataFrame, dates: pd.Series) -> np.ndarray:
    if "known_on" not in pnl:
        return dates.to_numpy()
    known = _dates(pnl["known_on"].where(pnl["known_on"].notna(), pnl["date"]), "known_on")
    early = known < dates.to_numpy()
    if early.any():
        at = int(np.argmax(early))
        raise DataError("a value is known before its day", value=str(known[at])[:10], place=f"pnl, row {at}, known_on")
    return known


def _dates(column: pd.Series, name: str) -> np.ndarray:
    try:
        dates = pd.to_datetime(column)
    except (ValueError, TypeError) as error:
        raise DataError(f"not a date: {error}", place=f"pnl, {name}", remedy="Hand over datetime64 values.") from None
    if dates.isna().any():
        raise DataError("a date is missing", place=f"pnl, row {int(np.argmax(dates.isna()))}, {name}")
    if dates.dt.tz is not None:
        raise DataError("dates carry a time zone", place=f"pnl, {name}", remedy="Use tz_localize(None).")
    return dates.to_numpy().astype("datetime64[D]").astype(DATE_DTYPE)


def _numbers(column: pd.Series, name: str) -> np.ndarray:
    try:
        values = column.to_numpy(dtype=np.float64, na_value=np.nan)
    except (ValueError, TypeError) as error:
        raise DataError(f"not a number: {error}", place=f"pnl, {name}", remedy="Hand over floats.") from None
    if np.isinf(values).any():
        raise DataError("an infinite value", place=f"pnl, row {int(np.argmax(np.isinf(values)))}, {name}")
    return values
