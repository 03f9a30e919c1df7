"""Standard errors of the parameters of one fitted window, each by the name of its formula."""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from backtest.errors import FitError, StudyError
from backtest.forecasting.filters import FITTED_WORDS, member_of, words
from backtest.forecasting.models import SHORTEST, FilterSpec
from backtest.kernels import garch, rolling
from backtest.kernels.parameters import COUNT, ETA, OMEGA, C
from backtest.kernels.precision import covariances, evidence, held
from backtest.kernels.rolling import Member

ERRORS = ("hessian", "opg", "information", "bollerslev-wooldridge", "sandwich")
"""Names of standard errors; "robust" is said of the last two, which differ: their names are printed instead."""
BY_HESSIAN = ("hessian",)
"""The names that Student t and skewed t innovations have: maximum likelihood under their own law."""
AT_BOUND = "at a bound and held there: no standard error"
FLAT = "likelihood flat in some direction: no standard error by "


@dataclass(frozen=True)
class ParameterErrors:
    """A parameter of a fitted window.

    estimate: in the units of losses (intercept) and squared losses (omega), otherwise without unit; errors: standard
    error by name, in the unit of the estimate, a name absent where there is none; remark: why one is absent, else "".
    """

    parameter: str
    estimate: float
    errors: Mapping[str, float]
    remark: str


def parameter_errors(past: np.ndarray, spec: FilterSpec) -> tuple[ParameterErrors, ...]:
    """Fit a garch or gjr filter to one past, losses (W), and return its parameters with their standard errors.

    Names and sources: ``ERRORS`` and ``kernels/precision.py``. Normal innovations have all five, of which the sandwich
    is the one behind the intervals of forecasts; t and skewed t innovations have the Hessian's alone, right where
    their law is the true one. nu = 1/eta has the error of eta over eta^2 (delta method). Parameters at a bound are held
    there (at the cap of persistence: beta), and the errors of the others are given that.

    Raises StudyError for a filter without such parameters; FitError for losses that are not ``SHORTEST`` or more finite
    numbers in a row, that do not vary, or to which no fit converged.
    """
    if spec.kind not in ("garch", "gjr"):
        raise StudyError("filter without standard errors", rule="garch or gjr", value=spec.kind)
    losses = np.array(past, dtype=np.float64)
    if losses.ndim != 1 or len(losses) < SHORTEST or not np.isfinite(losses).all():
        rule = f"{SHORTEST} or more finite losses in a row"
        seen = f"shape {losses.shape}, {np.count_nonzero(~np.isfinite(losses))} not finite"
        raise FitError("past that cannot be fitted", rule=rule, value=seen, remedy="hand over one window of losses")
    member = member_of(spec)
    row, pasts = np.zeros(1, dtype=np.int64), losses[None]
    found = garch.roll(pasts, row, np.ones(1, dtype=bool), member)
    if found.status[0] & (rolling.CONSTANT | garch.AS_EWMA):
        seen = words(found.status, FITTED_WORDS)[0]
        raise FitError("past that cannot be fitted", value=seen, remedy="hand over losses that vary, or more of them")
    parameters = np.ascontiguousarray(found.parameters)
    matrices, slopes = evidence(pasts, row, parameters, member)
    fixed = held(parameters, member.cap)[:, member.free]
    variances = {name: np.diag(one[0]) for name, one in covariances(matrices, fixed).items()}
    return _table(parameters[0], fixed[0], variances, slopes[0, -1], member)


def _table(
    parameters: np.ndarray, fixed: np.ndarray, variances: Mapping[str, np.ndarray], scale: float, member: Member
) -> tuple[ParameterErrors, ...]:
    """Return the rows of free parameters from variances by name, in units of a past divided by ``scale``."""
    named = [name for name in ERRORS if name in variances]
    flat = [name for name in named if np.isnan(variances[name]).any()]
    unit = np.ones(COUNT)
    unit[C], unit[OMEGA], unit[ETA] = scale, scale * scale, 1.0 / parameters[ETA] ** 2 if parameters[ETA] else 1.0
    rows = []
    for at, i in enumerate(member.free):
        name, value = ("nu", 1.0 / parameters[i]) if i == ETA else (garch.NAMES[i], parameters[i])
        told = [] if fixed[at] else [name for name in named if name not in flat]
        given = {error: float(np.sqrt(variances[error][at]) * unit[i]) for error in told}
        remark = AT_BOUND if fixed[at] else (FLAT + ", ".join(flat) if flat else "")
        rows.append(ParameterErrors(name, float(value), given, remark))
    return tuple(rows)
