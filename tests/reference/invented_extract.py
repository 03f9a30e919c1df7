"""Invented extracts for tests of reading: two desks and a firm, written in any declared format."""

import datetime as dt
from collections.abc import Mapping
from pathlib import Path

import numpy as np
import pandas as pd

from backtest.study import read_study
from backtest.study_form import Study


def business_days(n: int, first: str = "2022-01-03") -> list[dt.date]:
    """Return n Mondays to Fridays from a date on."""
    return [day.date() for day in pd.bdate_range(first, periods=n)]


def reactive_series(n: int, seed: int) -> tuple[np.ndarray, np.ndarray]:
    """Return P&L and a VaR that learns from it the evening before (exponential weights), each float64[n]."""
    rng = np.random.default_rng(seed)
    pnl, var, variance = np.empty(n), np.empty(n), 1.0
    for t in range(n):
        var[t] = 2.33 * np.sqrt(variance)
        pnl[t] = np.sqrt(variance) * rng.standard_t(5) * np.sqrt(3 / 5)
        variance = 0.94 * variance + 0.06 * pnl[t] ** 2 + 0.001
    return pnl, var


def invented(n: int = 60, desks: tuple[str, ...] = ("Lumber", "Wool"), seed: int = 7) -> pd.DataFrame:
    """Return a wide table: date, desk, hpl, var_99, es_975, var_975 rounded to cents; no row is odd."""
    parts = []
    for i, desk in enumerate(desks):
        pnl, var = reactive_series(n, seed + i)
        columns = {"hpl": 1000 * pnl, "var_99": 1000 * var, "var_975": 842 * var, "es_975": 1004 * var}
        parts.append(pd.DataFrame({"date": business_days(n), "desk": desk, **columns}).round(2))
    return pd.concat(parts, ignore_index=True)


def pnl_text(table: pd.DataFrame) -> str:
    """Return the P&L of an invented table as CSV in our own names."""
    return table[["date", "desk", "hpl"]].rename(columns={"hpl": "hypothetical"}).to_csv(index=False)


def reported_text(table: pd.DataFrame, model: str = "House HS") -> str:
    """Return the forecasts of an invented table as long CSV in our own names."""
    at_99 = table[["date", "desk"]].assign(model=model, level=0.99, var=table["var_99"], es="")
    at_975 = table[["date", "desk"]].assign(model=model, level=0.975, var=table["var_975"], es=table["es_975"])
    return pd.concat([at_99, at_975]).to_csv(index=False)


def written_study(folder: Path, study: str, files: Mapping[str, str | bytes]) -> Study:
    """Write a study and its files, and read the study."""
    for name, content in files.items():
        (folder / name).write_bytes(content if isinstance(content, bytes) else content.encode())
    (folder / "study.toml").write_text(study, encoding="utf-8")
    return read_study(folder / "study.toml")
