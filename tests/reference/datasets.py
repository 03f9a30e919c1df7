"""Open datasets (see tests/data/SOURCES.md) as percent losses, and simulated paths with known truth."""

from pathlib import Path

import numpy as np
import pandas as pd

DATA = Path(__file__).parent.parent / "data"


def bmw() -> pd.Series:
    """Percent losses of the BMW share, indexed by date."""
    table = pd.read_csv(DATA / "bmw.csv", parse_dates=["date"])
    return pd.Series(-100 * table["log_return"].to_numpy(), index=pd.DatetimeIndex(table["date"]))


def dem2gbp() -> np.ndarray:
    """Percent returns DEM/GBP."""
    return np.loadtxt(DATA / "dem2gbp.csv", skiprows=1)


def rain() -> np.ndarray:
    """Daily rainfall in millimetres."""
    return np.loadtxt(DATA / "rain.csv", skiprows=1)


def dow_jones() -> np.ndarray:
    """Percent log returns of the Dow Jones index, 1995-2000."""
    index = pd.read_csv(DATA / "dowjones.csv")["Index"].to_numpy()
    return 100 * np.diff(np.log(index))


def sp500() -> pd.Series:
    """Percent log losses of the S&P 500 as shipped with arch, indexed by date."""
    import arch.data.sp500

    prices = arch.data.sp500.load()["Adj Close"]
    return -100 * np.log(prices).diff().dropna()


def garch_t(days: int, seed: int, nu: float = 5.0) -> tuple[np.ndarray, np.ndarray]:
    """Simulated losses and their true standard deviations: GARCH(.02, .08, .90) with unit-variance t innovations."""
    rng = np.random.default_rng(seed)
    z = rng.standard_t(nu, days + 500) * np.sqrt((nu - 2) / nu)
    h, losses, sigma = 1.0, np.empty(days + 500), np.empty(days + 500)
    for t in range(days + 500):
        sigma[t] = np.sqrt(h)
        losses[t] = sigma[t] * z[t]
        h = 0.02 + 0.08 * losses[t] ** 2 + 0.90 * h
    return losses[500:], sigma[500:]


def pnl_series(losses: np.ndarray, start: str = "2010-01-04") -> pd.Series:
    """Losses as a P&L Series on consecutive weekdays."""
    return pd.Series(-np.asarray(losses), index=pd.bdate_range(start, periods=len(losses)))
