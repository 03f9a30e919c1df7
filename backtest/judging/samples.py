"""The table every test reads: for one desk, model, P&L kind, level and span, the losses beside their forecasts.

Two long tables go in, aligned arrays come out. A day is in a sample when both its P&L and its VaR are known; days that
are skipped leave their neighbours adjacent. Only one-day forecasts are judged.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from typing import Literal, cast

import numpy as np
import numpy.typing as npt
import pandas as pd

from backtest.errors import DataError, StudyError, near_miss
from backtest.records import PNL_KINDS
from backtest.values import listed, once, whole

Floats = npt.NDArray[np.float64]
Days = npt.NDArray[np.datetime64]
Mask = npt.NDArray[np.bool_]
Span = int | Literal["all"]

MEASURES = ("var", "es", "sigma", "shape", "pit")
_COLUMNS = (*MEASURES[:-1], *(f"pit_{kind}" for kind in PNL_KINDS))


@dataclass(frozen=True)
class Sample:
    """Losses and forecasts of T days: ``dates`` datetime64[D], the others float64[T]; NaN where a measure is unknown.

    Losses, VaR and ES are positive loss amounts; ``level`` is the confidence; ``pit`` is that of the loss of this kind
    of P&L, so that a large loss stands near 1.
    """

    desk: str
    model: str
    kind: str
    level: float
    dates: Days
    losses: Floats
    var: Floats
    es: Floats
    sigma: Floats
    shape: Floats
    pit: Floats

    @property
    def days(self) -> int:
        """Number of days T."""
        return len(self.losses)

    @property
    def nominal(self) -> float:
        """Probability of an exception if VaR is right: 1 - level."""
        return 1.0 - self.level

    @property
    def hits(self) -> Mask:
        """Exceptions: loss strictly above VaR, bool[T]."""
        return self.losses > self.var

    @property
    def exceptions(self) -> int:
        """Number of exceptions."""
        return int(np.count_nonzero(self.hits))

    def on(self, keep: npt.NDArray[np.bool_] | npt.NDArray[np.intp]) -> "Sample":
        """Return the same sample on the days kept (a mask or positions)."""
        arrays = ("dates", "losses", *MEASURES)
        return replace(self, **{name: getattr(self, name)[keep] for name in arrays})


@dataclass(frozen=True)
class Desk:
    """One desk's P&L days and forecasts, before any span is chosen.

    ``losses`` by P&L kind, float64 on ``dates``; ``forecasts`` by (model, level): dates and measures on them;
    ``business`` the business days up to the cut-off that spans are counted on.
    """

    name: str
    dates: Days
    losses: dict[str, Floats]
    business: Days
    forecasts: dict[tuple[str, float], tuple[Days, dict[str, Floats]]]

    @property
    def models(self) -> list[str]:
        """Names of the models that forecast this desk, sorted."""
        return sorted({model for model, _ in self.forecasts})

    def levels(self, model: str) -> list[float]:
        """Levels at which the model forecasts this desk, ascending."""
        return sorted(level for name, level in self.forecasts if name == model)

    def sample(self, model: str, kind: str, level: float, span: Span) -> Sample:
        """Return the days of the span on which both the P&L of this kind and the model's VaR are known."""
        days, measures = self.forecasts[(model, level)]
        dates, ours, theirs = np.intersect1d(self.dates, days, assume_unique=True, return_indices=True)
        losses = self.losses[kind][ours]
        columns = (*MEASURES[:-1], f"pit_{kind}")
        found = Sample(self.name, model, kind, level, dates, losses, *(measures[m][theirs] for m in columns))
        first, last = self._ends(span)
        return found.on((dates >= first) & (dates <= last) & ~np.isnan(losses) & ~np.isnan(found.var))

    def samples(self, spans: Sequence[Span]) -> Iterator[Sample]:
        """Yield every sample: model, P&L kind, level, span, in this order of nesting."""
        for model in self.models:
            for kind in self.losses:
                for level in self.levels(model):
                    for span in spans:
                        yield self.sample(model, kind, level, span)

    def _ends(self, span: Span) -> tuple[np.datetime64, np.datetime64]:
        if len(self.business) == 0:
            return np.datetime64("9999-12-31"), np.datetime64("0001-01-01")
        first = self.business[0] if span == "all" else self.business[max(len(self.business) - span, 0)]
        return first, self.business[-1]


