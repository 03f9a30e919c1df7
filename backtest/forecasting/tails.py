"""Tails: what describes the residuals beyond the level. One function a tail, one place to register it."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy.special import ndtr, ndtri

from backtest.forecasting.filters import words
from backtest.forecasting.models import TailSpec
from backtest.kernels import gpd
from backtest.kernels.order import empirical_rows, rank_rows
from backtest.kernels.rolling import RUN_DAYS
from backtest.records import FALLBACK


@dataclass(frozen=True)
class Tailed:
    """A tail rolled over the residuals of a block.

    quantile, shortfall (n, L) in residual units; status (n) of words; tail (n, 3): shape, scale, threshold of a
    generalized Pareto tail, NaN for the others; pit: the law as a function of one residual a row.
    """

    quantile: np.ndarray
    shortfall: np.ndarray
    status: np.ndarray
    tail: np.ndarray
    pit: Callable[[np.ndarray], np.ndarray]


GPD_WORDS = {
    gpd.FEW_EXCESSES: "few excesses",
    gpd.ZHANG_STEPHENS: f"{FALLBACK}: zhang-stephens",
    gpd.REFUSED: f"{FALLBACK}: empirical tail",
}


def standardise(loss: np.ndarray, mean: np.ndarray, sigma: np.ndarray) -> np.ndarray:
    """Return (loss - mean) / sigma; where sigma is zero, an infinity of the difference's sign, or zero."""
    gap = loss - mean
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.where(gap == 0.0, 0.0, gap / sigma)


def _empirical(residuals: np.ndarray, spec: TailSpec, levels: np.ndarray, places: np.ndarray, standard: bool) -> Tailed:
    n = len(residuals)
    quantile, shortfall = empirical_rows(residuals, levels)
    return Tailed(
        quantile, shortfall, np.full(n, "", dtype=object), np.full((n, 3), np.nan),
        lambda values: rank_rows(residuals, values),
    )  # fmt: skip


def _normal(residuals: np.ndarray, spec: TailSpec, levels: np.ndarray, places: np.ndarray, standard: bool) -> Tailed:
    """Read a normal law: standard behind a filter with normal innovations, else with fitted location and scale."""
    n = len(residuals)
    centre = np.zeros(n) if standard else residuals.mean(axis=1)
    spread = np.ones(n) if standard else residuals.std(axis=1)
    z = ndtri(levels)
    depth = np.exp(-0.5 * z * z) / np.sqrt(2 * np.pi) / (1 - levels)
    at = centre[:, None] + spread[:, None] * z
    return Tailed(
        at, centre[:, None] + spread[:, None] * depth, np.full(n, "", dtype=object), np.full((n, 3), np.nan),
        lambda values: ndtr(standardise(values, centre, spread)),
    )  # fmt: skip


def _gpd(residuals: np.ndarray, spec: TailSpec, levels: np.ndarray, places: np.ndarray, standard: bool) -> Tailed:
    k = int(np.floor(spec.share * residuals.shape[1] + 1e-9))
    quantile, shortfall, tail, bits = gpd.roll_gpd(residuals, levels, k, places, RUN_DAYS, spec.fit == "ml")
    if spec.fit == "zhang-stephens":
        bits = bits & ~gpd.ZHANG_STEPHENS
    refused = (bits & gpd.REFUSED) > 0
    if refused.any():
        quantile[refused], shortfall[refused] = empirical_rows(residuals[refused], levels)

    def pit(values: np.ndarray) -> np.ndarray:
        out = gpd.pit_rows(residuals, tail, values)
        out[refused] = rank_rows(residuals[refused], values[refused])
        return out

    return Tailed(quantile, shortfall, words(bits, GPD_WORDS), tail[:, :3], pit)


TAILS: dict[str, Callable[[np.ndarray, TailSpec, np.ndarray, np.ndarray, bool], Tailed]] = {
    "empirical": _empirical,
    "normal": _normal,
    "gpd": _gpd,
}


def apply_tail(residuals: np.ndarray, spec: TailSpec, levels: np.ndarray, places: np.ndarray, standard: bool) -> Tailed:
    """Roll a tail over the residuals (n, m) of one block and read it at ``levels`` (L).

    ``standard`` says that the filter's innovations are standardised, so that a law of that name needs no fitting.
    """
    return TAILS[spec.kind](residuals, spec, levels, places, standard)
