"""The processes of the library arch behind the one adapter."""

import inspect
import subprocess
import sys

import arch.univariate as arch
import numpy as np
import pandas as pd
import pytest

import backtest
from backtest.forecasting import library
from backtest.forecasting.engine import DeskHistory, forecast_group
from backtest.forecasting.models import FilterSpec, resolve
from backtest.forecasting.processes import PROCESSES
from backtest.records import FALLBACK
from tests.reference.datasets import garch_t, pnl_series

WINDOW, LEVELS = 400, (0.975, 0.99)
LAWS = ("normal", "t", "skew-t")


def forecast(losses, models, **options) -> pd.DataFrame:
    return backtest.forecast(
        pnl_series(losses), models=models, **{"levels": LEVELS, "window": WINDOW, "bands": "none", **options}
    )


def model(process="GARCH", **options) -> dict[str, object]:
    return {"name": f"library {process}", "filter": f"library:{process}", **options}


def follow(pasts, process="GARCH", mean="constant", innovations="normal", refit=None) -> library.Followed:
    spec = FilterSpec("library", mean=mean, innovations=innovations, process=process)
    every = np.ones(len(pasts), dtype=bool) if refit is None else np.array(refit)
    return library.follow(np.ascontiguousarray(pasts), spec, np.arange(len(pasts)), every)


def pasts_of(losses, n, window=WINDOW) -> np.ndarray:
    return np.lib.stride_tricks.sliding_window_view(losses, window)[:n]


def no_extra_data(process: type) -> bool:
    parameters = list(inspect.signature(process.__init__).parameters.values())[1:]
    return all(p.default is not inspect.Parameter.empty for p in parameters)


def test_the_processes_offered_are_those_of_arch_that_estimate_and_need_no_further_data():
    processes = {
        name: found
        for name, found in vars(arch).items()
        if inspect.isclass(found) and issubclass(found, arch.volatility.VolatilityProcess) and no_extra_data(found)
    }
    assert set(PROCESSES) == {name for name, found in processes.items() if found().num_params > 0}
    for name, process in PROCESSES.items():
        defaults = {k: p.default for k, p in inspect.signature(processes[name].__init__).parameters.items()}
        orders = [f"{k} = {v:g}" for k, v in defaults.items() if type(v) in (int, float)]
        assert process.orders == (", ".join(orders) or "no orders")


@pytest.mark.parametrize("mean", ["zero", "constant", "ar1", "ar1-no-intercept"])
def test_garch_agrees_with_our_own(mean):
    """Tolerance: the stopping error of arch's optimiser (its ftol of 1e-6) in sigma."""
    losses = garch_t(4 + 1000, 3)[0]
    same = {"mean": mean, "tail": "normal"}
    ours = {"name": "ours", "filter": "garch", "start": "ewma-75", **same}
    table = forecast(losses, [model(**same), ours], window=1000)
    wide = table[table["level"] == 0.99].pivot_table(index="date", columns="model", values=["sigma", "mean"])
    assert len(wide) == 4
    assert (table["status"] == "ok").all()
    np.testing.assert_allclose(wide["sigma"]["library GARCH"], wide["sigma"]["ours"], rtol=2e-4)
    tolerance = 2e-3 * wide["sigma"]["ours"].mean()
    np.testing.assert_allclose(wide["mean"].get("library GARCH", 0), wide["mean"].get("ours", 0), atol=tolerance)


@pytest.mark.parametrize(("innovations", "mean"), [("t", "constant"), ("skew-t", "ar1")])
def test_shape_and_fits_of_losses_agree_with_our_own(innovations, mean):
    moves = garch_t(1001, 8)[0]
    losses = np.where(moves > 0, 1.3 * moves, moves)  # the longer tail is that of losses
    pnl = pnl_series(1e5 * losses)
    known = pd.DataFrame({"date": pnl.index, "known_on": pnl.index, "loss": -pnl.to_numpy()})
    history = DeskHistory("d", known, pnl.index.to_numpy().astype("datetime64[D]"), {})
    options = {"mean": mean, "innovations": innovations, "tail": innovations}
    kinds = ({"filter": "library:GARCH"}, {"filter": "garch", "start": "ewma-75"})
    found = [forecast_group(history, [resolve({**k, **options}, levels=LEVELS)], LEVELS)[1].iloc[0] for k in kinds]
    theirs, ours = found
    np.testing.assert_allclose(theirs["loglik"], ours["loglik"], atol=1e-3)
    np.testing.assert_allclose(theirs["nu"], ours["nu"], rtol=0.01)
    np.testing.assert_allclose(theirs["intercept"], ours["intercept"], rtol=0.01)
    for name in ("ar", "alpha", "beta"):
        np.testing.assert_allclose(theirs[name], ours[name], atol=2e-3)
    unit = float(theirs["other_parameters"].removeprefix("unit "))
    np.testing.assert_allclose(unit, np.std(1e5 * losses[:1000]), rtol=1e-8)
    np.testing.assert_allclose(theirs["omega"] * unit**2, ours["omega"], rtol=0.02)
    if innovations == "skew-t":
        assert ours["lambda"] > 0.05
        np.testing.assert_allclose(theirs["lambda"], ours["lambda"], atol=2e-3)


