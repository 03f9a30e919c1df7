"""Remarks on values that stand still: long unchanged or zero stretches of P&L and of VaR."""

import numpy as np
import pandas as pd

from backtest.reading.remarks import desk_remark
from backtest.records import DATE_DTYPE, PNL_KINDS, Remark

LONG = 20
"""Consecutive business days without change (EU 2024/1085 Art. 35)."""
SHORT = 5
"""Equal values in a row worth a look; common practice, no source."""


def unchanged_runs(frame: pd.DataFrame, keys: list[str], value: str, calendar: np.ndarray) -> pd.DataFrame:
    """Return runs of SHORT or more equal values on consecutive business days.

    ``frame`` has ``keys`` (with desk), ``date`` and ``value``, sorted by keys and date. Returns one row a run: the
    keys, ``value, first, last, days``. A day without a value ends a run.
    """
    place = np.searchsorted(calendar.astype(DATE_DTYPE), frame["date"].to_numpy())
    values = frame[value].to_numpy()
    series = frame.groupby(keys, sort=False).ngroup().to_numpy()
    goes_on = (values[1:] == values[:-1]) & (series[1:] == series[:-1]) & (np.diff(place) == 1)
    run = np.concatenate([[0], np.cumsum(~goes_on)])
    length = np.bincount(run)
    starts = np.concatenate([[0], np.cumsum(length)[:-1]])
    kept = length >= SHORT
    runs = frame.iloc[starts[kept]][[*keys, "date", value]].rename(columns={"date": "first", value: "value"})
    last = frame["date"].to_numpy()[(starts + length - 1)[kept]]
    return runs.assign(last=last, days=length[kept]).reset_index(drop=True)


def stale_pnl(latest: pd.DataFrame, calendar: np.ndarray, source: str) -> list[Remark]:
    """Remark on stretches of equal P&L per desk and kind; ``latest`` has one row a date x desk."""
    remarks = []
    for kind in PNL_KINDS:
        if kind in latest and len(latest):
            runs = unchanged_runs(latest, ["desk"], kind, calendar)
            remarks += _remarks(runs, "pnl", f"{kind} P&L", source)
    return remarks


def stale_var(reported: pd.DataFrame, calendar: np.ndarray, source: str) -> list[Remark]:
    """Remark on stretches of equal reported VaR per desk, over its models and levels."""
    if reported.empty:
        return []
    runs = unchanged_runs(reported, ["desk", "model", "level"], "var", calendar)
    return _remarks(runs, "var", "reported VaR", source)


def _remarks(runs: pd.DataFrame, suffix: str, what: str, source: str) -> list[Remark]:
    remarks = []
    for desk, all_runs in runs.groupby("desk", sort=True):
        long, short = all_runs[all_runs["days"] >= LONG], all_runs[all_runs["days"] < LONG]
        for rule, found, origin in (
            ("unchanged-long", long, f"{LONG} or more in a row: EU 2024/1085 Art. 35"),
            ("unchanged-short", short, f"{SHORT} to {LONG - 1} in a row: common practice, no source"),
        ):
            if len(found):
                text = _text(found, what, origin)
                days = int(found["days"].sum())
                first, last = found["first"].min(), found["last"].max()
                remarks.append(desk_remark(f"{rule}-{suffix}", source, str(desk), first, last, days, text))
    return remarks


def _text(runs: pd.DataFrame, what: str, origin: str) -> str:
    longest = runs.sort_values(["days", "first"], ascending=[False, True], kind="stable").iloc[0]
    zeros = runs.loc[runs["value"] == 0, "days"].sum()
    series = f", model {longest['model']!r} at {longest['level']:g}" if "model" in runs else ""
    return (
        f"unchanged {what}: stretches {len(runs)}, days {runs['days'].sum()}, of these at zero {zeros}; the "
        f"longest is {longest['days']} days from {longest['first']:%Y-%m-%d} to {longest['last']:%Y-%m-%d} at "
        f"{longest['value']:,.6g}{series} ({origin})"
    )
