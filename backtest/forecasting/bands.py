"""95% intervals for VaR and ES from estimation error: of the tail, and of the filter where it says how large it is.

Tail, in residual units, by the kind of the tail:
- generalized Pareto by likelihood or Zhang-Stephens, shape above -0.5: delta method with the covariance of the
  likelihood estimates (Smith 1985, Biometrika 72) and a fixed number of excesses, so that the threshold varies. A row
  fitted otherwise (moments, a shape of -0.5 or less, too few excesses) takes the empirical width.
- empirical, age-weighted: VaR by order statistics, exact for independent days, on both sides; where the sample ends
  before the upper one, excesses are taken as exponential. ES by its asymptotic variance (Manistre & Hancock 2005). Ages
  count as 1/sum of squared weights days.
- normal, t, skewed t: see ``law_bands``; where that has no answer (a shape at its bound), the empirical width.

Filter: variance of the next mean and sigma and their covariance, as ``Filtered.uncertainty``: by the sandwich for
Gaussian quasi likelihood, which holds on fat-tailed losses; by the inverse Hessian for t and skewed t innovations,
which holds where that law is the true one (``kernels/precision.py``); none for EWMA, whose decay is stated, nor for
library processes. Errors of filter and tail are taken as independent: half-widths add in squares, on each side (Zou &
Donner 2008, from memory).

Intervals are somewhat short: on 1,000 independent t4 losses with 100 excesses, those for VaR at 99% cover about 92% and
those for ES at 97.5% about 87.5% of the time. Those of an empirical ES cover 90% there (97.5%) and 87% (99%), but only
83% and 68% on 250 losses, where 2.5 lie beyond the 99% quantile. Those for the next sigma of a GARCH with t5
innovations fitted by Gaussian quasi likelihood cover about 91% on 1,000 losses and 95% on 5,000, where those by the
inverse Hessian would cover 75%.
"""

from dataclasses import dataclass

import numpy as np
from scipy.special import bdtr

from backtest.forecasting.age_weights import age_weights
from backtest.forecasting.filters import Filtered
from backtest.forecasting.law_bands import law_errors
from backtest.forecasting.models import TailSpec
from backtest.forecasting.tails import Tailed
from backtest.kernels.gpd import LOWEST_SHAPE
from backtest.kernels.information import excess_moments
from backtest.kernels.order import empirical_rows, weighted_rows

OUTSIDE = 0.025
"""Probability left out on either side."""
_Z = 1.959963984540054


@dataclass(frozen=True)
class Halves:
    """Half-widths (n, L) of an interval below and above a quantile and below and above a shortfall."""

    quantile_below: np.ndarray
    quantile_above: np.ndarray
    shortfall_below: np.ndarray
    shortfall_above: np.ndarray


@dataclass(frozen=True)
class Bands:
    """Limits (n, L) of the 95% intervals of VaR and ES, in the unit of the losses; low <= forecast <= high."""

    var_low: np.ndarray
    var_high: np.ndarray
    es_low: np.ndarray
    es_high: np.ndarray


def delta_bands(filtered: Filtered, tailed: Tailed, spec: TailSpec, levels: np.ndarray) -> Bands:
    """Return the intervals of a block of forecasts from the sampling error of tail and filter."""
    q, s = tailed.quantile, tailed.shortfall
    # Filter none has no mean and sigma to say: its residuals are the losses themselves.
    mean, sigma = np.nan_to_num(filtered.mean), np.nan_to_num(filtered.sigma, nan=1.0)
    halves = tail_halves(filtered, tailed, spec, levels)
    unit, var, es = sigma[:, None], mean[:, None] + sigma[:, None] * q, mean[:, None] + sigma[:, None] * s
    of_var, of_es = filter_half(filtered, q), filter_half(filtered, s)
    low = var - np.hypot(unit * halves.quantile_below, of_var)
    return Bands(
        low,
        var + np.hypot(unit * halves.quantile_above, of_var),
        np.maximum(es - np.hypot(unit * halves.shortfall_below, of_es), low),  # ES is never below VaR
        es + np.hypot(unit * halves.shortfall_above, of_es),
    )


