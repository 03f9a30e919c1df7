"""A model as a law: filter and tail, as fitted on the last day, generate histories of P&L.

A history follows the fitted recursion of mean and variance from the mean square of the last past; its innovations are
drawn from the law of the residuals that the model's tail stands for: a normal, t or skewed t law; a generalized Pareto
law above its threshold; residuals elsewhere, with the weights they have in the model. Residuals are spread evenly to
half the gap on either side. Drawn as they are they would tie with the VaR, which is one of them, and a loss equal to
VaR is no exception: the law of the count would be that of the ties.

EWMA has no volatility it returns to: that of a generated history wanders off. The statistics do not depend on scale.
"""

from dataclasses import dataclass, field

import numpy as np

from backtest.forecasting.age_weights import age_weights
from backtest.forecasting.engine import DeskHistory
from backtest.forecasting.filters import Filtered, apply_filter
from backtest.forecasting.horizons import SIMULATED, recursion
from backtest.forecasting.models import Model
from backtest.forecasting.tail_laws import read_laws
from backtest.forecasting.tails import Tailed, apply_tail
from backtest.kernels.paths import rebuild

NOT_A_LAW = "not defined: this model cannot generate P&L"
"""What is said of every model that is no law."""


def _nothing() -> np.ndarray:
    return np.empty(0)


@dataclass(frozen=True)
class Innovations:
    """The law of residuals, by its quantiles.

    laws (4: mode, scale, nu, lambda) where it is a normal, t or skewed t law, else empty. Otherwise ``places`` and
    ``heights``, both ascending: quantiles between which the law is even; tail (4: share above the threshold, shape,
    scale, threshold) where it is generalized Pareto above a threshold, else empty.
    """

    laws: np.ndarray = field(default_factory=_nothing)
    places: np.ndarray = field(default_factory=_nothing)
    heights: np.ndarray = field(default_factory=_nothing)
    tail: np.ndarray = field(default_factory=_nothing)

    def quantile(self, uniform: np.ndarray) -> np.ndarray:
        """Return the quantiles at ``uniform`` (n), each in (0, 1)."""
        if len(self.laws):
            return np.asarray(read_laws(self.laws[None, :], uniform)[0][0])
        out = np.interp(uniform, self.places, self.heights)
        if len(self.tail):
            share, shape, scale, threshold = self.tail
            deep = 1.0 - uniform < share
            logs = -np.log((1.0 - uniform[deep]) / share)
            out[deep] = threshold + scale * (logs if abs(shape) < 1e-8 else np.expm1(shape * logs) / shape)
        return np.asarray(out)


@dataclass(frozen=True)
class ModelLaw:
    """What generates a history.

    motion (6) of mean and variance, see kernels.paths; the variance it starts from; the innovations; day:
    datetime64[D], the target day of the fit; status of this day's forecast, empty where there is none to report.
    """

    motion: np.ndarray
    variance: float
    innovations: Innovations
    day: np.datetime64
    status: str

    def history(self, uniform: np.ndarray) -> np.ndarray:
        """Return as many losses as there are numbers in ``uniform`` (n), each in (0, 1)."""
        out = np.empty((1, len(uniform)))
        order = np.arange(len(uniform), dtype=np.int64)[None, :]
        rebuild(self.innovations.quantile(uniform), order, self.motion, self.variance, out)
        return np.asarray(out[0])


def model_law(history: DeskHistory, model: Model | None, levels: np.ndarray) -> tuple[ModelLaw | None, str]:
    """Return the law of a model on the last target day of a desk; None, and why, where there is none.

    ``model``: None for one that is not ours, such as the reported one; ``levels``: those it is asked for.
    """
    if model is None or model.filter.kind not in SIMULATED or history.vectors is not None:
        return None, NOT_A_LAW
    days = history.plan(model.window)
    if not len(days.targets):
        return None, f"not defined: needs {model.window} losses"
    rows = days.blocks()[-1]  # fits and starts of fits of a block depend on nothing outside it
    pasts = days.pasts(rows)
    filtered = apply_filter(pasts, model.filter, days.places[rows], days.refits(rows, model.recalibrate_days))
    if not np.ptp(filtered.residuals[-1]) > 0.0 or filtered.sigma[-1] == 0.0:
        return None, "not defined: the last past does not vary"
    tailed = apply_tail(filtered, model.tail, levels, days.places[rows])
    status = "; ".join(filter(None, (filtered.status[-1], tailed.status[-1])))
    motion, variance = recursion(filtered, model.filter)[0][-1], float(np.mean(pasts[-1] ** 2))
    return ModelLaw(motion, variance, innovations(filtered, tailed, model), days.targets[-1], status), ""


def innovations(filtered: Filtered, tailed: Tailed, model: Model) -> Innovations:
    """Return the law of residuals that a model's tail stands for, in the last row of a block."""
    if len(tailed.laws):
        return Innovations(laws=tailed.laws[-1])
    residuals = filtered.residuals[-1]
    n = len(residuals)
    shape, scale, threshold = tailed.tail[-1]
    if np.isnan(threshold):
        weights = age_weights(n, model.tail.decay) if model.tail.kind == "age-weighted" else np.full(n, 1.0 / n)
        return _spread(residuals, weights)
    share = float(np.mean(residuals > threshold))
    body = _spread(residuals[residuals <= threshold], np.full(n, 1.0 / n), end=(1.0 - share, threshold))
    return Innovations(places=body.places, heights=body.heights, tail=np.array([share, shape, scale, threshold]))


def _spread(residuals: np.ndarray, weights: np.ndarray, end: tuple[float, float] | None = None) -> Innovations:
    """Put each residual in the middle of its weight; the outermost reach as far outwards as inwards, or to ``end``."""
    order = np.argsort(residuals, kind="stable")
    values, weights = residuals[order], weights[: len(order)][order]
    places = np.cumsum(weights) - 0.5 * weights
    first, last = values[0] - 0.5 * (values[1] - values[0]), values[-1] + 0.5 * (values[-1] - values[-2])
    if end is not None:  # the threshold is itself a residual: its weight ends where the tail begins
        places, values = places[:-1], values[:-1]
    top = (1.0, last) if end is None else end
    return Innovations(
        places=np.concatenate([[0.0], places, [top[0]]]), heights=np.concatenate([[first], values, [top[1]]])
    )