def test_parameters_without_a_column_stand_as_text():
    found = follow(pasts_of(garch_t(WINDOW, 5)[0], 1), "APARCH")
    columns = library.columns(found.fits)
    assert [part.split()[0] for part in columns["other_parameters"][0].split("; ")] == ["delta", "unit"]
    assert np.isfinite([columns[name][0] for name in ("intercept", "omega", "alpha", "gamma", "beta")]).all()
    assert np.isnan(columns["nu"]).all()


def test_the_asymmetry_of_egarch_kin_acts_on_losses():
    """APARCH on losses that raise volatility twice as much as gains: gamma, of returns below zero, is positive."""
    rng, x, h = np.random.default_rng(4), np.empty(3000), 1.0
    for t in range(x.size):
        x[t] = np.sqrt(h) * rng.standard_normal()
        h = 0.05 + (0.15 if x[t] > 0 else 0.02) * x[t] ** 2 + 0.88 * h
    gammas = [library.columns(follow(s * x[None, :], "APARCH").fits)["gamma"][0] for s in (1, -1)]
    assert gammas[0] > 0.2
    assert gammas[1] < -0.2


@pytest.mark.parametrize("process", PROCESSES)
def test_every_process_gives_finite_forecasts(process):
    models = [model(process, innovations=law, tail="gpd", recalibrate_days=99) | {"name": law} for law in LAWS]
    table = forecast(garch_t(WINDOW + 5, 6)[0], models)
    assert len(table) == 5 * 3 * len(LEVELS)
    assert np.isfinite(table[["var", "es", "mean", "sigma", "pit_hypothetical"]]).all(axis=None)
    assert not table["status"].str.contains(FALLBACK).any()


def test_egarch_runs_daily_on_thirty_windows():
    table = forecast(garch_t(WINDOW + 30, 7)[0], [model("EGARCH", tail="gpd")])
    assert len(table) == 30 * len(LEVELS)
    assert np.isfinite(table[["var", "es", "sigma"]]).all(axis=None)
    assert not table["status"].str.contains(FALLBACK).any()
    assert table["sigma"].nunique() == 30


def test_between_recalibrations_the_last_parameters_filter_each_day():
    losses = garch_t(WINDOW + 3, 5)[0]
    found = follow(pasts_of(losses, 4), refit=[True, False, False, False])
    assert np.isfinite(found.loglik).tolist() == [True, False, False, False]
    assert [fit is found.fits[0] for fit in found.fits] == [True] * 4
    p, unit = found.fits[0].parameters, found.fits[0].unit
    # The recursion by hand from the last two days' sigmas: h = omega + alpha e^2 + beta h, in squared units.
    e = (losses[WINDOW : WINDOW + 3] - found.mean[:3]) / unit
    h = (found.sigma / unit) ** 2
    np.testing.assert_allclose(h[1:], p["omega"] + p["alpha[1]"] * e**2 + p["beta[1]"] * h[:3], rtol=1e-4)


def test_the_future_does_not_reach_the_forecast():
    losses = garch_t(WINDOW + 12, 1)[0]
    later = np.where(np.arange(losses.size) >= WINDOW + 6, 50.0 * losses[::-1], losses)
    models = [model("EGARCH", tail="gpd", recalibrate_days=5), model("GARCH", innovations="t", tail="t")]
    day = pnl_series(losses).index[WINDOW + 6]
    columns = ["date", "model", "var", "es", "mean", "sigma", "status"]
    ours, theirs = (
        t[t["date"] <= day].reset_index(drop=True)[columns] for t in map(forecast, (losses, later), [models] * 2)
    )
    assert len(ours) == 7 * 2 * len(LEVELS)
    pd.testing.assert_frame_equal(ours, theirs, check_exact=True)


def test_the_check_can_fail():
    """Negative control: another loss on the day before moves the forecast."""
    losses = garch_t(WINDOW + 1, 1)[0]
    changed = np.where(np.arange(losses.size) == WINDOW - 1, 9.0, losses)
    ours, theirs = (forecast(x, [model("EGARCH")])["var"].to_numpy() for x in (losses, changed))
    assert (ours != theirs).all()


