"""Filters: what takes the changing mean and volatility out of a past; one function each, registered in one place."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from backtest.forecasting.models import MEANS, STARTS, FilterSpec
from backtest.kernels import search
from backtest.kernels.ewma import roll_ewma
from backtest.kernels.rolling import roll_garch
from backtest.records import FALLBACK


@dataclass(frozen=True)
class Filtered:
    """A filter rolled over the pasts of a block.

    mean, sigma (n): of the target day, NaN where the filter has none to say (filter none); residuals (n, m); status (n)
    of words; fits: named columns (n) for the fits table, empty where nothing is estimated.
    """

    mean: np.ndarray
    sigma: np.ndarray
    residuals: np.ndarray
    status: np.ndarray
    fits: dict[str, np.ndarray]


FITTED_WORDS = {
    search.BOUND_ALPHA: "alpha at 0",
    search.BOUND_PERSISTENCE: "persistence at its cap",
    search.FLAT: "flat optimum",
    search.SECOND_MODE: "second mode near",
    search.RESTARTED: "restarted",
    search.LAST_GOOD: f"{FALLBACK}: last good parameters",
    search.AS_EWMA: f"{FALLBACK}: ewma",
    search.CONSTANT: f"{FALLBACK}: constant past",
}


def words(bits: np.ndarray, vocabulary: dict[int, str]) -> np.ndarray:
    """Return each status as words joined by "; ", empty where no bit is set."""
    codes, index = np.unique(bits, return_inverse=True)
    texts = ["; ".join(text for bit, text in vocabulary.items() if code & bit) for code in codes]
    return np.array(texts, dtype=object)[index]


def _none(pasts: np.ndarray, spec: FilterSpec, places: np.ndarray, refit: np.ndarray) -> Filtered:
    n = len(pasts)
    return Filtered(np.full(n, np.nan), np.full(n, np.nan), pasts, np.full(n, "", dtype=object), {})


def _ewma(pasts: np.ndarray, spec: FilterSpec, places: np.ndarray, refit: np.ndarray) -> Filtered:
    sigma, residuals = roll_ewma(pasts, spec.decay)
    status = np.where(sigma > 0, "", FITTED_WORDS[search.CONSTANT]).astype(object)
    return Filtered(np.zeros(len(pasts)), sigma, residuals, status, {})


def _garch(pasts: np.ndarray, spec: FilterSpec, places: np.ndarray, refit: np.ndarray) -> Filtered:
    mean = MEANS.index(spec.mean)
    estimated = {"zero": (2, 3, 4), "constant": (0, 2, 3, 4), "ar1": (0, 1, 2, 3, 4), "ar1-no-intercept": (1, 2, 3, 4)}
    free = np.array(estimated[spec.mean], dtype=np.int64)
    parameters, numbers, bits, residuals = roll_garch(
        pasts, places, refit, free, mean, STARTS.index(spec.start), spec.every_start
    )
    fits = dict(zip(("intercept", "ar", "omega", "alpha", "beta"), parameters.T, strict=True))
    fits |= {"loglik": numbers[:, 0], "second_mode_sigma": numbers[:, 3]}
    return Filtered(numbers[:, 1], numbers[:, 2], residuals, words(bits, FITTED_WORDS), fits)


FILTERS: dict[str, Callable[[np.ndarray, FilterSpec, np.ndarray, np.ndarray], Filtered]] = {
    "none": _none,
    "ewma": _ewma,
    "garch": _garch,
}


def apply_filter(pasts: np.ndarray, spec: FilterSpec, places: np.ndarray, refit: np.ndarray) -> Filtered:
    """Roll a filter over one block of pasts.

    ``pasts``: losses (n, W); ``places``: weekday numbers (n); ``refit`` (n): which rows renew the parameters. Never
    raises for a past that cannot be fitted: the row's status says which fallback was used.
    """
    return FILTERS[spec.kind](pasts, spec, places, refit)
