"""Filter meets tail: forecasts of one desk by many models, block by block, each filter rolled once for its tails."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
import pandas as pd

from backtest.forecasting.asked import Asked
from backtest.forecasting.bootstrap import bands
from backtest.forecasting.filters import Filtered, apply_filter
from backtest.forecasting.horizons import SIMULATED, look_ahead
from backtest.forecasting.models import ESTIMATED, REPORTED, FilterSpec, Model
from backtest.forecasting.tail_laws import standardise
from backtest.forecasting.tails import apply_tail
from backtest.forecasting.windows import NO_REPORT, Plan, ReportedVar, Scaling, plan, plan_scaled, plan_vectors
from backtest.records import DATE_DTYPE, FIT_COLUMNS, FORECAST_COLUMNS, PNL_KINDS, DeskVectors

ONE_DAY = Asked()
"""The usual: one-day forecasts with intervals by the delta method."""
SQRT_TIME = "sqrt-time"
"""What the name of a model is followed by where its one-day VaR and ES are multiplied by the root of the days."""
INCOMPLETE = "days without this level left out"
"""Status where no level of the reported VaR was reported for every day of the past."""
_OF_ONE_DAY = ("shape", "scale", "threshold", "pit_hypothetical", "pit_actual")


@dataclass(frozen=True)
class DeskHistory:
    """What one desk hands to the engine.

    known: ``date, known_on, loss``, see ``windows.plan``; calendar: its business days, datetime64[D]; realised: loss
    by P&L kind indexed by day (datetime64[D]), as known at the cut-off, for the PIT; vectors: what models learn from
    instead of ``known``, None where they learn from it; reported: the VaR that filter ``reported`` takes as the scale
    of ``known``, whatever the other filters learn from.
    """

    desk: str
    known: pd.DataFrame
    calendar: np.ndarray
    realised: dict[str, pd.Series]
    vectors: DeskVectors | None = None
    reported: ReportedVar = NO_REPORT

    def plan(self, window: int, kind: str = "") -> Plan:
        """Return the target days and the past of each, of ``window`` losses, or ratios for a filter of that kind."""
        if kind == REPORTED:
            return plan_scaled(self.known, self.calendar, self.reported, window)
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
    history: DeskHistory, models: Sequence[Model], levels: Sequence[float], asked: Asked = ONE_DAY
) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Forecast one desk by models that share a filter; return forecasts and fits (columns of records).

    ``asked``: which intervals and further horizons. A desk shorter than the window has no target days and gives empty
    tables.
    """
    days = history.plan(models[0].window, models[0].filter.kind)
    q = np.array(levels, dtype=np.float64)
    tables, fits = [], []
    for rows in days.batches():
        refit = days.refits(rows, models[0].recalibrate_days)
        pasts = days.pasts(rows)
        filtered = _in_money(apply_filter(pasts, models[0].filter, days.places[rows], refit), days.scaling, rows)
        realised = _realised(history, days.targets[rows])
        for model in models:
            one_day = _model_block(history.desk, model, days, rows, filtered, q, realised, pasts, asked)
            tables += [one_day, *_further(one_day, model, filtered, q, days.targets[rows], asked)]
        if filtered.fits:
            fits.append(_fits_block(history.desk, models[0], days, rows, filtered, refit))
    return joined(tables, FORECAST_COLUMNS), joined(fits, FIT_COLUMNS)


def _in_money(filtered: Filtered, scaling: Scaling | None, rows: slice) -> Filtered:
    """Give ratios to the reported VaR their money back: mean 0, sigma the VaR reported for the target day."""
    if scaling is None:
        return filtered
    labels = np.array([f"{REPORTED} at {level:g}" for level in scaling.level[rows]], dtype=object)
    status = np.where(scaling.complete[rows], "", INCOMPLETE).astype(object)
    return replace(filtered, sigma=scaling.var[rows], status=status, fits={"filter": labels})


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
    desk: str,
    model: Model,
    days: Plan,
    rows: slice,
    filtered: Filtered,
    q: np.ndarray,
    realised: dict[str, np.ndarray],
    pasts: np.ndarray,
    asked: Asked,
) -> pd.DataFrame:
    standard = model.filter.kind != "none"
    tailed = apply_tail(filtered, model.tail, q, days.places[rows])
    mean = filtered.mean if standard else np.zeros(len(filtered.mean))
    sigma = filtered.sigma if standard else np.ones(len(filtered.mean))
    resampled = np.arange(len(days.targets))[rows] >= len(days.targets) - asked.bootstrap_days
    limits = bands(asked, model, filtered, tailed, q, pasts, days.targets[rows], resampled)
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
        **{name: getattr(limits, name).ravel() for name in ("var_low", "var_high", "es_low", "es_high")},
        "mean": np.repeat(filtered.mean, L),
        "sigma": np.repeat(filtered.sigma, L),
    }
    columns |= {name: np.repeat(tailed.tail[:, i], L) for i, name in enumerate(("shape", "scale", "threshold"))}
    for kind in PNL_KINDS:
        columns[f"pit_{kind}"] = np.repeat(tailed.pit(standardise(realised[kind], mean, sigma)), L)
    columns["status"] = np.repeat(_join(filtered.status, tailed.status), L)
    return pd.DataFrame(columns)


def _further(
    one_day: pd.DataFrame, model: Model, filtered: Filtered, q: np.ndarray, targets: np.ndarray, asked: Asked
) -> list[pd.DataFrame]:
    """Return the rows of every horizon beyond a day: simulated under the model's name, and by the root of time.

    The loss is that of ``date`` and the h - 1 business days after it. A filter whose recursion cannot be run on has
    the second kind alone.
    """
    longer = [h for h in asked.horizons if h > 1]
    blank = one_day.assign(**dict.fromkeys(_OF_ONE_DAY, np.nan))
    money = ["var", "es", "var_low", "var_high", "es_low", "es_high"]
    out = []
    for h in longer:
        root = blank.assign(model=f"{model.name} {SQRT_TIME}", horizon=h, mean=np.nan, sigma=np.nan)
        root[money] *= np.sqrt(h)
        out.append(root)
    if longer and model.filter.kind in SIMULATED:
        ahead = look_ahead(filtered, model.filter, model.tail, q, longer, targets, asked.seed, asked.paths)
        nothing = dict.fromkeys(money[2:], np.nan)
        for i, h in enumerate(longer):
            of_sum = {"mean": np.repeat(ahead.mean[:, i], len(q)), "sigma": np.repeat(ahead.sigma[:, i], len(q))}
            sums = {"var": ahead.quantile[:, i].ravel(), "es": ahead.shortfall[:, i].ravel()}
            out.append(blank.assign(horizon=h, **sums, **of_sum, **nothing))
    return out


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
        **dict.fromkeys(FIT_COLUMNS, np.nan),
        "other_parameters": "",
        "date": targets,
        "desk": desk,
        "filter": model.filter.label,
        "window": model.window,
        "recalibrated_on": targets[last],
        **filtered.fits,
        "status": np.where(filtered.status == "", "ok", filtered.status),
    }
    return pd.DataFrame(columns)
