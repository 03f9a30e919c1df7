"""Reported forecasts: VaR and ES of the institution by target date, long or wide, as positive loss amounts."""

from collections.abc import Sequence

import numpy as np
import pandas as pd

from backtest.errors import DataError, StudyError, near_miss
from backtest.reading.cells import dates, names, numbers, refuse_first
from backtest.reading.columns import REPORTED_KEYS, find, refuse_missing, reported_columns, wide_levels
from backtest.reading.pnl import known_on, refuse_repeated
from backtest.reading.remarks import per_desk
from backtest.reading.tables import Table
from backtest.records import DATE_DTYPE, Remark
from backtest.study_form import Columns, Study

COLUMNS = ("date", "desk", "model", "level", "var", "es", "sigma", "pit")
DEFAULT_MODEL = "reported"
BAD_SHARE = 0.05
"""Above this share of rows with VaR < 0 or ES < VaR the file is taken to be mis-mapped (issue 2: refused)."""

Part = tuple[float | None, str, str | None]


def read_reported(table: Table, study: Study) -> tuple[pd.DataFrame, set[str], list[Remark]]:
    """Return the forecasts as written (date not yet shifted), with ``known_on`` and ``line``; columns used; remarks.

    One row a date x desk x model x level; rows without a VaR are left out with a remark; of restated forecasts the
    first known stands. Raises DataError and StudyError as the module's checks say.
    """
    columns = reported_columns(study.data)
    keys = _keys(table, columns, study)
    parts = _parts(table, columns, keys)
    base = _base(table, study, keys)
    frame = pd.concat([_values(table, study, base, keys, part) for part in parts], ignore_index=True)
    frame = frame.sort_values(["desk", "model", "level", "date", "known_on", "line"], ignore_index=True)
    identity = ["desk", "model", "level", "date", "known_on"]
    refuse_repeated(table, frame, identity, has_known_on="known_on" in keys)
    used = {*keys.values(), *(part[1] for part in parts), *(part[2] for part in parts if part[2])}
    empty = frame["var"].isna()
    remarks = per_desk("reported-empty", table.name, frame[empty], "rows without a VaR, left out: {count}")
    frame, restated = _first_known(frame[~empty], table.name)
    _refuse_nothing_left(frame, table.name)
    _refuse_subject(frame, study)
    return frame, used, [*remarks, *restated, *bad_rows(frame, table.name, study)]


def empty_reported() -> pd.DataFrame:
    """Return a reported table without rows, for a study without that file."""
    empty = pd.DataFrame({column: [] for column in COLUMNS}).astype(dict.fromkeys(COLUMNS, "float64"))
    return empty.astype({"date": DATE_DTYPE, "desk": "str", "model": "str"})


def _keys(table: Table, columns: Columns, study: Study) -> dict[str, str]:
    """Return our name -> column for all but wide VaR and ES columns."""
    wide = wide_levels(columns) is not None
    keys = [key for key in REPORTED_KEYS if not (wide and key in ("var", "es", "level"))]
    required = ["date", "desk"] if wide else ["date", "desk", "level", "var"]
    own = study.data.reported_columns
    strict = set(columns.model_fields_set)
    if own is None or "known_on" not in own.model_fields_set:
        strict.discard("known_on")
    if not wide and columns.level not in table.columns:
        rule = "a long file has a level column; a wide one is declared in data.columns.var"
        remedy = 'Set data.columns.level, or write var = [{ column = "...", level = 0.99 }].'
        place = f"{table.name}, header"
        raise DataError("there is no level column", rule=rule, value=columns.level, place=place, remedy=remedy)
    return find(table, columns, keys, required, strict)


def _parts(table: Table, columns: Columns, keys: dict[str, str]) -> Sequence[Part]:
    """Return (level, VaR column, ES column) of a wide file, or one part without a level of a long file."""
    wide = wide_levels(columns)
    if wide is None:
        return [(None, keys["var"], keys.get("es"))]
    for _, var, es in wide:
        for key, name in (("data.columns.var", var), ("data.columns.es", es)):
            if name is not None and name not in table.columns:
                refuse_missing(table, key, name)
    return wide


def _base(table: Table, study: Study, keys: dict[str, str]) -> pd.DataFrame:
    day = dates(table, keys["date"])
    base = pd.DataFrame({"date": day, "desk": names(table, keys["desk"]).to_numpy()}).astype({"desk": "str"})
    base["model"] = names(table, keys["model"]) if "model" in keys else study.review.subject or DEFAULT_MODEL
    base = base.astype({"model": "str"})
    base["known_on"] = known_on(table, keys.get("known_on"), day)
    base["line"] = table.lines
    for key in ("sigma", "pit"):
        base[key] = numbers(table, keys[key]) if key in keys else np.nan
    if "sigma" in keys:
        wrong = (base["sigma"] < 0).to_numpy()
        refuse_first(table, wrong, keys["sigma"], "a negative sigma", rule="sigma >= 0", remedy="Check the column.")
    if "pit" in keys:
        wrong = ((base["pit"] < 0) | (base["pit"] > 1)).to_numpy()
        refuse_first(table, wrong, keys["pit"], "no PIT", rule="0 <= PIT <= 1", remedy="Check the column.")
    return base


