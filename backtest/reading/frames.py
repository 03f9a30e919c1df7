"""P&L and vectors handed over in memory, checked like files."""

from collections.abc import Iterable

import numpy as np
import pandas as pd

from backtest.errors import DataError, near_miss
from backtest.reading.vectors import VECTOR_COLUMNS, by_desk
from backtest.records import DATE_DTYPE, DeskVectors

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


def vectors_table(vectors: pd.DataFrame, desks: Iterable[str]) -> dict[str, DeskVectors]:
    """Return the vectors of a long table ``date, desk, scenario, pnl`` by desk; ``date`` is the target day.

    Raises DataError (row, column, value) for a missing column, what is no date or finite number, a desk that is not
    among ``desks``, a scenario on or after its date, a row that stands twice, an empty table.
    """
    for column in VECTOR_COLUMNS:
        if column not in vectors:
            remedy = "The table needs date, desk, scenario and pnl."
            raise DataError("a column is missing", value=column, place="vectors", remedy=remedy)
    if vectors.empty:
        raise DataError("the table has no rows", place="vectors", remedy="Hand over at least one vector.")
    codes, found = pd.factorize(vectors["desk"].astype(str))
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
    table = reported if "model" in reported else reported.assign(model="reported")
    for column in columns:
        if column not in table:
            remedy = "The table needs date, desk, level and var."
            raise DataError("a column is missing", value=column, place="reported", remedy=remedy)
    numbers = {column: _numbers(table[column], column, "reported") for column in ("level", "var")}
    wrong = ~((numbers["level"] > 0.5) & (numbers["level"] < 1.0))
    if wrong.any():
        row = int(np.argmax(wrong))
        remedy = "A level is a confidence such as 0.99, never 1 or 99."
        raise DataError("not a level", value=numbers["level"][row], place=f"reported, row {row}, level", remedy=remedy)
    names = {column: table[column].astype(str).to_numpy() for column in ("desk", "model")}
    for name in sorted(set(names["desk"]) - set(desks)):
        raise DataError("an unknown desk", value=name, place="reported, desk", remedy=near_miss(name, desks))
    out = pd.DataFrame({"date": _dates(table["date"], "date", "reported"), **names, **numbers})[columns]
    twice = out.duplicated(columns[:-1]).to_numpy()
    if twice.any():
        place = f"reported, row {int(np.argmax(twice))}"
        raise DataError("the same date, desk, model and level stand twice", place=place, remedy="Keep one row.")
    return out[out["var"].notna()].reset_index(drop=True)


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


def _numbers(column: pd.Series, name: str, table: str = "pnl") -> np.ndarray:
    try:
        values = column.to_numpy(dtype=np.float64, na_value=np.nan)
    except (ValueError, TypeError) as error:
        raise DataError(f"not a number: {error}", place=f"{table}, {name}", remedy="Hand over floats.") from None
    if np.isinf(values).any():
        raise DataError("an infinite value", place=f"{table}, row {int(np.argmax(np.isinf(values)))}, {name}")
    return values
