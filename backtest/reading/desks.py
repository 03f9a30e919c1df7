"""Desks and changes: the side tables that say which desks there are and when something about them changed."""

from collections.abc import Iterable

import numpy as np
import pandas as pd

from backtest.errors import DataError, StudyError, near_miss
from backtest.reading.cells import choices, dates, names, refuse, refuse_first
from backtest.reading.columns import refuse_missing
from backtest.reading.tables import Table, place_of
from backtest.records import DATE_DTYPE, Remark
from backtest.study_form import Study

DESK_COLUMNS = ("desk", "parent", "valid_from", "valid_to", "scope", "currency", "kind")
CHANGE_COLUMNS = ("date", "desk", "kind", "note")
CHANGE_KINDS = ("model", "positions", "scope", "data")


def read_desks(table: Table) -> tuple[pd.DataFrame, set[str]]:
    """Return the desks file with every column of records.Inputs (empty where not supplied), and the columns used.

    Raises DataError for a desk listed twice, valid_to before valid_from, a desk above itself.
    """
    if "desk" not in table.columns:
        refuse_missing(table, "the desks file's column", "desk")
    frame = pd.DataFrame({"desk": names(table, "desk")})
    for column in DESK_COLUMNS[1:]:
        if column.startswith("valid_"):
            frame[column] = _days(table, column)
        else:
            frame[column] = names(table, column, required=False) if column in table.columns else ""
    frame = frame.astype({c: "str" for c in DESK_COLUMNS if not c.startswith("valid_")})
    twice = frame.duplicated("desk").to_numpy()
    refuse_first(table, twice, "desk", "the desk stands twice", rule="one row a desk", remedy="Keep one row.")
    if "valid_to" in table.columns:
        wrong = (frame["valid_to"] < frame["valid_from"]).to_numpy()
        rule = "valid_to is not before valid_from"
        refuse_first(table, wrong, "valid_to", "the desk ends before it begins", rule=rule, remedy="Correct the row.")
    _refuse_circles(table, frame)
    return frame.sort_values("desk", ignore_index=True), set(DESK_COLUMNS) & set(table.columns)


def _days(table: Table, column: str) -> np.ndarray:
    if column in table.columns:
        return dates(table, column, required=False)
    return np.full(table.rows, np.datetime64("NaT"), dtype=DATE_DTYPE)


def _refuse_circles(table: Table, frame: pd.DataFrame) -> None:
    above = dict(zip(frame["desk"], frame["parent"], strict=True))
    for row, desk in enumerate(frame["desk"]):
        seen, up = {desk}, above[desk]
        while up in above and up not in seen:
            seen.add(up)
            up = above[up]
        if up == desk:
            remedy = "Correct the parents."
            refuse(table, row, "parent", "the desk is above itself", rule="parents form a tree", remedy=remedy)


def lives(desks: pd.DataFrame) -> dict[str, tuple[pd.Timestamp | None, pd.Timestamp | None]]:
    """Return desk -> (valid_from, valid_to), None where not given."""
    starts, ends = list(desks["valid_from"]), list(desks["valid_to"])
    pairs = zip(desks["desk"], starts, ends, strict=True)
    return {desk: (_day_or_none(start), _day_or_none(end)) for desk, start, end in pairs}


def _day_or_none(day: object) -> pd.Timestamp | None:
    return None if pd.isna(day) else pd.Timestamp(day)  # type: ignore[arg-type,call-overload]


def desks_of_data(pnl: pd.DataFrame, reported: pd.DataFrame, currency: str) -> pd.DataFrame:
    """Return a desks table for desks known from the data alone: no parent, no dates, the P&L's or study's currency."""
    desks = sorted({*pnl["desk"].unique(), *reported["desk"].unique()})
    frame = pd.DataFrame({"desk": desks, "parent": "", "scope": "", "kind": ""})
    frame["valid_from"] = np.full(len(desks), np.datetime64("NaT"), dtype=DATE_DTYPE)
    frame["valid_to"] = frame["valid_from"]
    known = _currencies(pnl)
    frame["currency"] = [known.get(desk, currency) for desk in desks]
    text = {c: "str" for c in DESK_COLUMNS if not c.startswith("valid_")}
    return frame[list(DESK_COLUMNS)].astype(text)


def _currencies(pnl: pd.DataFrame) -> dict[str, str]:
    if "currency" not in pnl:
        return {}
    pairs = pnl.drop_duplicates("desk")
    return dict(zip(pairs["desk"], pairs["currency"], strict=True))


