"""A model as a law: what it draws is what its forecasts say, and its histories follow its recursion."""

import numpy as np
import pandas as pd
import pytest

from backtest.explaining.model_law import NOT_A_LAW, Innovations, ModelLaw, model_law
from backtest.forecasting.engine import DeskHistory, forecast_group
from backtest.forecasting.models import Model, resolve
from backtest.records import DeskVectors
from tests.reference.datasets import garch_t

LEVELS = (0.975, 0.99)
WINDOW, TARGETS = 300, 12
OF_RANKS = {"historical": {}, "age-weighted": {"filter": "none", "tail": "age-weighted"}, "filtered-historical": {}}
OF_LAWS = {
    "none t": {"filter": "none", "tail": "t"},
    "none normal": {"filter": "none", "tail": "normal"},
    "ewma-normal": {},
    "garch-normal": {},
    "garch-skew-t": {},
}
OF_TAILS = {"unconditional-evt": {}, "conditional-evt": {}, "gjr gpd": {"filter": "gjr", "tail": "gpd"}}


def model_of(name: str, options: dict[str, str]) -> Model:
    return resolve({"name": name, **options} if options else name, levels=LEVELS, window=WINDOW)


def desk_of(losses: np.ndarray, realised: np.ndarray | None = None) -> DeskHistory:
    days = pd.bdate_range("2019-03-04", periods=len(losses))
    calendar = days.to_numpy().astype("datetime64[D]")
    known = pd.DataFrame({"date": days, "known_on": days, "loss": losses})
    seen = pd.Series(losses if realised is None else realised, index=calendar)
    return DeskHistory("Wool", known, calendar, {"hypothetical": seen})


@pytest.fixture(scope="module")
def losses() -> np.ndarray:
    return garch_t(WINDOW + TARGETS, 5)[0]


def last_forecast(losses: np.ndarray, model: Model, loss: float = 0.0) -> pd.DataFrame:
    """Return the forecast of the last day, whose realised loss is ``loss``, one row a level."""
    realised = losses.copy()
    realised[-1] = loss
    return forecast_group(desk_of(losses, realised), [model], LEVELS)[0].tail(len(LEVELS))


def law_of(losses: np.ndarray, model: Model) -> ModelLaw:
    law, missing = model_law(desk_of(losses), model, np.array(LEVELS))
    assert law is not None, missing
    return law


def drawn(losses: np.ndarray, model: Model, uniform: float) -> float:
    """Return the loss of the last day that the law draws at a uniform number."""
    row = last_forecast(losses, model).iloc[0]
    mean, sigma = (row["mean"], row["sigma"]) if model.filter.kind != "none" else (0.0, 1.0)
    return float(mean + sigma * law_of(losses, model).innovations.quantile(np.array([uniform]))[0])


@pytest.mark.parametrize(("name", "options"), [*OF_LAWS.items(), *OF_TAILS.items()])
def test_a_draw_at_the_level_is_the_forecast_var(losses, name, options):
    model = model_of(name, options)
    for level, var in last_forecast(losses, model)[["level", "var"]].to_numpy():
        assert drawn(losses, model, level) == pytest.approx(var, rel=1e-9)


@pytest.mark.parametrize("uniform", [0.03, 0.5, 0.93, 0.985, 0.9995])
@pytest.mark.parametrize(("name", "options"), [*OF_LAWS.items(), *OF_TAILS.items(), *OF_RANKS.items()])
def test_the_pit_of_a_draw_is_the_number_it_was_drawn_at(losses, name, options, uniform):
    model = model_of(name, options)
    pit = last_forecast(losses, model, drawn(losses, model, uniform))["pit_hypothetical"].iloc[0]
    by_rank = name in OF_RANKS or (name in OF_TAILS and uniform < 0.9)
    # a rank moves in steps, of 1/(n + 1), by age of up to a hundredth: no nearer than one
    step = 0.011 if name == "age-weighted" else 1.0 / (WINDOW + 1)
    assert pit == pytest.approx(uniform, abs=step) if by_rank else pit == pytest.approx(uniform, abs=1e-9)


