"""Tails: what describes the residuals beyond the level. One function a tail, one place to register it."""

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np

from backtest.forecasting.age_weights import age_weights, weighted_rank
from backtest.forecasting.filters import Filtered, words
from backtest.forecasting.models import GPD_FITS, TailSpec
from backtest.forecasting.tail_laws import law_pit, read_laws
from backtest.kernels import gpd, student_fit
from backtest.kernels.order import empirical_rows, rank_rows, weighted_rows
from backtest.kernels.rolling import RUN_DAYS
from backtest.records import FALLBACK


@dataclass(frozen=True)
class Tailed:
    """A tail rolled over the residuals of a block.

    quantile, shortfall (n, L) in residual units; status (n) of words; tail (n, 3): shape, scale, threshold of a
    generalized Pareto tail, NaN for the others; pit: the law as a function of one residual a row; laws (n, 4: mode,
    scale, nu, lambda) where the tail is a normal, t or skewed t law, else empty.
    """

    quantile: np.ndarray
    shortfall: np.ndarray
    status: np.ndarray
    tail: np.ndarray
    pit: Callable[[np.ndarray], np.ndarray]
    laws: np.ndarray = field(default_factory=lambda: np.empty((0, 4)))


GPD_WORDS = {
    gpd.FEW_EXCESSES: "few excesses",
    gpd.ZHANG_STEPHENS: f"{FALLBACK}: zhang-stephens",
    gpd.REFUSED: f"{FALLBACK}: empirical tail",
}
LAW_WORDS = {
    student_fit.NU_CAP: "nu at its cap",
    student_fit.NU_FLOOR: "nu at its floor",
    student_fit.SKEW_BOUND: "skewness at its bound",
    student_fit.AS_T: f"{FALLBACK}: t tail",
    student_fit.AS_NORMAL: f"{FALLBACK}: normal tail",
}


def _empirical(filtered: Filtered, spec: TailSpec, levels: np.ndarray, places: np.ndarray) -> Tailed:
    residuals = filtered.residuals
    quantile, shortfall = empirical_rows(residuals, levels)
    return _plain(quantile, shortfall, lambda values: rank_rows(residuals, values))


def _age_weighted(filtered: Filtered, spec: TailSpec, levels: np.ndarray, places: np.ndarray) -> Tailed:
    residuals = filtered.residuals
    weights = age_weights(residuals.shape[1], spec.decay)
    quantile, shortfall = weighted_rows(residuals, weights, levels)
    return _plain(quantile, shortfall, lambda values: weighted_rank(residuals, weights, values))


def _normal(filtered: Filtered, spec: TailSpec, levels: np.ndarray, places: np.ndarray) -> Tailed:
    """Read a normal law: standard behind a filter that standardises, else with fitted location and scale."""
    residuals = filtered.residuals
    n = len(residuals)
    laws = np.tile([0.0, 1.0, np.inf, 0.0], (n, 1))
    if not filtered.law:
        laws[:, 0], laws[:, 1] = residuals.mean(axis=1), residuals.std(axis=1)
    return _lawful(laws, levels, np.full(n, "", dtype=object))


def _student(filtered: Filtered, spec: TailSpec, levels: np.ndarray, places: np.ndarray) -> Tailed:
    """Read a t or skewed t law: the filter's own where its innovations are that law, else fitted to the residuals.

    Behind a filter that standardises the shape alone is fitted, of a law with zero mean and unit variance.
    """
    given = filtered.shape if filtered.law == spec.kind else np.full((len(filtered.residuals), 2), np.nan)
    laws, bits = student_fit.roll_student(
        filtered.residuals, given, filtered.law != "", spec.kind == "skew-t", places, RUN_DAYS
    )
    return _lawful(laws, levels, words(bits, LAW_WORDS))


def _plain(quantile: np.ndarray, shortfall: np.ndarray, pit: Callable[[np.ndarray], np.ndarray]) -> Tailed:
    n = len(quantile)
    return Tailed(quantile, shortfall, np.full(n, "", dtype=object), np.full((n, 3), np.nan), pit)


def _lawful(laws: np.ndarray, levels: np.ndarray, status: np.ndarray) -> Tailed:
    quantile, shortfall = read_laws(laws, levels)
    none = np.full((len(laws), 3), np.nan)
    return Tailed(quantile, shortfall, status, none, lambda values: law_pit(laws, values), laws)


def _gpd(filtered: Filtered, spec: TailSpec, levels: np.ndarray, places: np.ndarray) -> Tailed:
    residuals = filtered.residuals
    k = int(np.floor(spec.share * residuals.shape[1] + 1e-9))
    quantile, shortfall, tail, bits = gpd.roll_gpd(residuals, levels, k, places, RUN_DAYS, GPD_FITS.index(spec.fit))
    refused = (bits & gpd.REFUSED) > 0
    if refused.any():
        quantile[refused], shortfall[refused] = empirical_rows(residuals[refused], levels)

    def pit(values: np.ndarray) -> np.ndarray:
        out = gpd.pit_rows(residuals, tail, values)
        out[refused] = rank_rows(residuals[refused], values[refused])
        return out

    return Tailed(quantile, shortfall, words(bits, GPD_WORDS), tail[:, :3], pit)


TAILS: dict[str, Callable[[Filtered, TailSpec, np.ndarray, np.ndarray], Tailed]] = {
    "empirical": _empirical,
    "age-weighted": _age_weighted,
    "normal": _normal,
    "t": _student,
    "skew-t": _student,
    "gpd": _gpd,
}


def apply_tail(filtered: Filtered, spec: TailSpec, levels: np.ndarray, places: np.ndarray) -> Tailed:
    """Roll a tail over the residuals (n, m) of one filtered block and read it at ``levels`` (L).

    ``places``: weekday numbers (n). A sample that a tail cannot be fitted to is answered by a simpler one, with a
    status: skewed t, then t, then normal; generalized Pareto by Zhang-Stephens, then empirical.
    """
    return TAILS[spec.kind](filtered, spec, levels, places)