def complete_desks(desks: pd.DataFrame, pnl: pd.DataFrame, study: Study, table: Table) -> pd.DataFrame:
    """Fill in currencies, and the firm's own row where the file lists only the desks below it.

    Raises DataError where the desks file and the P&L give a desk different currencies.
    """
    known = _currencies(pnl)
    firm = study.review.firm
    if firm is not None and firm not in set(desks["desk"]):
        row = pd.DataFrame({c: [pd.NaT if c.startswith("valid_") else ""] for c in DESK_COLUMNS})
        row["desk"] = firm
        desks = pd.concat([desks, row.astype(desks.dtypes.to_dict())], ignore_index=True)
    for desk, listed in zip(desks["desk"], desks["currency"], strict=True):
        if listed and known.get(desk, listed) != listed:
            rule = "desks file and P&L agree on a desk's currency"
            remedy = f"The P&L says {known[desk]!r}: correct one of them."
            place = f"{table.name}, desk {desk!r}, column 'currency'"
            raise DataError("a desk has two currencies", rule=rule, value=listed, place=place, remedy=remedy)
    filled = [
        listed or known.get(desk, study.data.currency)
        for desk, listed in zip(desks["desk"], desks["currency"], strict=True)
    ]
    return desks.assign(currency=pd.array(filled, dtype="str")).sort_values("desk", ignore_index=True)


def refuse_unknown(frame: pd.DataFrame, table: Table, known: Iterable[str], rule: str) -> None:
    """Refuse the first row of ``frame`` (with ``line``) whose desk is not among ``known``."""
    names_ = set(known)
    unknown = frame[~frame["desk"].isin(names_)]
    if len(unknown):
        first = unknown.nsmallest(1, "line").iloc[0]
        remedy = near_miss(first["desk"], names_) + " Correct the name, or add the desk."
        place = place_of(table, int(first["line"]))
        raise DataError("an unknown desk", rule=rule, value=first["desk"], place=place, remedy=remedy)


def refuse_unknown_firm(pnl: pd.DataFrame, study: Study) -> None:
    """Refuse a study whose ``review.firm`` is no desk of the P&L."""
    firm, desks = study.review.firm, set(pnl["desk"].unique())
    if firm is not None and firm not in desks:
        raise StudyError(
            "the P&L has no such row",
            rule="review.firm is one of the desks of the P&L",
            value=firm,
            place=f"{study.path.name}, review.firm",
            remedy=near_miss(firm, desks),
        )


def remark_desks(desks: pd.DataFrame, pnl: pd.DataFrame, reported: pd.DataFrame, table: Table) -> list[Remark]:
    """Remark on desks of the file without data, and on parents that are no desk of the file."""
    with_data = {*pnl["desk"].unique(), *reported["desk"].unique()}
    known = set(desks["desk"])
    remarks = [
        Remark("desk-without-data", table.name, desk, "", "", 1, "the desk has neither P&L nor reported forecasts")
        for desk in desks["desk"]
        if desk not in with_data
    ]
    strangers = desks[(desks["parent"] != "") & ~desks["parent"].isin(known)]
    for parent, rows in strangers.groupby("parent", sort=True):
        text = f"the parent {parent!r} is no desk of the file: desks under it, which count as top level: {len(rows)}"
        remarks.append(Remark("parent-unknown", table.name, "", "", "", len(rows), text))
    return remarks


def read_changes(table: Table) -> tuple[pd.DataFrame, set[str]]:
    """Return the changes (``date, desk, kind, note, line``), sorted by desk, date, and the columns used."""
    for column in ("date", "desk", "kind"):
        if column not in table.columns:
            refuse_missing(table, "the changes file's column", column)
    frame = pd.DataFrame({"date": dates(table, "date"), "desk": names(table, "desk").to_numpy()})
    frame["kind"] = choices(table, "kind", CHANGE_KINDS)
    frame["note"] = names(table, "note", required=False) if "note" in table.columns else ""
    frame = frame.astype({"desk": "str", "kind": "str", "note": "str"})
    frame["line"] = table.lines
    order = ["desk", "date", "kind", "note", "line"]
    return frame.sort_values(order, ignore_index=True), set(CHANGE_COLUMNS) & set(table.columns)


def no_changes() -> pd.DataFrame:
    """Return an empty changes table, for a study without that file."""
    text = {"desk": "str", "kind": "str", "note": "str", "date": DATE_DTYPE}
    return pd.DataFrame({column: [] for column in CHANGE_COLUMNS}).astype(text)
