"""Remark on a likely one-day shift between reported VaR and P&L.

The statistic: Spearman's rank correlation between the relative change of VaR into day t, VaR_t / VaR_(t-1) - 1, and
the size of the P&L k days before in units of the VaR beside it, |P&L_(t-k)| / VaR_(t-k), for k = 0, 1, 2. A VaR that
learns from P&L and stands on its target day reacts to the day before: the peak is at k = 1. A peak at k = 0 says that
the VaR stands on the day it was computed; a peak at k = 2 that it stands a day late. P&L is divided by the VaR of its
own day so that positions, which move VaR and P&L of the same day together, do not look like a shift.

It cannot see: a VaR that does not react to P&L (constant, driven by positions, long equally weighted windows), shifts
of more than one day, shifts over a small part of the history. Thresholds are ours, not from a source.
"""

import numpy as np
import pandas as pd

from backtest.reading.remarks import desk_remark
from backtest.records import PNL_KINDS, Remark

LEAST_DAYS = 100
LEAST_CORRELATION = 0.1
MARGIN = 4.0
"""Standard errors by which the peak must stand above the correlation at k = 1 (two correlations: sqrt(2/n) each)."""


def lag_correlations(pnl: np.ndarray, var: np.ndarray) -> tuple[list[float], int]:
    """Return the rank correlations at k = 0, 1, 2 and the number of days they share.

    ``pnl`` and ``var`` stand beside each other by business day; NaN where absent. Days with VaR <= 0 are not used.
    Correlations are NaN where a side does not vary or no days are shared.
    """
    usable = np.where(var > 0, var, np.nan)
    with np.errstate(over="ignore"):  # a VaR next to zero gives infinite ratios, which rank as the largest
        change = usable[1:] / usable[:-1] - 1
        size = np.abs(pnl) / usable
    rows = pd.DataFrame({"change": change[1:], **{str(k): size[2 - k : len(size) - k] for k in range(3)}}).dropna()
    ranks = rows.rank().to_numpy()
    return [_correlation(ranks[:, 0], ranks[:, 1 + k]) for k in range(3)], len(rows)


def _correlation(a: np.ndarray, b: np.ndarray) -> float:
    if len(a) < 2 or np.ptp(a) == 0 or np.ptp(b) == 0:
        return float("nan")
    return float(np.corrcoef(a, b)[0, 1])


def likely_shift(correlations: list[float], days: int) -> int | None:
    """Return the k at which the peak stands (0 or 2), or None where no shift is likely or nothing can be seen."""
    if days < LEAST_DAYS or np.isnan(correlations).any():
        return None
    k = max((0, 2), key=lambda lag: correlations[lag])
    above = correlations[k] - correlations[1] > MARGIN * np.sqrt(2 / days)
    return k if above and correlations[k] >= LEAST_CORRELATION else None


def shifted(latest: pd.DataFrame, reported: pd.DataFrame, calendar: np.ndarray, source: str) -> list[Remark]:
    """Remark on every desk x model whose VaR and P&L line up a day apart; one level (the most days) stands for all."""
    remarks = []
    values = {str(desk): rows for desk, rows in latest.groupby("desk", sort=True)}
    kind = next(kind for kind in PNL_KINDS if kind in latest)
    for (desk, model), rows in reported.groupby(["desk", "model"], sort=True):
        if desk not in values:
            continue
        sizes = rows.groupby("level")["date"].size()
        chosen = rows[rows["level"] == sizes[sizes == sizes.max()].index.max()]
        found, days = lag_correlations(
            on_calendar(values[str(desk)], kind, calendar), on_calendar(chosen, "var", calendar)
        )
        k = likely_shift(found, days)
        if k is not None:
            text = _text(str(model), k, found, days)
            first, last = chosen["date"].min(), chosen["date"].max()
            remarks.append(desk_remark("likely-shift", source, str(desk), first, last, days, text))
    return remarks


def on_calendar(rows: pd.DataFrame, value: str, calendar: np.ndarray) -> np.ndarray:
    """Return the values of one series (one row a date) laid out by business day; NaN where there is none."""
    days = rows["date"].to_numpy().astype("datetime64[D]")
    at = np.minimum(np.searchsorted(calendar, days), len(calendar) - 1)
    on = calendar[at] == days
    laid_out = np.full(len(calendar), np.nan)
    laid_out[at[on]] = rows[value].to_numpy(dtype=np.float64)[on]
    return laid_out


def _text(model: str, k: int, found: list[float], days: int) -> str:
    meaning = (
        "as if it stood on the day it was computed (then set data.var_date)" if k == 0 else "as if it stood a day late"
    )
    shown = ", ".join(f"{value:.2f} at {lag}" for lag, value in enumerate(found))
    return (
        f"the VaR of {model!r} moves with the P&L of {k} days before rather than 1, {meaning}: rank correlations of "
        f"VaR change and |P&L|/VaR by days before: {shown}; {days} days"
    )
