"""P&L: date x desk with one or more kinds of P&L, in profit-positive form, restatements kept apart by known_on."""

import numpy as np
import pandas as pd

from backtest.errors import DataError
from backtest.reading.cells import choices, dates, names, numbers, refuse_first
from backtest.reading.columns import PNL_KEYS, PNL_VALUES, find
from backtest.reading.tables import Table, place_of
from backtest.study_form import Data

FLAGS = ("filled", "replaced", "late")


def read_pnl(table: Table, data: Data) -> tuple[pd.DataFrame, set[str]]:
    """Return the P&L in the convention of records.Inputs, with each row's ``line``, and the columns that were used.

    Rows are sorted by desk, date, known_on. Raises DataError (see cells) and for the same date x desk twice without
    known_on, known_on before the date, unknown flags, a desk in two currencies.
    """
    found = find(table, data.columns, PNL_KEYS, ("date", "desk", "hypothetical"), set(data.columns.model_fields_set))
    frame = pd.DataFrame({"date": dates(table, found["date"]), "desk": names(table, found["desk"]).to_numpy()})
    frame = frame.astype({"desk": "str"})
    for kind in PNL_VALUES:
        if kind in found:
            values = numbers(table, found[kind])
            frame[kind] = values if data.pnl_sign == "profit-positive" else 0.0 - values
    if "currency" in found:
        frame["currency"] = names(table, found["currency"])
    if "flag" in found:
        frame["flag"] = choices(table, found["flag"], FLAGS, required=False)
    frame["known_on"] = known_on(table, found.get("known_on"), frame["date"].to_numpy())
    frame["line"] = table.lines
    frame = frame.sort_values(["desk", "date", "known_on", "line"], ignore_index=True)
    refuse_repeated(table, frame, ["desk", "date", "known_on"], has_known_on="known_on" in found)
    _refuse_two_currencies(table, frame)
    return frame, set(found.values())


def known_on(table: Table, column: str | None, dates_: np.ndarray) -> np.ndarray:
    """Return the day each value became known: the cell, or the row's own date where there is none."""
    if column is None:
        return dates_
    known = dates(table, column, required=False)
    rule = "a value is known on its date or later"
    refuse_first(table, known < dates_, column, "known_on lies before the date", rule=rule, remedy="Correct the row.")
    return np.where(np.isnat(known), dates_, known)


def refuse_repeated(table: Table, frame: pd.DataFrame, keys: list[str], *, has_known_on: bool) -> None:
    """Refuse a second row with the same ``keys``; ``frame`` is sorted by them and by line."""
    repeated = frame.duplicated(keys)
    if not repeated.any():
        return
    second = frame[repeated].nsmallest(1, "line").iloc[0]
    same = np.logical_and.reduce([frame[key] == second[key] for key in keys])
    first = int(frame.loc[same, "line"].min())
    day = pd.Timestamp(second["date"]).date().isoformat()
    rule = "date x desk stands once per known_on" if has_known_on else "date x desk stands once without known_on"
    raise DataError(
        f"{day} x {second['desk']!r} stands twice, first in {table.unit} {first}",
        rule=rule,
        value=f"{day}, {second['desk']}",
        place=place_of(table, int(second["line"])),
        remedy="Remove one of the rows; for a restated value give the day it became known in a known_on column.",
    )


def _refuse_two_currencies(table: Table, frame: pd.DataFrame) -> None:
    if "currency" not in frame:
        return
    pairs = frame.groupby(["desk", "currency"], sort=True)["line"].min().reset_index().sort_values("line")
    second = pairs[pairs.duplicated("desk")]
    if len(second):
        row = second.iloc[0]
        raise DataError(
            f"desk {row['desk']!r} has P&L in two currencies",
            rule="a desk has one currency; nothing is converted here",
            value=row["currency"],
            place=place_of(table, int(row["line"])),
            remedy="Convert the desk's P&L to one currency, or give each currency its own desk.",
        )
