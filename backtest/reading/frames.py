"""P&L and vectors handed over in memory, checked like files."""

import datetime as dt
from collections.abc import Iterable, Mapping
from typing import Any

import numpy as np
import pandas as pd

from backtest.errors import DataError, near_miss
from backtest.reading.cells import LARGEST_AMOUNT
from backtest.reading.vectors import VECTOR_COLUMNS, by_desk
from backtest.records import DATE_DTYPE, DeskVectors

_NUMBERS = ("hypothetical", "actual", "risk_theoretical", "risk_theoretical_aligned")


def pnl_table(pnl: pd.DataFrame | pd.Series) -> pd.DataFrame:
    """Return P&L in the form of records.Inputs.pnl from a long table, or from a Series indexed by date.

    A Series is one desk called "desk" and hypothetical P&L, profit positive. Raises DataError (row, column, value) for
    a missing column, a value that is no date or number, no amount of money, a desk without a name, a row that stands
    twice, an empty table.
    """
    if isinstance(pnl, pd.Series):
        pnl = pd.DataFrame({"date": pnl.index, "desk": "desk", "hypothetical": pnl.to_numpy()})
    _has(pnl, "pnl", ("date", "desk", "hypothetical"))
    if pnl.empty:
        raise DataError("the table has no rows", place="pnl", remedy="Hand over at least one day.")
    table = pd.DataFrame({"date": _dates(pnl["date"], "date"), "desk": _names(pnl["desk"], "desk", "pnl")})
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


def vectors_table(vectors: pd.DataFrame, desks: Iterable[str]) -> dict[str, DeskVectors]:
    """Return the vectors of a long table ``date, desk, scenario, pnl`` by desk; ``date`` is the target day.

    Raises DataError (row, column, value) for a missing column, what is no date or finite number, a desk that is not
    among ``desks``, a scenario on or after its date, a row that stands twice, an empty table.
    """
    _has(vectors, "vectors", VECTOR_COLUMNS)
    if vectors.empty:
        raise DataError("the table has no rows", place="vectors", remedy="Hand over at least one vector.")
    codes, found = pd.factorize(_names(vectors["desk"], "desk", "vectors"))
    for name in sorted(set(found) - set(desks)):
        raise DataError("an unknown desk", value=name, place="vectors, desk", remedy=near_miss(name, desks))
    days, scenarios = (
        _dates(vectors[column], column, "vectors").astype("datetime64[D]") for column in ("date", "scenario")
    )
    pnl = _numbers(vectors["pnl"], "pnl", "vectors")
    if np.isnan(pnl).any():
        place = f"vectors, row {int(np.argmax(np.isnan(pnl)))}, pnl"
        raise DataError("a scenario has no P&L", place=place, remedy="Supply the value, or take the row out.")
    names = [str(name) for name in found]
    return by_desk(names, codes, days, scenarios, pnl, _row_of_vectors, as_of_dated=False)


def reported_table(reported: pd.DataFrame | None, desks: Iterable[str]) -> pd.DataFrame:
    """Return ``date, desk, model, level, var`` of a long table; ``date`` is the target day.

    Rows without a VaR are left out; a table without ``model`` is that of one model, called "reported"; None: no rows.
    Raises DataError (row, column, value) for a missing column, what is no date or finite number, a level that is none,
    a desk that is not among ``desks``, a row that stands twice.
    """
    columns = ["date", "desk", "model", "level", "var"]
    if reported is None:
        return pd.DataFrame({column: pd.Series(dtype=object) for column in columns})
    _has(reported, "reported", [column for column in columns if column != "model"])
    table = reported if "model" in reported else reported.assign(model="reported")
    numbers = {column: _numbers(table[column], column, "reported") for column in ("level", "var")}
    wrong = ~((numbers["level"] > 0.5) & (numbers["level"] < 1.0))
    if wrong.any():
        row = int(np.argmax(wrong))
        remedy = "A level is a confidence such as 0.99, never 1 or 99."
        raise DataError("not a level", value=numbers["level"][row], place=f"reported, row {row}, level", remedy=remedy)
    names = {column: _names(table[column], column, "reported") for column in ("desk", "model")}
    for name in sorted(set(names["desk"]) - set(desks)):
        raise DataError("an unknown desk", value=name, place="reported, desk", remedy=near_miss(name, desks))
    out = pd.DataFrame({"date": _dates(table["date"], "date", "reported"), **names, **numbers})[columns]
    twice = out.duplicated(columns[:-1]).to_numpy()
    if twice.any():
        place = f"reported, row {int(np.argmax(twice))}"
        raise DataError("the same date, desk, model and level stand twice", place=place, remedy="Keep one row.")
    return out[out["var"].notna()].reset_index(drop=True)


