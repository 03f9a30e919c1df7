"""A record opened for looking things up: rows by desk and model, spans, settings, daily losses beside a forecast."""

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
import pandas as pd

from backtest.records import Record

Row = Mapping[str, Any]


BY_RULE = "by rule"
"""The question of dated rules, whose rows have a span and a P&L kind of their own."""
DEFAULT_DAYS = (250, "all")


@dataclass(frozen=True)
class Span:
    """A span that results are about: its place among those asked for, ISO dates, the largest number of days judged."""

    place: int
    first: str
    last: str
    days: int


def given(value: object) -> float | None:
    """Return a recorded number, or None where there is none."""
    if value is None or isinstance(value, str) or bool(pd.isna(value)):  # type: ignore[call-overload]
        return None
    return float(value)  # type: ignore[arg-type]


def text(value: object) -> str:
    """Return a recorded text, empty where there is none."""
    return value if isinstance(value, str) else ""


@dataclass(frozen=True)
class Book:
    """Lookups over one record; nothing here is computed that the record does not say."""

    record: Record

    def setting(self, path: str, default: Any = None) -> Any:
        """Return a setting of the study by its dotted path, or ``default`` where it is not set."""
        value: Any = self.record.manifest.get("study", {})
        for key in path.split("."):
            value = value.get(key) if isinstance(value, Mapping) else None
        return default if value is None else value

    def mapping(self, key: str) -> Mapping[str, Any]:
        """Return a mapping of the manifest, empty where there is none."""
        value = self.record.manifest.get(key)
        return value if isinstance(value, Mapping) else {}

    @property
    def subject(self) -> str | None:
        """The reported model under review."""
        return text(self.setting("review.subject")) or None

    @property
    def currency(self) -> str:
        """The unit of every amount."""
        return text(self.setting("data.currency")) or "units"

    @property
    def significance(self) -> float:
        """The level below which a p-value rejects."""
        return float(self.setting("judge.significance", 0.05))

    @property
    def spans_asked(self) -> list[int | str]:
        """The spans that the study asks for, in its order: business days or "all"."""
        return [d if d == "all" else int(d) for d in self.setting("review.days", DEFAULT_DAYS)]

    @property
    def wanted_days(self) -> int | None:
        """The shortest span asked for in business days; None where only all days are judged."""
        return min((d for d in self.spans_asked if isinstance(d, int)), default=None)

    @cached_property
    def models(self) -> list[str]:
        """The challengers, in the order of the study; steps made for the bridge alone are none."""
        listed = self.record.manifest.get("models")
        return [str(m["name"]) for m in listed if m["name"] != self.subject] if isinstance(listed, list) else []

    @property
    def main_model(self) -> str:
        """The model the first page is about: the subject, else historical simulation, else the first challenger."""
        if self.subject:
            return self.subject
        return "historical" if "historical" in self.models else next(iter(self.models), "")

    @cached_property
    def desks(self) -> list[str]:
        """All desks, the firm first."""
        names = {str(d) for table in (self.record.pnl, self.record.forecasts) for d in table["desk"].unique()}
        firm = self.setting("review.firm")
        return sorted(names, key=lambda d: (d != firm, d))

    @cached_property
    def _results(self) -> dict[tuple[str, ...], list[Row]]:
        """Rows by desk and model, each with its ``place``: a test answers the spans asked for in their order."""
        keys = ["desk", "model", "pnl_kind", "level", "test"]
        table = self.record.results
        return _grouped(
            table.assign(place=table.groupby(keys, dropna=False, observed=True).cumcount()), ("desk", "model")
        )

    @cached_property
    def _bridge(self) -> dict[tuple[str, ...], list[Row]]:
        return _grouped(self.record.bridge, ("desk",))

    def results(self, desk: str, model: str, **wanted: object) -> list[Row]:
        """Return result rows of a desk and model, in recorded order, whose columns hold the wanted values."""
        rows = self._results.get((desk, model), [])
        return [r for r in rows if all(r[k] == v for k, v in wanted.items())]

    def result(self, test: str, desk: str, model: str, span: Span, kind: str, level: float) -> Row | None:
        """Return the one result of a test, or None."""
        rows = self.results(desk, model, test=test, pnl_kind=kind, level=level, place=span.place)
        return next(iter(rows), None)

    def bridge(self, desk: str) -> list[Row]:
        """Return the bridge of a desk, in recorded order."""
        return self._bridge.get((desk,), [])

    def rows(self, table: str, desk: str) -> list[Row]:
        """Return the rows of a desk in one of the record's other tables, in recorded order."""
        kept = getattr(self.record, table)
        return [{str(k): v for k, v in row.items()} for row in kept[kept["desk"] == desk].to_dict("records")]

    def _judged(self, desk: str, model: str) -> list[Row]:
        return [r for r in self.results(desk, model) if r["question"] != BY_RULE and r["days"] > 0]

    def spans(self, desk: str, model: str) -> list[Span]:
        """Return the spans a desk's model was judged on, in the order asked for."""
        widest: dict[int, Row] = {}
        for row in self._judged(desk, model):
            kept = widest.get(row["place"])
            if kept is None or row["days"] > kept["days"]:
                widest[row["place"]] = row
        return [Span(place, str(r["from"]), str(r["to"]), int(r["days"])) for place, r in sorted(widest.items())]

    def main_span(self, desk: str, model: str) -> Span | None:
        """Return the span the first page is about: the shortest number of days asked for, else the first span."""
        spans = self.spans(desk, model)
        place = self.spans_asked.index(self.wanted_days) if self.wanted_days is not None else 0
        return next((s for s in spans if s.place == place), next(iter(spans), None))

    def longest_span(self, desk: str, model: str) -> Span | None:
        """Return the longest span a desk's model was judged on."""
        return max(self.spans(desk, model), key=lambda s: s.days, default=None)

    def levels(self, desk: str, model: str) -> list[float]:
        """Return the levels a desk's model was judged at, the lowest first."""
        return sorted({float(r["level"]) for r in self._judged(desk, model)})

    def kinds(self, desk: str, model: str) -> list[str]:
        """Return the P&L kinds a desk's model was judged against, hypothetical first."""
        return sorted({str(r["pnl_kind"]) for r in self._judged(desk, model)}, key=lambda k: (k != "hypothetical", k))

    def daily(self, desk: str, model: str, level: float, kind: str) -> pd.DataFrame:
        """Return ``date, loss, var, es`` of a desk's model, one row a day with a forecast; loss NaN without P&L."""
        table = self.forecasts(desk)
        chosen = (table["model"] == model) & (table["level"] == level)
        days = table.loc[chosen, ["date", "var", "es"]].sort_values("date")
        pnl = self.pnl(desk)
        own = pnl[["date"]].assign(loss=-pnl[kind] if kind in pnl else np.nan)
        return days.merge(own, on="date", how="left")[["date", "loss", "var", "es"]]

    def forecasts(self, desk: str) -> pd.DataFrame:
        """Return the one-day forecasts of a desk."""
        return self._forecasts.get(desk, self.record.forecasts.iloc[:0])

    @cached_property
    def one_day(self) -> pd.DataFrame:
        """The forecasts of one day's loss; those over several days are recorded, not judged."""
        return self.record.forecasts[self.record.forecasts["horizon"] == 1]

    def pnl(self, desk: str) -> pd.DataFrame:
        """Return the P&L of a desk."""
        return self._pnl.get(desk, self.record.pnl.iloc[:0])

    @cached_property
    def _forecasts(self) -> dict[str, pd.DataFrame]:
        return {str(desk): rows for desk, rows in self.one_day.groupby("desk", observed=True)}

    @cached_property
    def _pnl(self) -> dict[str, pd.DataFrame]:
        return {str(desk): rows for desk, rows in self.record.pnl.groupby("desk", observed=True)}

    @cached_property
    def business_days(self) -> np.ndarray:
        """The days on which any desk has a P&L row or a forecast, datetime64[D], ascending."""
        both = pd.concat([self.record.pnl["date"], self.record.forecasts["date"]])
        return np.unique(both.to_numpy().astype("datetime64[D]"))


def _grouped(table: pd.DataFrame, keys: tuple[str, ...]) -> dict[Any, list[Row]]:
    groups: dict[tuple[str, ...], list[Row]] = {}
    for row in table.to_dict("records"):
        groups.setdefault(tuple(str(row[k]) for k in keys), []).append({str(k): v for k, v in row.items()})
    return groups