@dataclass(frozen=True)
class Book:
    """All desks that have forecasts, in order of name, and the cut-off."""

    desks: tuple[Desk, ...]
    as_of: np.datetime64


def read_book(
    pnl: pd.DataFrame, forecasts: pd.DataFrame, *, calendar: Days | None = None, as_of: np.datetime64 | None = None
) -> Book:
    """Align a P&L table and a forecasts table.

    pnl: one row a date x desk, ``date, desk, hypothetical`` and perhaps ``actual``, profit positive. forecasts: ``date,
    desk, model, level, var`` and, where known, ``es, sigma, shape, pit_hypothetical, pit_actual`` (``pit`` stands for
    the first); with a column ``horizon`` only one-day rows are read. calendar: business days; without it each desk's
    own P&L days. as_of: cut-off; without it the last P&L day.
    Raises DataError where a column is missing, of the wrong type, infinite, or a row stands twice.
    """
    pnl, forecasts = _checked_pnl(pnl), _checked_forecasts(forecasts)
    cut = pd.Timestamp(pnl["date"].max() if as_of is None else as_of).to_datetime64().astype("datetime64[D]")
    books = {str(name): rows for name, rows in pnl.groupby("desk", sort=True)}
    desks = [
        _desk(str(name), books.get(str(name), pnl.iloc[:0]), rows, calendar, cut)
        for name, rows in forecasts.groupby("desk", sort=True)
    ]
    return Book(tuple(desks), cut)


def _desk(name: str, pnl: pd.DataFrame, forecasts: pd.DataFrame, calendar: Days | None, cut: np.datetime64) -> Desk:
    pnl = pnl.sort_values("date")
    dates = pnl["date"].to_numpy().astype("datetime64[D]")
    kinds = [k for k in PNL_KINDS if k in pnl and (k == PNL_KINDS[0] or pnl[k].notna().any())]
    losses = {k: -pnl[k].to_numpy(dtype=np.float64) for k in kinds}
    business = np.unique(dates if calendar is None else np.asarray(calendar, dtype="datetime64[D]"))
    table = {}
    for key, rows in forecasts.sort_values("date").groupby(["model", "level"], sort=True):
        model, level = cast(tuple[str, float], key)
        days = rows["date"].to_numpy().astype("datetime64[D]")
        table[(str(model), float(level))] = days, {m: _measure(rows, m) for m in _COLUMNS}
    return Desk(name, dates, losses, business[business <= cut], table)


def _measure(rows: pd.DataFrame, name: str) -> Floats:
    return rows[name].to_numpy(dtype=np.float64) if name in rows else np.full(len(rows), np.nan)


def _checked_pnl(pnl: pd.DataFrame) -> pd.DataFrame:
    _require(pnl, ("date", "desk", "hypothetical"), "P&L table")
    _once(pnl, ["date", "desk"], "P&L table")
    return _numbers(pnl, [k for k in PNL_KINDS if k in pnl], "P&L table")


