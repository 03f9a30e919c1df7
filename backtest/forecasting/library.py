"""The volatility processes of the library arch, rolled over pasts: the one place that speaks to it.

arch sees returns, which are minus the losses, divided by the standard deviation of the past: an asymmetry term acts on
losses, and the skewness of the losses is minus that of arch. Every fit starts from arch's own starting values and ends
where its general optimiser stops, so that no fit depends on another. It is no fit where arch does not say that it
converged, or where a variance that never changes is more likely. Not known here: a second mode, and the estimation
error of mean and sigma, which intervals therefore leave out.
"""

from typing import Any, NamedTuple

import numpy as np

from backtest.forecasting.models import FilterSpec
from backtest.kernels.garch import AS_EWMA, LAST_GOOD, inherit, stand_in
from backtest.kernels.parameters import COUNT
from backtest.kernels.rolling import CONSTANT, NOT_CONVERGED

DECIMALS = 9
"""Decimals of scaled returns that a fit sees: finite differences would magnify the last bit, which the unit decides."""
ITERATIONS = 1000
"""Most steps of the optimiser; arch's usual 100 end some fits of APARCH early."""
WORSE = 1.0
"""Every process can stand nearly still: a fit this much less likely than one normal law is a search that failed."""
FLAT = 1e-9
"""A past whose standard deviation is not above this share of its largest value does not vary."""
OWN = {
    "mu": "intercept", "Const": "intercept", "y[1]": "ar", "omega": "omega", "alpha": "alpha", "alpha[1]": "alpha",
    "gamma[1]": "gamma", "beta": "beta", "beta[1]": "beta", "nu": "nu", "eta": "nu", "lambda": "lambda",
}  # fmt: skip
"""Names of arch that have a column of their own in the fits table; the others share one, as text."""


class Fit(NamedTuple):
    """Parameters by name, as arch has them, of returns divided by ``unit``; log-likelihood of the losses."""

    parameters: dict[str, float]
    unit: float
    loglik: float


class Followed(NamedTuple):
    """A process rolled over n pasts: as ``kernels.garch.Rolled``, with the fit each row is filtered by, None: none."""

    fits: list[Fit | None]
    loglik: np.ndarray
    mean: np.ndarray
    sigma: np.ndarray
    status: np.ndarray
    residuals: np.ndarray


def follow(pasts: np.ndarray, spec: FilterSpec, places: np.ndarray, refit: np.ndarray) -> Followed:
    """Fit where ``refit`` and filter each row of ``pasts`` (losses, n x W); fallbacks as for the GARCH family."""
    n, W = pasts.shape
    units, status = _units(pasts), np.zeros(n, np.int64)
    status[(units == 0.0) & refit] = CONSTANT
    made: list[Fit | None] = [None] * n
    for i in np.flatnonzero(refit & (units > 0.0)):
        made[i] = _fit(pasts[i], units[i], spec)
        status[i] = 0 if made[i] else NOT_CONVERGED
    loglik = np.array([fit.loglik if fit else np.nan for fit in made])
    used = np.full((n, COUNT), np.nan)
    used[:, 0] = np.arange(n)
    inherit(used, status, refit, places)
    ahead, residuals = np.full((n, 2), np.nan), np.zeros((n, W - spec.conditions))
    fits: list[Fit | None] = [None] * n
    for i in np.flatnonzero((status & (CONSTANT | AS_EWMA) == 0) & (units > 0.0)):
        fits[i] = fit = made[int(used[i, 0])]
        if fit is None or not _filter(pasts[i], fit, spec, ahead[i], residuals[i]):
            fits[i], status[i] = None, (status[i] & ~LAST_GOOD) | AS_EWMA
    stand_in(pasts, spec.conditions, status, ahead, residuals)
    return Followed(fits, loglik, ahead[:, 0], ahead[:, 1], status, residuals)


def columns(fits: list[Fit | None]) -> dict[str, np.ndarray]:
    """Return the parameters as columns of the fits table, of losses; what has no column of its own stands as text.

    The intercept is in money; the parameters of the process are those of losses divided by the unit, which the text
    gives.
    """
    out = {name: np.full(len(fits), np.nan) for name in OWN.values()}
    others = np.full(len(fits), "", dtype=object)
    for i, fit in enumerate(fits):
        if fit is None:
            continue
        for name, value in fit.parameters.items():
            if name in OWN:
                out[OWN[name]][i] = _of_losses(name, value, fit.unit)
        rest = {name: value for name, value in fit.parameters.items() if name not in OWN} | {"unit": fit.unit}
        others[i] = "; ".join(f"{name} {value:.9g}" for name, value in rest.items())
    return {**out, "other_parameters": others}


def _of_losses(name: str, value: float, unit: float) -> float:
    if OWN[name] == "intercept":
        return -value * unit
    return -value if name == "lambda" else value


def _units(pasts: np.ndarray) -> np.ndarray:
    """Return the standard deviation of each past, zero where it does not vary."""
    largest = np.abs(pasts).max(axis=1)
    share = (pasts / np.where(largest > 0.0, largest, 1.0)[:, None]).std(axis=1)
    return np.where(share > FLAT, share * largest, 0.0)


def _fit(past: np.ndarray, unit: float, spec: FilterSpec) -> Fit | None:
    """Return the fit of one past, None where arch cannot fit it, does not say that it converged, or went astray."""
    returns = np.round(-past / unit, DECIMALS)
    try:
        with np.errstate(all="ignore"):
            found = _model(returns, spec).fit(disp="off", show_warning=False, options={"maxiter": ITERATIONS})
    except (ValueError, FloatingPointError, np.linalg.LinAlgError):
        return None
    numbers = {str(name): float(value) for name, value in found.params.items()}
    scaled, days = float(found.loglikelihood), found.nobs
    still = -0.5 * days * (np.log(2.0 * np.pi * np.mean(returns**2)) + 1.0)
    good = found.convergence_flag == 0 and np.isfinite(list(numbers.values())).all() and scaled > still - WORSE
    return Fit(numbers, unit, scaled - days * float(np.log(unit))) if good else None


def _filter(past: np.ndarray, fit: Fit, spec: FilterSpec, ahead: np.ndarray, residuals: np.ndarray) -> bool:
    """Fill next mean and sigma and the residuals of one past; return False where they are no numbers."""
    with np.errstate(all="ignore"):
        fixed = _model(-past / fit.unit, spec).fix(list(fit.parameters.values()))
        next_day = fixed.forecast(horizon=1, reindex=False)
        ahead[0] = -fit.unit * next_day.mean.to_numpy()[-1, 0]
        ahead[1] = fit.unit * np.sqrt(next_day.variance.to_numpy()[-1, 0])
        residuals[:] = -fixed.std_resid[spec.conditions :]
    return bool(np.isfinite(ahead).all() and ahead[1] > 0.0 and np.isfinite(residuals).all())


def _model(returns: np.ndarray, spec: FilterSpec) -> Any:
    """Return arch's model of one past. Imported here, so that nothing else waits for arch."""
    import arch.univariate as arch

    laws = {"normal": "Normal", "t": "StudentsT", "skew-t": "SkewStudent"}
    process, law = getattr(arch, spec.process)(), getattr(arch, laws[spec.innovations])()
    options = {"volatility": process, "distribution": law, "rescale": False}
    if spec.mean == "zero":
        return arch.ZeroMean(returns, **options)
    if spec.mean == "constant":
        return arch.ConstantMean(returns, **options)
    return arch.ARX(returns, lags=1, constant=spec.mean == "ar1", **options)