def filter_half(filtered: Filtered, at: np.ndarray) -> np.ndarray:
    """Return the half-width (n, L) that the next mean and sigma add to mean + sigma x ``at``; zero where not known."""
    if filtered.uncertainty is None:
        return np.zeros(at.shape)
    of_mean, of_sigma, both = (np.nan_to_num(column)[:, None] for column in filtered.uncertainty.T)
    half: np.ndarray = _Z * np.sqrt(np.maximum(of_mean + 2.0 * at * both + at * at * of_sigma, 0.0))
    return half


def tail_halves(filtered: Filtered, tailed: Tailed, spec: TailSpec, levels: np.ndarray) -> Halves:
    """Return the half-widths of a block's tails in residual units."""
    residuals = filtered.residuals
    if spec.kind == "age-weighted":
        return empirical_halves(residuals, levels, age_weights(residuals.shape[1], spec.decay))
    if spec.kind == "gpd":
        return _gpd_halves(residuals, tailed, spec, levels)
    if spec.kind == "empirical":
        return empirical_halves(residuals, levels)
    return _law_halves(filtered, tailed, spec, levels)


def _gpd_halves(residuals: np.ndarray, tailed: Tailed, spec: TailSpec, levels: np.ndarray) -> Halves:
    shape, scale, threshold = tailed.tail.T
    regular = (shape > LOWEST_SHAPE) & (spec.fit != "pwm")
    out = Halves(*(np.empty_like(tailed.quantile) for _ in range(4)))
    if not regular.all():
        _put(out, ~regular, empirical_halves(residuals[~regular], levels))
    if regular.any():
        k = (residuals[regular] > threshold[regular, None]).sum(axis=1)
        share = k / residuals.shape[1]
        quantile, shortfall = gpd_errors(shape[regular], scale[regular], k, share, levels)
        _put(out, regular, _symmetric(quantile, shortfall))
    return out


def _law_halves(filtered: Filtered, tailed: Tailed, spec: TailSpec, levels: np.ndarray) -> Halves:
    quantile, shortfall = law_errors(filtered, tailed.laws, spec.kind, levels)
    out = _symmetric(quantile, shortfall)
    unknown = np.isnan(quantile).any(axis=1) | np.isnan(shortfall).any(axis=1)
    if unknown.any():
        _put(out, unknown, empirical_halves(filtered.residuals[unknown], levels))
    return out


def _symmetric(quantile: np.ndarray, shortfall: np.ndarray) -> Halves:
    return Halves(_Z * quantile, _Z * quantile, _Z * shortfall, _Z * shortfall)


def _put(out: Halves, rows: np.ndarray, part: Halves) -> None:
    out.quantile_below[rows], out.quantile_above[rows] = part.quantile_below, part.quantile_above
    out.shortfall_below[rows], out.shortfall_above[rows] = part.shortfall_below, part.shortfall_above