def _checked_forecasts(forecasts: pd.DataFrame) -> pd.DataFrame:
    _require(forecasts, ("date", "desk", "model", "level", "var"), "forecasts table")
    if "horizon" in forecasts:
        forecasts = forecasts[forecasts["horizon"] == 1]
        if len(forecasts) == 0:
            raise DataError("no one-day forecasts", place="forecasts table, column horizon", rule="horizon 1 is judged",
                            remedy="Hand over forecasts with horizon 1.")  # fmt: skip
    if "pit" in forecasts and "pit_hypothetical" not in forecasts:
        forecasts = forecasts.rename(columns={"pit": "pit_hypothetical"})
    forecasts = _numbers(forecasts, ["level", *(m for m in _COLUMNS if m in forecasts)], "forecasts table")
    wrong = forecasts[~((forecasts["level"] > 0.5) & (forecasts["level"] < 1.0))]
    if len(wrong):
        raise DataError("a level is not between 0.5 and 1", value=wrong["level"].iloc[0],
                        place=f"forecasts table, row {wrong.index[0]}, column level",
                        remedy="A level is a confidence such as 0.99, never 1 or 99.")  # fmt: skip
    _once(forecasts, ["date", "desk", "model", "level"], "forecasts table")
    for column in (c for c in _COLUMNS if c.startswith("pit_") and c in forecasts):
        outside = forecasts[(forecasts[column] < 0.0) | (forecasts[column] > 1.0)]
        if len(outside):
            raise DataError("a PIT is not between 0 and 1", value=outside[column].iloc[0],
                            place=f"forecasts table, row {outside.index[0]}, column {column}",
                            remedy="The PIT is the forecast's probability of a loss of at most this size.")  # fmt: skip
    return forecasts


def _require(table: pd.DataFrame, columns: tuple[str, ...], place: str) -> None:
    if not isinstance(table, pd.DataFrame):
        raise DataError("not a table", value=type(table).__name__, place=place, remedy="Hand over a pandas DataFrame.")
    for column in columns:
        if column not in table:
            raise DataError(
                f"column {column!r} is missing", place=place, remedy=near_miss(column, map(str, table.columns))
            )
    if len(table) == 0:
        raise DataError("the table has no rows", place=place, remedy="Hand over at least one day.")
    if not pd.api.types.is_datetime64_dtype(table["date"]):
        raise DataError("column 'date' does not hold dates without zone", value=str(table["date"].dtype), place=place,
                        rule="datetime64 without zone", remedy="Convert it with pandas.to_datetime.")  # fmt: skip
    for column in ("date", "desk", "model"):
        if column in columns and table[column].isna().any():
            raise DataError(f"column {column!r} has an empty cell", place=place, remedy="Fill it or leave the row out.")


def _once(table: pd.DataFrame, key: list[str], place: str) -> None:
    twice = table[table.duplicated(key)]
    if len(twice):
        value = ", ".join(str(v) for v in twice[key].iloc[0])
        raise DataError(f"the same {' x '.join(key)} stands twice", value=value, place=place, remedy="Keep one row.")


def _numbers(table: pd.DataFrame, columns: list[str], place: str) -> pd.DataFrame:
    for column in columns:
        kinds = pd.api.types
        others = kinds.is_bool_dtype(table[column]) or kinds.is_complex_dtype(table[column])
        if others or not kinds.is_numeric_dtype(table[column]):
            raise DataError(f"column {column!r} does not hold numbers", value=str(table[column].dtype), place=place,
                            remedy="Convert it with pandas.to_numeric.")  # fmt: skip
        endless = table[np.isinf(table[column].to_numpy(dtype=np.float64))]
        if len(endless):
            raise DataError("an infinite value", value=endless[column].iloc[0], remedy="Correct or empty the cell.",
                            place=f"{place}, row {endless.index[0]}, column {column}")  # fmt: skip
    return table


def check_spans(spans: Sequence[Span]) -> tuple[Span, ...]:
    """Return the spans as a tuple; raises StudyError for anything but positive numbers of days and "all", each once."""
    found: list[Span] = []
    for span in listed(spans, "days", '[250, "all"]'):
        if isinstance(span, str) and span != "all":
            raise StudyError("not a span", value=span, rule='a number of business days, or "all"', place="days",
                             remedy='Write for example [250, "all"].')  # fmt: skip
        found.append("all" if isinstance(span, str) else whole(span, "days", least=1))
    once(found, "days")
    return tuple(found)
