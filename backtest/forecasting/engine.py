"""Filter meets tail: forecasts of one desk by many models, block by block, each filter rolled once for its tails."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import pandas as pd

from backtest.forecasting.filters import Filtered, apply_filter
from backtest.forecasting.models import ESTIMATED, FilterSpec, Model
from backtest.forecasting.tail_laws import standardise
from backtest.forecasting.tails import apply_tail
from backtest.forecasting.windows import Plan, plan, plan_vectors
from backtest.records import DATE_DTYPE, FIT_COLUMNS, FORECAST_COLUMNS, PNL_KINDS, DeskVectors


@dataclass(frozen=True)
class DeskHistory:
    """What one desk hands to the engine.

    known: ``date, known_on, loss``, see ``windows.plan``; calendar: its business days, datetime64[D]; realised: loss
    by P&L kind indexed by day (datetime64[D]), as known at the cut-off, for the PIT; vectors: what models learn from
    instead of ``known``, None where they learn from it.
    """

    desk: str
    known: pd.DataFrame
    calendar: np.ndarray
    realised: dict[str, pd.Series]
    vectors: DeskVectors | None = None

    def plan(self, window: int) -> Plan:
        """Return the target days and the past of each, of ``window`` losses."""
        if self.vectors is not None:
            return plan_vectors(self.vectors, self.calendar, window)
        return plan(self.known, self.calendar, window)


def groups(models: Sequence[Model]) -> list[list[Model]]:
    """Group models that share a filter, a window and a recalibration: the filter is rolled once for each group."""
    grouped: dict[tuple[FilterSpec, int, int], list[Model]] = {}
    for model in models:
        every = model.recalibrate_days if model.filter.kind in ESTIMATED else 1
        grouped.setdefault((model.filter, model.window, every), []).append(model)
    return list(grouped.values())


def forecast_group(
    history: DeskHistory, models: Sequence[Model], levels: Sequence[float]
) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Forecast one desk by models that share a filter; return forecasts and fits (columns of records).

    A desk shorter than the window has no target days and gives empty tables.
    """
    days = history.plan(models[0].window)
    q = np.array(levels, dtype=np.float64)
    tables, fits = [], []
    for rows in days.blocks():
        refit = days.refits(rows, models[0].recalibrate_days)
        filtered = apply_filter(days.pasts(rows), models[0].filter, days.places[rows], refit)
        realised = _realised(history, days.targets[rows])
        for model in models:
            tables.append(_model_block(history.desk, model, days, rows, filtered, q, realised))
        if filtered.fits:
            fits.append(_fits_block(history.desk, models[0], days, rows, filtered, refit))
    return joined(tables, FORECAST_COLUMNS), joined(fits, FIT_COLUMNS)


def joined(parts: Sequence[pd.DataFrame], columns: tuple[str, ...]) -> pd.DataFrame:
    """Return tables one below the other with the columns named; an empty table of these columns where there is none."""
    full = [part for part in parts if len(part)]
    if not full:
        return pd.DataFrame({c: pd.Series(dtype=np.float64) for c in columns})
    return pd.concat(full, ignore_index=True)[list(columns)]


def _realised(history: DeskHistory, targets: np.ndarray) -> dict[str, np.ndarray]:
    out = {}
    for kind in PNL_KINDS:
        series = history.realised.get(kind)
        missing = np.full(len(targets), np.nan)
        out[kind] = missing if series is None else series.reindex(targets).to_numpy(dtype=np.float64)
    return out


def _model_block(
    desk: str, model: Model, days: Plan, rows: slice, filtered: Filtered, q: np.ndarray, realised: dict[str, np.ndarray]
) -> pd.DataFrame:
    standard = model.filter.kind != "none"
    tailed = apply_tail(filtered, model.tail, q, days.places[rows])
    mean = filtered.mean if standard else np.zeros(len(filtered.mean))
    sigma = filtered.sigma if standard else np.ones(len(filtered.mean))
    n, L = tailed.quantile.shape
    columns: dict[str, object] = {
        "date": np.repeat(days.targets[rows].astype(DATE_DTYPE), L),
        "origin": np.repeat(days.origins[rows].astype(DATE_DTYPE), L),
        "desk": desk,
        "model": model.name,
        "level": np.tile(q, n),
        "horizon": 1,
        "var": (mean[:, None] + sigma[:, None] * tailed.quantile).ravel(),
        "es": (mean[:, None] + sigma[:, None] * tailed.shortfall).ravel(),
        "mean": np.repeat(filtered.mean, L),
        "sigma": np.repeat(filtered.sigma, L),
    }
    columns |= {name: np.repeat(tailed.tail[:, i], L) for i, name in enumerate(("shape", "scale", "threshold"))}
    for kind in PNL_KINDS:
        columns[f"pit_{kind}"] = np.repeat(tailed.pit(standardise(realised[kind], mean, sigma)), L)
    columns["status"] = np.repeat(_join(filtered.status, tailed.status), L)
    return pd.DataFrame(columns)


def _join(first: np.ndarray, second: np.ndarray) -> np.ndarray:
    return np.array(
        ["; ".join(part for part in pair if part) or "ok" for pair in zip(first, second, strict=True)], dtype=object
    )


def _fits_block(
    desk: str, model: Model, days: Plan, rows: slice, filtered: Filtered, refit: np.ndarray
) -> pd.DataFrame:
    targets = days.targets[rows].astype(DATE_DTYPE)
    last = np.maximum.accumulate(np.where(refit, np.arange(len(refit)), 0))
    columns: dict[str, object] = {
        "date": targets,
        "desk": desk,
        "filter": model.filter.label,
        "window": model.window,
        "recalibrated_on": targets[last],
        **filtered.fits,
        "status": np.where(filtered.status == "", "ok", filtered.status),
    }
    return pd.DataFrame(columns)
