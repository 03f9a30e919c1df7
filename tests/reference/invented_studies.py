"""Invented studies written to a folder: P&L with one restated value, a bank's historical simulation, a short desk."""

import contextlib
import io
import sys
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from backtest.cli import main
from tests.reference.datasets import garch_t

DAYS, WINDOW, SHORT_DAYS = 800, 250, 120
LEVELS = (0.975, 0.99)
DESKS = ("House", "Lumber", "Wool")
"""The firm, a desk of full length, and a desk of SHORT_DAYS days; the firm is the sum of the two."""
MODELS = ("historical", "ewma-normal", "filtered-historical", "conditional-evt")
RESTATED, KNOWN = 700, 705
"""Places of the restated day and of the day on which its final value became known."""

STUDY = """
title = "Invented review"
seed = 11
[review]
{review}
days = [250, "all"]
[data]
pnl = "pnl.csv"
{data}
[forecast]
window = 250
models = ["historical", "ewma-normal", "filtered-historical", "conditional-evt"]
{forecast}
[judge]
simulations = 199
{judge}
"""
REVIEWED = {
    "review": 'subject = "HS-250"\nfirm = "House"\nrules = "basel-mar32"',
    "data": 'reported = "reported.csv"',
    "forecast": "fallback_share = 0.05",
}
"""A window of 250 leaves a generalized Pareto tail 25 excesses: more than the usual 1% fall back on another fit."""


@dataclass(frozen=True)
class Said:
    """What a command printed, and its exit code."""

    code: int
    out: str
    err: str


def tailmark(*arguments: object) -> Said:
    """Run the command line in this process, by its entry point."""
    out, err = io.StringIO(), io.StringIO()
    with pytest.MonkeyPatch.context() as patch, contextlib.redirect_stdout(out), contextlib.redirect_stderr(err):
        patch.setattr(sys, "argv", ["tailmark", *map(str, arguments)])
        try:
            main()
            code: object = 0
        except SystemExit as left:
            code = left.code
    return Said(int(str(code or 0)), out.getvalue(), err.getvalue())


def study_text(**parts: str) -> str:
    """Return the text of a study; parts: review, data, forecast, judge."""
    return STUDY.format_map(dict.fromkeys(("review", "data", "forecast", "judge"), "") | parts)


def write_study(folder: Path, files: Mapping[str, pd.DataFrame], text: str) -> Path:
    """Write the tables as CSV and the study beside them; return the study's path."""
    folder.mkdir(parents=True, exist_ok=True)
    for name, table in files.items():
        table.to_csv(folder / name, index=False)
    (folder / "study.toml").write_text(text, encoding="utf-8")
    return folder / "study.toml"


def losses() -> dict[str, np.ndarray]:
    """Return each desk's losses, float64[DAYS + WINDOW]: the first WINDOW days are known to the bank alone."""
    lumber, wool = (np.round(1e4 * scale * garch_t(DAYS + WINDOW, seed)[0], 2) for scale, seed in ((1, 31), (0.5, 32)))
    return {"House": np.round(lumber + wool, 2), "Lumber": lumber, "Wool": wool}


def calendar() -> pd.DatetimeIndex:
    """Return the business days of the P&L."""
    return pd.bdate_range("2021-01-04", periods=DAYS)


def first_day(desk: str) -> int:
    """Return the place of a desk's first published day."""
    return DAYS - SHORT_DAYS if desk == "Wool" else 0


def pnl_table() -> pd.DataFrame:
    """Return date, desk, hypothetical, actual, known_on; one value of the firm and of Lumber restated."""
    days, parts = calendar(), []
    for i, (desk, loss) in enumerate(losses().items()):
        noise = np.round(50 * np.random.default_rng(i).standard_normal(DAYS), 2)
        mine = pd.DataFrame({"date": days, "desk": desk, "hypothetical": -loss[WINDOW:], "known_on": days})
        mine["actual"] = (mine["hypothetical"] + noise).round(2)
        parts.append(mine.iloc[first_day(desk) :])
    table = pd.concat(parts, ignore_index=True)
    late = (table["date"] == days[RESTATED]) & table["desk"].isin(["House", "Lumber"])
    first = table[late].assign(hypothetical=lambda t: t["hypothetical"] - 60_000, actual=lambda t: t["actual"] - 60_000)
    table.loc[late, "known_on"] = days[KNOWN]
    return pd.concat([table, first], ignore_index=True)


def historical(past: np.ndarray, level: float) -> tuple[float, float]:
    """Return VaR, the ceil(n level)-th smallest loss, and ES, the mean of the worst share 1 - level of the losses."""
    ordered, n = np.sort(past), len(past)
    place = int(np.ceil(np.round(n * level, 9)))
    beyond = ordered[place:].sum() / n + (place / n - level) * ordered[place - 1]
    return float(ordered[place - 1]), float(beyond / (1 - level))


def reported_table() -> pd.DataFrame:
    """Return the bank's historical simulation over WINDOW days: VaR at both levels, ES at 97.5% alone."""
    rows = []
    for desk, loss in losses().items():
        for t in range(first_day(desk), DAYS):
            for level in LEVELS:
                var, es = historical(loss[t : t + WINDOW], level)
                rows.append((calendar()[t], desk, "HS-250", level, var, es if level == 0.975 else None))
    return pd.DataFrame(rows, columns=["date", "desk", "model", "level", "var", "es"])
