"""The demo's files as plain tables: read with pandas alone, so that these tests do not lean on the package."""

import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

FOLDER = Path(__file__).parents[2] / "data_demo"


class Tables:
    """The files, and the views of them that several tests need. Money in EUR; losses positive."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        self.rows = pd.read_csv(folder / "pnl.csv", parse_dates=["date", "known_on"])
        self.reported = pd.read_csv(folder / "reported.csv", parse_dates=["date"])
        self.desks = pd.read_csv(folder / "desks.csv", parse_dates=["valid_from", "valid_to"])
        self.changes = pd.read_csv(folder / "changes.csv", parse_dates=["date"])
        self.days = pd.DatetimeIndex(pd.read_csv(folder / "calendar.csv", parse_dates=["date"])["date"])
        self.truth = pd.read_parquet(folder / "truth.parquet")
        self.names = ["Firm", *self.desks["desk"].drop(self.desks.index[self.desks["desk"] == "Firm"])]
        self.last = self.days[-250:]

    def loss(self, kind: str = "hypothetical", keep: str = "last") -> pd.DataFrame:
        """Return losses, days x desks: as known at the cut-off (keep="last") or as first known ("first")."""
        one = self.rows.drop_duplicates(["date", "desk"], keep=keep)
        return -self._wide(one, kind)

    def forecast(self, column: str) -> pd.DataFrame:
        """Return a column of the reported forecasts, days x desks."""
        return self._wide(self.reported, column)

    def true(self, column: str) -> pd.DataFrame:
        """Return a column of the truth, days x desks."""
        return self._wide(self.truth, column)

    def exceptions(self, kind: str = "hypothetical", column: str = "var_99_1d", keep: str = "last") -> pd.DataFrame:
        """Say where the loss is beyond the reported VaR, days x desks; False where there is no P&L."""
        return self.loss(kind, keep) > self.forecast(column)

    def _wide(self, table: pd.DataFrame, column: str) -> pd.DataFrame:
        wide = table.set_index(["date", "desk"])[column].unstack()  # noqa: PD010 - reshaping, nothing is aggregated
        return wide.reindex(index=self.days, columns=self.names)


@pytest.fixture(scope="session")
def demo() -> Tables:
    return Tables(FOLDER)


@pytest.fixture(scope="session")
def remade(demo, tmp_path_factory) -> Path:
    """Return a folder into which the script wrote the tables again."""
    target = tmp_path_factory.mktemp("remade")
    command = [sys.executable, str(demo.folder / "make.py"), str(target)]
    subprocess.run(command, check=True, env=os.environ | {"PYTHONDONTWRITEBYTECODE": "1"})
    return target


@pytest.fixture
def rng() -> np.random.Generator:
    return np.random.default_rng(20260101)