def gpd_errors(
    shape: np.ndarray, scale: np.ndarray, k: np.ndarray, share: np.ndarray, levels: np.ndarray
) -> tuple[np.ndarray, np.ndarray]:
    """Return the standard errors (n, L) of quantile and shortfall of a generalized Pareto tail on ``k`` excesses.

    ``share`` of the sample lies above the threshold u. With r = (1 - q)/share and g = (r^-xi - 1)/xi the quantile moves
    by g with beta, by beta dg/dxi with xi, and by r^-xi with u, whose variance is beta^2 (1 - share)/k since k is
    fixed; the shortfall is u + beta (1 + g)/(1 - xi). Covariance of (xi, beta): Smith (1985).
    """
    xi, beta, k, share = shape[:, None], scale[:, None], k[:, None], share[:, None]
    log = np.log((1.0 - levels) / share)
    flat = np.abs(xi) < 1e-5
    safe = np.where(flat, 1.0, xi)
    power = np.exp(-xi * log)
    g = np.where(flat, -log * (1.0 - 0.5 * xi * log), np.expm1(-xi * log) / safe)
    by_xi = np.where(flat, log * log * (0.5 - xi * log / 3.0), -(g + power * log) / safe)
    left = 1.0 - xi
    steps = ((beta * by_xi, g, power), (beta * (by_xi + (1.0 + g) / left) / left, (1.0 + g) / left, power / left))
    quantile, shortfall = (_combined(xi, beta, k, share, *step) for step in steps)
    return quantile, shortfall


def _combined(
    xi: np.ndarray, beta: np.ndarray, k: np.ndarray, share: np.ndarray, a: np.ndarray, b: np.ndarray, u: np.ndarray
) -> np.ndarray:
    """Return the standard error of what moves by a, b, u with xi, beta and the threshold."""
    w = 1.0 + xi
    variance = w * w * a * a - 2.0 * w * beta * a * b + 2.0 * w * beta * beta * b * b
    error: np.ndarray = np.sqrt(np.maximum(variance + (1.0 - share) * beta * beta * u * u, 0.0) / k)
    return error


def ranks(n: int, level: float) -> tuple[int, int]:
    """Return the ranks r, s (1 = smallest) of the exact 95% interval of the ``level`` quantile of n independent values.

    r is the largest with P(Bin(n, q) <= r - 1) <= 0.025, s the smallest with P(Bin(n, q) <= s - 1) >= 0.975; s = n + 1
    where none reaches.
    """
    below = bdtr(np.arange(n + 1, dtype=np.float64), n, level)
    r = int(np.searchsorted(below, OUTSIDE, side="right"))
    return max(r, 1), int(np.searchsorted(below[:n], 1.0 - OUTSIDE, side="left")) + 1


def empirical_halves(residuals: np.ndarray, levels: np.ndarray, weights: np.ndarray | None = None) -> Halves:
    """Return the half-widths of empirical quantile and shortfall of each row of ``residuals`` (n, m).

    ``weights`` (m) sum to one; None: equal weights. With L = (x - q)^+ the shortfall's variance is that of L/(1 - q)
    over the (effective) number of days, which is [Var(x | x > q) + q (ES - q)^2] / (n (1 - q)).
    """
    m = residuals.shape[1]
    w = np.full(m, 1.0 / m) if weights is None else weights
    days = round(1.0 / float(np.sum(w * w)))
    ends = [ranks(days, float(level)) for level in levels]
    # A rank r among as many days is the quantile at (r - 0.5)/days.
    low, high = (np.minimum((np.array(end) - 0.5) / days, 1.0 - 1e-12) for end in zip(*ends, strict=True))
    probes = np.concatenate([levels, low, high])
    read = empirical_rows(residuals, probes) if weights is None else weighted_rows(residuals, w, probes)
    (at, low, high), shortfall = np.split(read[0], 3, axis=1), read[1][:, : len(levels)]
    for j, level in enumerate(levels):
        if ends[j][1] > days:
            error = np.sqrt(level / (days * (1.0 - level))) * (shortfall[:, j] - at[:, j])
            high[:, j] = np.maximum(residuals.max(axis=1), at[:, j] + _Z * error)
    first, second = excess_moments(residuals, np.ascontiguousarray(at), w)
    # Few excesses understate their spread: it is at least that of an exponential law of the same mean.
    second = np.maximum(second, 2.0 * first * first / (1.0 - levels))
    es = _Z * np.sqrt(np.maximum(second - first * first, 0.0) / days) / (1.0 - levels)
    return Halves(np.maximum(at - low, 0.0), np.maximum(high - at, 0.0), es, es)
