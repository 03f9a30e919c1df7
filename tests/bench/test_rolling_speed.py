"""Time of a daily recalibrated pass against a loop of arch and scipy on the same windows: printed, never asserted.

Run as `python -m pytest tests/bench -q -s`. Both sides are timed in this process by its CPU time. Ours: every window,
the verb's whole path to a table (fit, filter, generalized Pareto tail, VaR, ES, PIT), the median of three passes. The
reference: every fortieth window, each fitted from arch's own cold start, then scipy.stats.genpareto.fit on the top
tenth of the residuals. What is asserted is that both did the same work.
"""

import statistics
import time
from collections.abc import Callable
from typing import NamedTuple

import numpy as np
import pandas as pd
import pytest
from arch import arch_model
from scipy.stats import genpareto

from backtest.forecasting.engine import DeskHistory, forecast_group
from backtest.forecasting.histories import desk_histories
from backtest.forecasting.models import resolve
from backtest.reading.frames import pnl_table
from tests.reference.datasets import bmw, sp500

WINDOW, EVERY, LEVELS = 1000, 40, (0.975, 0.99)
SERIES: dict[str, Callable[[], pd.Series]] = {"S&P 500": sp500, "BMW": bmw}
CONSTANT, AR1 = {"mean": "Constant"}, {"mean": "AR", "lags": 1}
MEMBERS = {
    "C-GARCH-normal": ({"filter": "garch", "mean": "constant"}, {**CONSTANT, "o": 0}),
    "AR1-GARCH-normal": ({"filter": "garch", "mean": "ar1"}, {**AR1, "o": 0}),
    "C-GARCH-t": ({"filter": "garch", "mean": "constant", "innovations": "t"}, {**CONSTANT, "o": 0, "dist": "t"}),
    "AR1-GJR-t": ({"filter": "gjr", "mean": "ar1", "innovations": "t"}, {**AR1, "o": 1, "dist": "t"}),
}


class Reference(NamedTuple):
    """What the loop found for one window: GARCH likelihood, GPD likelihood and share, VaR by level."""

    loglik: float
    excesses: np.ndarray
    shape: float
    scale: float
    var: np.ndarray


def history_of(losses: pd.Series) -> DeskHistory:
    days = losses.index.to_numpy().astype("datetime64[D]")
    (history,) = desk_histories(pnl_table(-losses), days, days[-1], "hypothetical")
    return history


def by_arch_and_scipy(past: np.ndarray, options: dict) -> Reference:
    # arch is handed gains, so that its extra term acts on losses too
    fit = arch_model(-past, vol="GARCH", p=1, q=1, rescale=False, **options).fit(disp="off", show_warning=False)
    ahead = fit.forecast(horizon=1, reindex=False)
    centre, sigma = -ahead.mean.to_numpy()[-1, 0], np.sqrt(ahead.variance.to_numpy()[-1, 0])
    residuals = np.sort(-fit.std_resid[~np.isnan(fit.std_resid)])
    k = int(0.10 * len(residuals))
    threshold = residuals[-k - 1]
    y = residuals[-k:] - threshold
    shape, _, scale = genpareto.fit(y, floc=0)
    share = k / len(residuals)
    z = threshold + scale / shape * (((1 - np.array(LEVELS)) / share) ** -shape - 1)
    return Reference(fit.loglikelihood, y, shape, scale, centre + sigma * z)


def seconds(work: Callable[[], object]) -> float:
    start = time.process_time()
    work()
    return time.process_time() - start


@pytest.mark.parametrize("member", MEMBERS)
@pytest.mark.parametrize("series", SERIES)
def test_the_same_var_at_what_speed(series, member):
    losses = SERIES[series]()
    history = history_of(losses)
    options, reference = MEMBERS[member]
    model = resolve({"name": member, "start": "ewma-75", "tail": "gpd", **options}, levels=LEVELS, window=WINDOW)
    forecasts, fits = forecast_group(history, [model], LEVELS)  # compiles, and warms the cache
    ours = statistics.median(seconds(lambda: forecast_group(history, [model], LEVELS)) for _ in range(3))

    x = losses.to_numpy()
    places = range(0, len(fits), EVERY)
    start = time.process_time()
    found = [by_arch_and_scipy(x[i : i + WINDOW], reference) for i in places]
    theirs = time.process_time() - start

    agree(forecasts, fits, places, found)
    each, other = 1e6 * ours / len(fits), 1e6 * theirs / len(found)
    print(f"\n{'series':8} {'member':17} {'windows':>8} {'ours us':>9} {'arch+scipy us':>14} {'ratio':>7}")
    print(
        f"{series:8} {member:17} {len(fits):8,} {each:9.1f} {other:14.1f} {other / each:7.1f}   whole pass {ours:.2f} s"
    )


def agree(forecasts: pd.DataFrame, fits: pd.DataFrame, places: range, found: list[Reference]) -> None:
    """Assert that VaR is the same wherever both likelihoods, the GARCH's and the tail's, are."""
    var = forecasts.pivot_table(index="date", columns="level", values="var")[list(LEVELS)].to_numpy()
    tail = forecasts[forecasts["level"] == LEVELS[0]][["shape", "scale"]].to_numpy()
    same = 0
    for i, reference in zip(places, found, strict=True):
        y = reference.excesses
        ours, theirs = (genpareto.logpdf(y, c, scale=s).sum() for c, s in (tail[i], (reference.shape, reference.scale)))
        if abs(fits["loglik"].iloc[i] - reference.loglik) < 1e-6 and abs(ours - theirs) < 1e-6:
            same += 1
            np.testing.assert_allclose(var[i], reference.var, rtol=2e-4)
    print(f"\n{same} of {len(found)} windows with the same two likelihoods to 1e-6: the same VaR to 2e-4", end="")
    assert same > len(found) / 2