def _values(table: Table, study: Study, base: pd.DataFrame, keys: dict[str, str], part: Part) -> pd.DataFrame:
    level, var, es = part
    frame = base.copy()
    frame["level"] = _levels(table, keys["level"]) if level is None else level
    sign = 1.0 if study.data.var_sign == "positive" else -1.0
    frame["var"] = 0.0 + sign * numbers(table, var)
    frame["es"] = 0.0 + sign * numbers(table, es) if es is not None else np.nan
    return frame


def _levels(table: Table, column: str) -> np.ndarray:
    levels = numbers(table, column)
    wrong = ~((levels > 0.5) & (levels < 1))
    rule = "a level is a confidence between 0.5 and 1"
    refuse_first(table, wrong, column, "not a level", rule=rule, remedy="Write 0.99, never 1, 99 or 0.01.")
    return levels


def _first_known(frame: pd.DataFrame, name: str) -> tuple[pd.DataFrame, list[Remark]]:
    """Keep the forecast as it stood first; remark where a later row changed VaR or ES."""
    keys = ["desk", "model", "level", "date"]
    again = frame.duplicated(keys)
    kept = frame[~again].reset_index(drop=True)
    if not again.any():
        return kept, []
    pairs = frame[again].merge(kept, on=keys, suffixes=("", "_first"))
    changed = pairs[(pairs["var"] != pairs["var_first"]) | (pairs["es"].fillna(-1.0) != pairs["es_first"].fillna(-1.0))]
    text = "forecasts changed later: {count}; the first known stands, since it was the forecast"
    return kept, per_desk("reported-restated", name, changed, text)


def _refuse_nothing_left(frame: pd.DataFrame, name: str) -> None:
    if frame.empty:
        remedy = "Check data.columns.var, or take data.reported out of the study."
        raise DataError("no row carries a VaR", rule="a table has at least one row", place=name, remedy=remedy)


def _refuse_subject(frame: pd.DataFrame, study: Study) -> None:
    models, subject = sorted(frame["model"].unique()), study.review.subject
    if subject is not None and subject not in models:
        raise StudyError(
            "the reported file has no such model",
            rule="review.subject is a model of the reported file",
            value=subject,
            place=f"{study.path.name}, review.subject",
            remedy=near_miss(subject, models),
        )


def bad_rows(frame: pd.DataFrame, name: str, study: Study) -> list[Remark]:
    """Remark on single rows with VaR < 0 or ES < VaR, which stay as reported; refuse where they exceed BAD_SHARE."""
    negative = frame["var"] < 0
    below = frame["es"] < frame["var"]
    _refuse_share("VaR is negative", int(negative.sum()), len(frame), name, "data.var_sign")
    _refuse_share("ES is below VaR", int(below.sum()), int(frame["es"].notna().sum()), name, "data.columns.es")
    stays = "they stay as reported and are judged as they stand"
    return [
        *per_desk("var-negative", name, frame[negative], f"rows with a negative VaR: {{count}}; {stays}"),
        *per_desk("es-below-var", name, frame[below], f"rows with ES below VaR: {{count}}; {stays}"),
    ]


def _refuse_share(what: str, count: int, rows: int, name: str, key: str) -> None:
    if count > BAD_SHARE * rows:
        raise DataError(
            f"{what} on {count} of {rows} rows ({count / rows:.1%})",
            rule=f"at most {BAD_SHARE:.0%} of rows; more means a wrong sign or column",
            place=name,
            remedy=f"Check {key} (VaR and ES are read as positive loss amounts) and the columns the study names.",
        )


def to_target_dates(
    frame: pd.DataFrame, days: np.ndarray, name: str, *, as_of_dated: bool
) -> tuple[pd.DataFrame, list[Remark]]:
    """Move forecasts from the day they were computed to the next business day, where ``as_of_dated``.

    ``days`` are the business days known (datetime64[D], sorted). Left out, each with a remark: forecasts that stand
    on no business day, and those whose target lies beyond the last known day.
    """
    if not as_of_dated:
        return frame, []
    stand = frame["date"].to_numpy().astype("datetime64[D]")
    at = np.searchsorted(days, stand)
    off = days[np.minimum(at, len(days) - 1)] != stand
    beyond = ~off & (at + 1 >= len(days))
    moved = frame[~off & ~beyond].copy()
    moved["date"] = days[at[~off & ~beyond] + 1].astype(DATE_DTYPE)
    off_text = "forecasts that stand on no business day of the calendar, left out: {count}"
    beyond_text = "forecasts for a day beyond the last business day known, left out: {count}"
    remarks = per_desk("reported-off-calendar", name, frame[off], off_text)
    return moved, remarks + per_desk("reported-beyond", name, frame[beyond], beyond_text)
