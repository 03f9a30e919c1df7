"""VaR and ES of the loss over several days: filtered simulation, and the square-root-of-time rule beside it.

The volatility recursion runs on from the day after the past with innovations drawn from the model's own residuals
(McNeil & Frey 2000, section on several days): residuals in the centre and generalized Pareto tails on both sides, or as
they are where the tail is empirical, or standard normal numbers where it is normal. VaR and ES are read off the
simulated sums by a generalized Pareto tail on the top tenth of them, as in the paper.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from backtest.forecasting.draws import key
from backtest.forecasting.filters import Filtered
from backtest.forecasting.models import FilterSpec, TailSpec
from backtest.kernels.garch import FALLBACK_DECAY
from backtest.kernels.gpd import BY_ML, roll_gpd
from backtest.kernels.order import empirical_rows
from backtest.kernels.paths import MOTION, simulate_sums
from backtest.kernels.rolling import RUN_DAYS

PATHS = 10_000
"""Simulated paths a day."""
SHARE = 0.10
"""Share of residuals on either side, and of simulated sums, that a generalized Pareto tail stands for."""
SIMULATED = ("none", "ewma", "garch", "gjr")
"""Filters whose recursion can be run on."""

_DAYS = 16
_DEEP = np.array([0.999])
_NO_TAIL = 3 * (np.nan,)


@dataclass(frozen=True)
class Ahead:
    """The simulated loss over each of H horizons: quantile, shortfall (n, H, L), mean and standard deviation (n, H)."""

    quantile: np.ndarray
    shortfall: np.ndarray
    mean: np.ndarray
    sigma: np.ndarray


def look_ahead(
    filtered: Filtered,
    filter_spec: FilterSpec,
    tail_spec: TailSpec,
    levels: np.ndarray,
    horizons: Sequence[int],
    days: np.ndarray,
    seed: int,
    paths: int = PATHS,
) -> Ahead:
    """Simulate the losses over the first h days from each target day on, for each of ``horizons`` (ascending).

    ``days``: target days (n), datetime64[D], which with ``seed`` determine the draws. Only for filters in SIMULATED.
    """
    n, H, L = len(days), len(horizons), len(levels)
    motion, start = recursion(filtered, filter_spec)
    normal = tail_spec.kind == "normal"
    if normal and filter_spec.kind == "none":
        start = np.column_stack([filtered.residuals.mean(axis=1), filtered.residuals.std(axis=1)])
        motion[:, 0], motion[:, 2] = start[:, 0], start[:, 1] ** 2
    upper, lower = _tails(filtered.residuals, tail_spec)
    keys = np.array([key(seed, "horizon", day) for day in days], dtype=np.uint64)
    steps = np.array(horizons, dtype=np.int64)
    out = Ahead(np.empty((n, H, L)), np.empty((n, H, L)), np.empty((n, H)), np.empty((n, H)))
    for i in range(0, n, _DAYS):
        rows = slice(i, min(i + _DAYS, n))
        sums = simulate_sums(
            filtered.residuals[rows],
            upper[rows],
            lower[rows],
            normal,
            start[rows],
            motion[rows],
            keys[rows],
            steps,
            paths,
        )
        out.mean[rows], out.sigma[rows] = sums.mean(axis=2), sums.std(axis=2)
        quantile, shortfall = read_sums(sums.reshape(-1, paths), levels)
        out.quantile[rows], out.shortfall[rows] = quantile.reshape(-1, H, L), shortfall.reshape(-1, H, L)
    return out


def recursion(filtered: Filtered, spec: FilterSpec) -> tuple[np.ndarray, np.ndarray]:
    """Return how each row's mean and variance move on (n, MOTION), and its mean and sigma of the target day (n, 2).

    Rows that fell back on EWMA move by EWMA; rows of a constant past stay where they are; filter none stands still.
    """
    n = len(filtered.residuals)
    motion = np.zeros((n, MOTION))
    if spec.kind == "none":
        motion[:, 2] = 1.0
        return motion, np.tile([0.0, 1.0], (n, 1))
    start = np.column_stack([filtered.mean, filtered.sigma])
    decay = FALLBACK_DECAY
    if filtered.fits:
        names = ("intercept", "ar", "omega", "alpha", "gamma", "beta")
        for i, name in enumerate(names):
            motion[:, i] = np.nan_to_num(filtered.fits.get(name, np.zeros(n)))
        fell = np.isnan(filtered.fits["omega"])
    else:
        decay, fell = spec.decay, np.ones(n, dtype=bool)
    motion[fell] = (0.0, 0.0, 0.0, 1.0 - decay, 0.0, decay)
    still = ~(filtered.sigma > 0.0)
    motion[still] = 0.0
    motion[still, 0] = filtered.mean[still]
    return motion, start


def read_sums(sums: np.ndarray, levels: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return quantile and shortfall (n, L) of simulated sums (n, N).

    By a generalized Pareto tail on the top tenth, where every level lies in it and it can be fitted; else the
    empirical rule.
    """
    quantile, shortfall = np.full((len(sums), len(levels)), np.nan), np.full((len(sums), len(levels)), np.nan)
    if levels.min() > 1.0 - SHARE:
        # Every row a run of its own: no fit starts from another day's.
        places = np.arange(len(sums)) * RUN_DAYS
        quantile, shortfall, _, _ = roll_gpd(sums, levels, int(SHARE * sums.shape[1]), places, RUN_DAYS, BY_ML)
    unread = np.isnan(quantile).any(axis=1)
    if unread.any():
        quantile[unread], shortfall[unread] = empirical_rows(np.ascontiguousarray(sums[unread]), levels)
    return quantile, shortfall


def _tails(residuals: np.ndarray, spec: TailSpec) -> tuple[np.ndarray, np.ndarray]:
    """Return the upper and the lower tail (n, 3: shape, scale, threshold); NaN where residuals stay as they are."""
    n = len(residuals)
    if spec.kind in ("empirical", "age-weighted", "normal"):
        return np.tile(_NO_TAIL, (n, 1)), np.tile(_NO_TAIL, (n, 1))
    k = int(np.floor((spec.share or SHARE) * residuals.shape[1] + 1e-9))
    places = np.arange(n) * RUN_DAYS
    upper, lower = (roll_gpd(x, _DEEP, k, places, RUN_DAYS, BY_ML)[2][:, :3] for x in (residuals, -residuals))
    return np.ascontiguousarray(upper), np.ascontiguousarray(lower)