@pytest.mark.parametrize(("name", "options"), [*OF_RANKS.items(), *OF_TAILS.items()])
def test_draws_do_not_tie(losses, name, options):
    uniform = np.linspace(0.0005, 0.9995, 2001)
    assert np.all(np.diff(law_of(losses, model_of(name, options)).innovations.quantile(uniform)) > 0.0)


def test_residuals_are_spread_half_way_to_their_neighbours():
    # four losses: each has a quarter, in its middle the loss itself, and the last reaches as far out as in
    law = law_of(np.tile([4.0, 1.0, 2.0, 9.0], 20), resolve({"window": 50}, levels=LEVELS)).innovations
    few = Innovations(places=np.array([0, 0.125, 0.375, 0.625, 0.875, 1]), heights=np.array([0.5, 1, 2, 4, 9, 11.5]))
    np.testing.assert_allclose(few.quantile(np.array([0.125, 0.25, 0.875, 0.9375])), [1.0, 1.5, 9.0, 10.25])
    assert law.heights[0] == 1.0  # ties in the data stay ties
    assert law.quantile(np.array([0.1, 0.5]))[0] == 1.0


def test_a_history_follows_the_recursion():
    c, phi, omega, alpha, gamma, beta = 0.1, 0.2, 0.05, 0.07, 0.06, 0.85
    law = ModelLaw(
        np.array([c, phi, omega, alpha, gamma, beta]), 2.0, Innovations(laws=np.array([0.0, 1.0, np.inf, 0.0])),
        np.datetime64("2020-01-06"), "",
    )  # fmt: skip
    uniform = np.random.default_rng(8).random(40)
    z = law.innovations.quantile(uniform)
    h, last, plain = omega + (alpha + gamma / 2 + beta) * 2.0, 0.0, []
    for value in z:
        e = np.sqrt(h) * value
        last = c + phi * last + e
        plain.append(last)
        h = omega + (alpha + gamma * (e > 0)) * e * e + beta * h
    np.testing.assert_allclose(law.history(uniform), plain, rtol=1e-12)


def test_parameters_are_those_of_the_last_day(losses):
    model = model_of("garch-normal", {})
    _, fits = forecast_group(desk_of(losses), [model], LEVELS)
    names = ["intercept", "ar", "omega", "alpha", "beta"]
    np.testing.assert_array_equal(law_of(losses, model).motion[[0, 1, 2, 3, 5]], fits[names].iloc[-1].to_numpy(float))


@pytest.mark.parametrize("options", [{"filter": "reported"}, {"filter": "library:FIGARCH"}])
def test_a_filter_whose_recursion_cannot_run_on_is_no_law(losses, options):
    assert model_law(desk_of(losses), resolve({"window": 250, **options}, levels=LEVELS), np.array(LEVELS)) == (
        None, NOT_A_LAW,
    )  # fmt: skip


def test_a_model_that_is_not_ours_is_no_law(losses):
    assert model_law(desk_of(losses), None, np.array(LEVELS)) == (None, NOT_A_LAW)


def test_a_model_that_learns_from_vectors_is_no_law(losses):
    desk = desk_of(losses)
    day = desk.calendar[-1:]
    vectors = DeskVectors(day, np.array([0]), np.array([len(losses) - 1]), desk.calendar[:-1], -losses[:-1])
    with_vectors = DeskHistory("Wool", desk.known, desk.calendar, desk.realised, vectors)
    assert model_law(with_vectors, model_of("historical", {}), np.array(LEVELS)) == (None, NOT_A_LAW)


def test_a_past_that_does_not_vary_is_no_law():
    _, missing = model_law(desk_of(np.full(320, 1.5)), model_of("historical", {}), np.array(LEVELS))
    assert missing == "not defined: the last past does not vary"


def test_a_desk_shorter_than_the_window_has_no_law(losses):
    _, missing = model_law(desk_of(losses[:200]), model_of("historical", {}), np.array(LEVELS))
    assert missing == "not defined: needs 300 losses"