def test_the_unit_of_the_pnl_does_not_lead_the_search():
    losses = garch_t(WINDOW + 3, 12)[0]
    ours, theirs = (follow(c * pasts_of(losses, 4), "EGARCH", "ar1", "t") for c in (1.0, 1e7 / 3))
    np.testing.assert_allclose(theirs.sigma, 1e7 / 3 * ours.sigma, rtol=1e-9)
    np.testing.assert_allclose(theirs.residuals, ours.residuals, rtol=1e-9, atol=1e-9)


@pytest.fixture
def failing(monkeypatch) -> list[bool]:
    """Let arch say of each fit, in turn, whether it converged."""
    says, fit = [], library._fit

    def said(*arguments):
        return fit(*arguments) if says.pop(0) else None

    monkeypatch.setattr(library, "_fit", said)
    return says


def test_a_fit_that_fails_takes_the_last_good_parameters(failing):
    failing += [True, False, True]
    found = follow(pasts_of(garch_t(WINDOW + 3, 5)[0], 3))
    assert (found.status & library.LAST_GOOD > 0).tolist() == [False, True, False]
    assert found.fits[1] is found.fits[0]
    assert np.isfinite(found.sigma).all()


def test_without_a_good_fit_the_day_is_forecast_by_ewma(failing):
    failing += [False, True]
    losses = garch_t(WINDOW + 3, 5)[0]
    found = follow(pasts_of(losses, 3), refit=[True, False, True])
    assert (found.status & library.AS_EWMA > 0).tolist() == [True, True, False]
    assert found.fits[:2] == [None, None]
    of_ewma = forecast(losses[:-1], [{"name": "e", "filter": "ewma"}])
    np.testing.assert_allclose(found.sigma[:2], of_ewma.loc[of_ewma["level"] == 0.99, "sigma"], rtol=1e-12)


def test_a_filter_that_gives_no_number_is_a_fallback_of_that_day_alone(monkeypatch):
    works, calls = library._filter, iter([True, False, True])
    monkeypatch.setattr(library, "_filter", lambda *a: next(calls) and works(*a))
    found = follow(pasts_of(garch_t(WINDOW + 2, 5)[0], 3), refit=[True, False, False])
    assert (found.status & library.AS_EWMA > 0).tolist() == [False, True, False]
    assert np.isfinite(found.sigma).all()
    assert found.fits[2] is found.fits[0]


def test_what_arch_does_not_call_converged_is_no_fit(monkeypatch):
    past = garch_t(WINDOW, 5)[0]
    spec = FilterSpec("library", mean="constant", innovations="normal", process="APARCH")
    assert library._fit(past, float(past.std()), spec) is not None
    monkeypatch.setattr(library, "ITERATIONS", 2)
    assert library._fit(past, float(past.std()), spec) is None


def test_a_search_that_ran_astray_is_no_fit():
    """By arch 8.0: it sends the mean of this past to -712 standard deviations, log-likelihood -1,072,902."""
    past = garch_t(WINDOW, 2)[0]
    spec = FilterSpec("library", mean="constant", innovations="normal", process="APARCH")
    found = library._model(np.round(-past / past.std(), library.DECIMALS), spec)
    found = found.fit(disp="off", show_warning=False, options={"maxiter": library.ITERATIONS})
    assert found.convergence_flag != 0 or found.loglikelihood < -1000
    assert library._fit(past, float(past.std()), spec) is None


def test_a_fit_below_an_unchanging_variance_is_refused_whatever_arch_says():
    """Here arch 8.0 calls HARCH converged at a log-likelihood of -426.4; ARCH, the same process, reaches -422.6."""
    past = garch_t(700, 7)[0][330:630]
    harch, its_kin = (
        FilterSpec("library", mean="ar1", innovations="normal", process=process) for process in ("HARCH", "ARCH")
    )
    found = library._model(np.round(-past / past.std(), library.DECIMALS), harch)
    found = found.fit(disp="off", show_warning=False, options={"maxiter": library.ITERATIONS})
    assert found.convergence_flag == 0
    assert found.loglikelihood < -426
    assert library._fit(past, float(past.std()), harch) is None
    assert library._fit(past, float(past.std()), its_kin) is not None


def test_a_constant_past_is_a_stated_fallback():
    table = forecast(np.full(WINDOW + 2, 4.2), [model("EGARCH")])
    assert table["status"].str.contains(f"{FALLBACK}: constant past").all()
    np.testing.assert_allclose(table["var"], 4.2)


def test_arch_is_imported_only_once_a_model_asks_for_it():
    code = (
        "import sys; from backtest.forecasting.models import resolve; "
        "m = resolve({'filter': 'library:EGARCH'}, levels=[0.99]); import backtest; "
        "print('arch' in sys.modules, 'slower' in m.line)"
    )
    said = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout
    assert said.split() == ["False", "True"]
