"""The verbs on tables, pandas in and out: forecast and judge; and the loop over desks that a run shares with them."""

import os
from collections.abc import Callable, Iterable, Mapping, Sequence
from concurrent.futures import ThreadPoolExecutor
from typing import Any

import numpy as np
import pandas as pd

from backtest.errors import DataError, StudyError
from backtest.forecasting.asked import Asked, ask
from backtest.forecasting.engine import ONE_DAY, SQRT_TIME, DeskHistory, forecast_group, groups, joined
from backtest.forecasting.histories import check_past, desk_histories, reported_scales
from backtest.forecasting.models import Model, resolve_all
from backtest.judging import battery
from backtest.kernels.compiled import is_warm
from backtest.reading.business_days import refuse_short_calendar
from backtest.reading.frames import calendar_days, pnl_table, reported_table, vectors_table
from backtest.records import (
    AGAIN,
    FIT_COLUMNS,
    FOR_THE_BRIDGE,
    FORECAST_COLUMNS,
    PNL_KINDS,
    VECTORS,
    latest_known,
    results_table,
)
from backtest.values import levels_of, whole

Progress = Callable[[str, int, int], None]
"""Called with what is being done, how much of it is done, and of how much."""

DEFAULT_MODELS = ("historical", "filtered-historical", "unconditional-evt", "conditional-evt")


def silent(what: str, done: int, total: int) -> None:
    """Show no progress."""


def forecast(
    pnl: pd.DataFrame | pd.Series,
    models: Sequence[str | Mapping[str, Any]] = DEFAULT_MODELS,
    levels: Sequence[float] = (0.975, 0.99),
    window: int = 1000,
    *,
    recalibrate_days: int = 1,
    learn_from: str = "hypothetical",
    vectors: pd.DataFrame | None = None,
    reported: pd.DataFrame | None = None,
    calendar: Sequence[Any] | np.ndarray | None = None,
    every_start: bool = False,
    horizons: Sequence[int] = (1,),
    bands: str = "delta",
    seed: int = 1,
    paths: int = 10_000,
    bootstraps: int = 199,
    bootstrap_days: int = 20,
    workers: int = 1,
    progress: Progress | None = None,
) -> pd.DataFrame:
    """Forecast one-day VaR and ES of every desk and day by every model, without look-ahead.

    ``pnl``: long table ``date, desk, hypothetical`` (also ``actual``, ``known_on``) or a Series indexed by date, profit
    positive; ``models``: names or mappings with the keys of ``[[forecast.model]]``; ``calendar``: business days, else
    the union of the table's days; ``vectors`` with ``learn_from="vectors"``: ``date, desk, scenario, pnl``, the P&L of
    each target day's positions under the market moves of past days, so that the past is the last ``window`` scenarios
    before it (a desk or day without a vector of that length has no forecast). ``reported``: ``date, desk, level, var``
    of one model of the institution, by target day, for models with the filter "reported": their past is loss / VaR of
    days with a positive VaR, at the lowest level reported throughout, and their forecast a multiple of the VaR of the
    target day (a day without a positive one has no such forecast). ``horizons``: days; beyond one day, VaR
    and ES of the loss of that many days from ``date`` on, simulated on ``paths`` paths, and by the root of time under
    the name "<model> sqrt-time". ``bands``: 95% intervals of one-day VaR and ES from estimation error, by the "delta"
    method, "none", or for the last ``bootstrap_days`` days of each desk by a residual "bootstrap" that refits filter
    and tail ``bootstraps`` times a day. ``seed``: of what is simulated. Returns the forecasts table
    (``records.FORECAST_COLUMNS``); the number of ``workers`` (threads) changes nothing in it. Raises StudyError for
    models, levels or settings that do not exist or do not fit, DataError for a table that cannot be used and where no
    desk reaches the shortest window.
    """
    levels, workers = levels_of(levels), whole(workers, "workers", least=1)
    asked = ask(bands, horizons, seed=seed, paths=paths, bootstraps=bootstraps, bootstrap_days=bootstrap_days)
    resolved = resolve_all(
        models, levels=levels, window=window, recalibrate_days=recalibrate_days, every_start=every_start
    )
    _refuse_no_model(resolved)
    refuse_reserved(resolved)
    table = pnl_table(pnl)
    _check_learn_from(learn_from, table, vectors)
    check_past(resolved, learn_from)
    positions = None if vectors is None else vectors_table(vectors, table["desk"].unique())
    business = calendar_days(table["date"] if calendar is None else calendar)
    refuse_short_calendar(business, table, "calendar")
    scales = reported_scales(resolved, reported_table(reported, table["desk"].unique()), None)
    histories = desk_histories(table, business, business[-1], learn_from, None, positions, scales)
    forecasts, _ = forecast_desks(histories, resolved, levels, workers, progress or silent, asked)
    if forecasts.empty:
        _refuse_short(histories, resolved, learn_from)
    return forecasts


