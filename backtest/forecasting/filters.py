"""Filters: what takes the changing mean and volatility out of a past; one function each, registered in one place."""

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np

from backtest.forecasting import library
from backtest.forecasting.models import INNOVATIONS, LIBRARY, MEANS, REPORTED, STARTS, FilterSpec
from backtest.kernels import garch, rolling
from backtest.kernels.ewma import roll_ewma
from backtest.kernels.parameters import ETA, LAMBDA
from backtest.records import FALLBACK


@dataclass(frozen=True)
class Filtered:
    """A filter rolled over the pasts of a block.

    mean, sigma (n): of the target day, NaN where the filter has none to say (filter none); residuals (n, m); status (n)
    of words; fits: named columns (n) for the fits table, empty where nothing is estimated; law: of the standardised
    residuals ("normal", "t", "skew-t"), empty where they are not standardised; shape (n, 2): nu and lambda of the
    innovations, NaN in rows without them, empty where the law has no shape; uncertainty (n, 3): variances of the next
    mean and of the next sigma and their covariance, from estimation error, in squared loss units, None where nothing is
    estimated.
    """

    mean: np.ndarray
    sigma: np.ndarray
    residuals: np.ndarray
    status: np.ndarray
    fits: dict[str, np.ndarray]
    law: str = ""
    shape: np.ndarray = field(default_factory=lambda: np.empty((0, 2)))
    uncertainty: np.ndarray | None = None


FITTED_WORDS = {
    rolling.BOUND_REACTION: "no reaction",
    rolling.BOUND_PERSISTENCE: "persistence at its cap",
    rolling.FLAT: "flat optimum",
    rolling.SECOND_MODE: "second mode near",
    rolling.RESTARTED: "restarted",
    garch.LAST_GOOD: f"{FALLBACK}: last good parameters",
    garch.AS_EWMA: f"{FALLBACK}: ewma",
    rolling.CONSTANT: f"{FALLBACK}: constant past",
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
    status = np.where(sigma > 0, "", FITTED_WORDS[rolling.CONSTANT]).astype(object)
    return Filtered(np.zeros(len(pasts)), sigma, residuals, status, {}, "normal")


def member_of(spec: FilterSpec) -> rolling.Member:
    """Return the member of the GARCH family that a filter of kind garch or gjr asks for."""
    return garch.member(
        MEANS.index(spec.mean), STARTS.index(spec.start), gjr=spec.kind == "gjr",
        shapes=INNOVATIONS.index(spec.innovations), every_start=spec.every_start,
    )  # fmt: skip


def _garch(pasts: np.ndarray, spec: FilterSpec, places: np.ndarray, refit: np.ndarray) -> Filtered:
    member = member_of(spec)
    shapes = member.shapes
    found = garch.roll(pasts, places, refit, member, uncertain=True)
    unused = np.setdiff1d(np.arange(found.parameters.shape[1]), member.free)
    found.parameters[:, unused] = np.nan
    fits = {name: found.parameters[:, i] for i, name in garch.NAMES.items()}
    fits["nu"] = 1.0 / fits.pop("eta")
    fits |= {"loglik": found.loglik, "second_mode_sigma": found.second_sigma}
    shape = (
        np.column_stack([1.0 / found.parameters[:, ETA], found.parameters[:, LAMBDA]]) if shapes else np.empty((0, 2))
    )
    if shapes == 1:
        shape[:, 1] = np.nan
    texts = words(found.status, FITTED_WORDS)
    return Filtered(
        found.mean, found.sigma, found.residuals, texts, fits, spec.innovations, shape, found.uncertainty
    )  # fmt: skip


def _library(pasts: np.ndarray, spec: FilterSpec, places: np.ndarray, refit: np.ndarray) -> Filtered:
    found = library.follow(pasts, spec, places, refit)
    fits = {**library.columns(found.fits), "loglik": found.loglik}
    shape = np.empty((0, 2)) if spec.innovations == "normal" else np.column_stack([fits["nu"], fits["lambda"]])
    texts = words(found.status, FITTED_WORDS)
    return Filtered(found.mean, found.sigma, found.residuals, texts, fits, spec.innovations, shape)


def _reported(pasts: np.ndarray, spec: FilterSpec, places: np.ndarray, refit: np.ndarray) -> Filtered:
    """Take ratios to the reported VaR as they are; mean and sigma are those of a day whose reported VaR is one."""
    n = len(pasts)
    return Filtered(np.zeros(n), np.ones(n), pasts, np.full(n, "", dtype=object), {})


FILTERS: dict[str, Callable[[np.ndarray, FilterSpec, np.ndarray, np.ndarray], Filtered]] = {
    "none": _none,
    "ewma": _ewma,
    "garch": _garch,
    "gjr": _garch,
    LIBRARY: _library,
    REPORTED: _reported,
}


def apply_filter(pasts: np.ndarray, spec: FilterSpec, places: np.ndarray, refit: np.ndarray) -> Filtered:
    """Roll a filter over one block of pasts.

    ``pasts``: losses (n, W); ``places``: weekday numbers (n); ``refit`` (n): which rows renew the parameters. Never
    raises for a past that cannot be fitted: the row's status says which fallback was used.
    """
    return FILTERS[spec.kind](pasts, spec, places, refit)
