"""Invented paths and slow second computations for tests of comparisons between models."""

import numpy as np
import pandas as pd
from scipy import stats

from tests.reference.judging_tables import business_days


def garch_t(days: int, seed: int, alpha: float = 0.08, beta: float = 0.90, nu: float = 5.0) -> np.ndarray:
    """Return losses of a GARCH(1,1) with unit-variance t innovations and unit long-run variance."""
    rng = np.random.default_rng(seed)
    draws = rng.standard_t(nu, days + 500) / np.sqrt(nu / (nu - 2.0))
    variance, path = 1.0, np.empty(days + 500)
    for t, draw in enumerate(draws):
        path[t] = np.sqrt(variance) * draw
        variance = 1.0 - alpha - beta + alpha * path[t] ** 2 + beta * variance
    return path[500:]


def pnl_of(losses: np.ndarray, desk: str = "A") -> pd.DataFrame:
    return pd.DataFrame({"date": business_days(len(losses)), "desk": desk, "hypothetical": -losses})


def noisy_forecasters(rng: np.random.Generator, days: int, level: float, noise: float) -> tuple[np.ndarray, ...]:
    """Return losses N(0, 1) and VaR, ES of two forecasters, each the truth times its own lognormal error every day."""
    var = float(stats.norm.ppf(level))
    es = float(stats.norm.pdf(var) / (1.0 - level))
    first, second = np.exp(noise * rng.standard_normal((2, days)))
    return rng.standard_normal(days), var * first, es * first, var * second, es * second


def wald_by_regression(differences: np.ndarray) -> float:
    """Return n R^2 of the regression of 1 on (d_t, d_t d_(t-1)): the Giacomini-White statistic, another way."""
    products = np.column_stack([differences[1:], differences[1:] * differences[:-1]])
    ones = np.ones(len(products))
    fitted = products @ np.linalg.lstsq(products, ones, rcond=None)[0]
    return float(len(ones) * (fitted @ fitted) / len(ones))


def diebold_mariano_slow(differences: list[float], lag: int) -> tuple[float, float]:
    """Return the statistic and two-sided p, by loops and scipy's t law."""
    days = len(differences)
    mean = sum(differences) / days
    variance = sum((d - mean) ** 2 for d in differences) / days
    for j in range(1, lag + 1):
        covariance = sum((differences[t] - mean) * (differences[t - j] - mean) for t in range(j, days)) / days
        variance += 2.0 * (1.0 - j / (lag + 1.0)) * covariance
    statistic = mean / np.sqrt(variance / days) * np.sqrt((days - 1.0) / days)
    return float(statistic), float(2.0 * stats.t.sf(abs(statistic), days - 1))