def judge(
    pnl: pd.DataFrame | pd.Series,
    forecasts: pd.DataFrame,
    tests: str | Sequence[str] = "default",
    simulations: int = 9999,
    seed: int = 1,
    *,
    days: Sequence[int | str] = ("all",),
    significance: float = 0.05,
    lagged_hits: int = 1,
) -> pd.DataFrame:
    """Judge forecasts against P&L: one row a desk x model x P&L kind x level x span x test (``results.csv``).

    ``forecasts``: any table with ``date, desk, model, level, var`` and, where known, ``es, sigma, shape,
    pit_hypothetical, pit_actual`` (``pit`` stands for the first); a test that needs what is missing answers "not
    tested: needs ...". ``days``: spans in business days, or "all" days both share. ``lagged_hits``: lags of exceptions
    in the dynamic quantile test.
    """
    table = pnl_table(pnl)
    known = latest_known(table, table["known_on"].max())
    options: dict[str, Any] = {"spans": days, "seed": seed, "lagged_hits": lagged_hits}
    results = battery.judge_table(
        known, forecasts, tests=tests, significance=significance, simulations=simulations, **options
    )
    return results_table(results)


def forecast_desks(
    histories: Sequence[DeskHistory],
    models: Sequence[Model],
    levels: Sequence[float],
    workers: int,
    report: Progress,
    asked: Asked = ONE_DAY,
) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Forecast every desk by every model: one task a desk x filter, in threads; the order of tasks changes nothing."""
    tasks = [(history, group) for history in histories for group in groups(models)]
    if tasks and not is_warm():
        report("compiling the kernels: once per machine, up to a minute", 0, len(tasks))
    parts = each(
        lambda task: forecast_group(task[0], task[1], levels, asked),
        tasks,
        workers,
        report,
        "forecasting desk x filter",
    )
    forecasts = joined([p[0] for p in parts], FORECAST_COLUMNS)
    fits = joined([p[1] for p in parts], FIT_COLUMNS)
    names = [name for model in models for name in (model.name, f"{model.name} {SQRT_TIME}")]
    order = pd.Series({name: i for i, name in enumerate(names)})
    rank = forecasts["model"].map(order)
    forecasts = forecasts.assign(_rank=rank).sort_values(["desk", "_rank", "horizon", "level", "date"], kind="stable")
    return forecasts.drop(columns="_rank").reset_index(drop=True), fits


def each(call: Callable[[Any], Any], tasks: Sequence[Any], workers: int, report: Progress, what: str) -> list[Any]:
    """Return ``call`` of every task, in order, by ``workers`` threads, reporting each as it is done."""
    threads = min(workers, len(tasks))
    if threads <= 1:
        return _collected(map(call, tasks), len(tasks), report, what)
    pool = ThreadPoolExecutor(threads)
    try:
        return _collected(pool.map(call, tasks), len(tasks), report, what)
    finally:  # an error or an interrupt does not wait for what has not begun
        pool.shutdown(cancel_futures=True)


def cores() -> int:
    """Return how many processors this process may use."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


def _collected(parts: Iterable[Any], total: int, report: Progress, what: str) -> list[Any]:
    found = []
    for part in parts:
        found.append(part)
        report(what, len(found), total)
    return found


def _check_learn_from(learn_from: str, pnl: pd.DataFrame, vectors: pd.DataFrame | None) -> None:
    if (learn_from == VECTORS) != (vectors is not None):
        remedy = "Hand over vectors and learn_from='vectors', or neither."
        raise StudyError("learn_from and vectors do not go together", value=learn_from, place="forecast", remedy=remedy)
    if learn_from != VECTORS and (learn_from not in PNL_KINDS or learn_from not in pnl):
        raise StudyError("learn_from names no P&L of the table", value=learn_from, place="forecast")


def _refuse_no_model(models: Sequence[Model]) -> None:
    if not models:
        raise StudyError("no model is asked for", place="models", remedy="Name at least one, such as 'historical'.")


def _refuse_short(histories: Sequence[DeskHistory], models: Sequence[Model], learn_from: str) -> None:
    """Say that no desk has a past as long as the shortest window."""
    shortest = min(model.window for model in models)
    known = {history.desk: int(history.known["loss"].notna().groupby(history.known["date"]).any().sum())
             for history in histories}  # fmt: skip
    longest = max(known, key=lambda desk: known[desk])
    of_vectors = learn_from == VECTORS
    raise DataError(
        f"no {'P&L vector' if of_vectors else 'desk'} reaches the window of {shortest} days: there is no forecast",
        rule="a target day needs a full window of known losses before it",
        value=None if of_vectors else f"at most {known[longest]} days with P&L, desk {longest!r}",
        place="vectors" if of_vectors else "pnl",
        remedy="Shorten the window, or hand over more history.",
    )


def refuse_reserved(models: Sequence[Model], subject: str | None = None) -> None:
    """Refuse a model whose name is kept for what a run makes itself: by root of time, for the bridge, re-performed."""
    for model in models:
        ours = model.name.endswith((f" {SQRT_TIME}", FOR_THE_BRIDGE))
        if ours or (subject is not None and model.name == f"{subject}{AGAIN}"):
            raise StudyError(
                "a model bears a name that is kept for what a run makes itself", value=model.name,
                place="forecast.model", rule=f"kept: '... {SQRT_TIME}', '...{FOR_THE_BRIDGE}', '<subject>{AGAIN}'",
                remedy="Give it another name.",
            )  # fmt: skip