def calendar_days(calendar: Any) -> np.ndarray:
    """Return business days handed over (datetime64[D], ascending, each once).

    Raises DataError for no days, numbers, what is no date, a missing one.
    """
    remedy = "Hand over the business days as datetime64 values."
    if isinstance(calendar, str | bytes | Mapping | pd.DataFrame) or not isinstance(calendar, Iterable):
        raise DataError("not a list of days", value=type(calendar).__name__, place="calendar", remedy=remedy)
    found = calendar if isinstance(calendar, np.ndarray | pd.Index | pd.Series) else list(calendar)
    if np.ndim(found) != 1:
        raise DataError("not a list of days", value=f"{np.ndim(found)} dimensions", place="calendar", remedy=remedy)
    days = pd.Series(found)
    if days.empty:
        raise DataError("there is no day", place="calendar", remedy=remedy)
    return np.unique(_dates(days, "date", "calendar").astype("datetime64[D]"))


def _has(table: Any, name: str, columns: Iterable[str]) -> None:
    """Refuse what is no table, and one that lacks a column or has it twice."""
    wanted = list(columns)
    needs = f"the table needs {', '.join(wanted[:-1])} and {wanted[-1]}."
    if not isinstance(table, pd.DataFrame):
        remedy = f"Hand over a pandas DataFrame: {needs}"
        raise DataError("not a table", value=type(table).__name__, place=name, remedy=remedy)
    for column in wanted:
        if column not in table:
            remedy = f"Name it {column!r}: {needs}"
            raise DataError("a column is missing", value=column, place=name, remedy=remedy)
    twice = table.columns[table.columns.duplicated()]
    if len(twice):
        raise DataError("a column stands twice", value=str(twice[0]), place=name, remedy="Rename or drop one.")


def _names(column: pd.Series, name: str, table: str) -> np.ndarray:
    names = column.astype(str)
    blank = [text for text in names.unique() if not (isinstance(text, str) and text.strip())]
    empty = (column.isna() | names.isin(blank)).to_numpy()
    if empty.any():
        place = f"{table}, row {int(np.argmax(empty))}, {name}"
        raise DataError("the name is missing", place=place, remedy="Supply the name, or take the row out.")
    return names.to_numpy(dtype=object)


def _row_of_vectors(row: int, column: str) -> str:
    return f"vectors, row {row}, {column}"


def _known_on(pnl: pd.DataFrame, dates: pd.Series) -> np.ndarray:
    if "known_on" not in pnl:
        return dates.to_numpy()
    known = _dates(pnl["known_on"].where(pnl["known_on"].notna(), pnl["date"]), "known_on")
    early = known < dates.to_numpy()
    if early.any():
        at = int(np.argmax(early))
        raise DataError("a value is known before its day", value=str(known[at])[:10], place=f"pnl, row {at}, known_on")
    return known


def _dates(column: pd.Series, name: str, table: str = "pnl") -> np.ndarray:
    remedy = "Hand over datetime64 values, or text such as 2025-12-31."
    if pd.api.types.is_numeric_dtype(column):  # pandas would take a number for nanoseconds since 1970
        raise DataError("a number is no date", value=column.iloc[0], place=f"{table}, {name}", remedy=remedy)
    try:
        dates = pd.to_datetime(column, format="ISO8601", errors="coerce")
    except (ValueError, TypeError) as error:
        raise DataError(f"not a date: {error}", place=f"{table}, {name}", remedy=remedy) from None
    unread = (dates.isna() & column.notna()).to_numpy()
    if unread.any():
        row = int(np.argmax(unread))
        raise DataError("not a date", value=column.iloc[row], place=f"{table}, row {row}, {name}", remedy=remedy)
    if dates.isna().any():
        raise DataError("a date is missing", place=f"{table}, row {int(np.argmax(dates.isna()))}, {name}")
    if dates.dt.tz is not None:
        raise DataError("dates carry a time zone", place=f"{table}, {name}", remedy="Use tz_localize(None).")
    return dates.to_numpy().astype("datetime64[D]").astype(DATE_DTYPE)


def _no_amounts(column: pd.Series) -> bool:
    """Tell columns that NumPy would turn into numbers though they are truth values, complex, dates or durations."""
    if column.dtype == object:
        return any(
            isinstance(v, bool | np.bool_ | complex | np.complexfloating | dt.date | dt.timedelta) for v in column
        )
    kinds = pd.api.types
    return bool(
        kinds.is_bool_dtype(column) or kinds.is_complex_dtype(column) or kinds.is_datetime64_any_dtype(column)
        or kinds.is_timedelta64_dtype(column)
    )  # fmt: skip


def _numbers(column: pd.Series, name: str, table: str = "pnl") -> np.ndarray:
    place = f"{table}, {name}"
    if _no_amounts(column):
        raise DataError("not amounts of money", value=str(column.dtype), place=place, remedy="Hand over floats.")
    try:
        values = column.to_numpy(dtype=np.float64, na_value=np.nan)
    except (ValueError, TypeError, OverflowError) as error:
        raise DataError(f"not a number: {error}", place=place, remedy="Hand over floats.") from None
    if np.isinf(values).any():
        raise DataError("an infinite value", place=f"{table}, row {int(np.argmax(np.isinf(values)))}, {name}")
    far = np.abs(values) > LARGEST_AMOUNT
    if far.any():
        row = int(np.argmax(far))
        rule = f"values lie between -{LARGEST_AMOUNT:g} and {LARGEST_AMOUNT:g}"
        raise DataError("not an amount of money", value=values[row], place=f"{table}, row {row}, {name}", rule=rule)
    return values
