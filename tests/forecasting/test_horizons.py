"""VaR and ES over several days: against closed forms, check values and Table 5 of McNeil & Frey (2000)."""

import numpy as np
import pandas as pd
import pytest
from scipy import stats

import backtest
from backtest.errors import StudyError
from backtest.forecasting.asked import ask
from backtest.forecasting.filters import apply_filter
from backtest.forecasting.models import resolve
from tests.reference.datasets import bmw, garch_t, pnl_series, sp500

A = {"name": "A", "filter": "garch", "mean": "ar1-no-intercept", "tail": "gpd"}


def after(losses: pd.Series) -> list[pd.Timestamp]:
    """Return the days of a series and one more, the target of the forecast from all of it."""
    return [*losses.index, losses.index[-1] + pd.tseries.offsets.BDay()]


def latest(losses: np.ndarray, model, horizons=(1, 10), paths=100_000, **options) -> pd.DataFrame:
    loss = -pnl_series(losses)
    made = backtest.forecast(
        -loss, models=[model], window=len(losses), calendar=after(loss), horizons=horizons, paths=paths, **options
    )
    return made.set_index(["model", "level", "horizon"])


def test_several_days_of_the_sp500_agree_with_an_independent_simulation():
    # 100,000 paths of the last 1,000 losses of the series in arch.data.sp500, by another program: h = 1 .975 VaR 4.205
    # (closed form 4.2068) and ES 5.946, h = 10 VaR .975 11.965, .99 16.662, ES .975 18.126. Tolerance: both
    # simulations' errors (1% of VaR, 1.5% of ES) and, of VaR, how the tail of the sums is read (1%).
    loss = sp500().iloc[-1000:]
    model = {"name": "m", "filter": "garch", "start": "ewma-75", "tail": "gpd"}
    made = backtest.forecast(-loss, models=[model], calendar=after(loss), horizons=[1, 10], paths=100_000)
    at = made.set_index(["model", "level", "horizon"])
    assert at.loc[("m", 0.975, 1), "var"] == pytest.approx(4.2068, rel=0.004)
    assert at.loc[("m", 0.975, 10), "var"] == pytest.approx(11.965, rel=0.02)
    assert at.loc[("m", 0.99, 10), "var"] == pytest.approx(16.662, rel=0.02)
    assert at.loc[("m", 0.975, 10), "es"] == pytest.approx(18.126, rel=0.025)
    assert at.loc[("m sqrt-time", 0.975, 10), "var"] == pytest.approx(13.30, rel=0.004)
    assert at.loc[("m sqrt-time", 0.975, 10), "var"] / at.loc[("m", 0.975, 10), "var"] > 1.05


def test_normal_losses_follow_the_root_of_time_about_their_mean():
    x = np.random.default_rng(1).standard_normal(1000) * 2 + 0.5
    at = latest(x, {"name": "m", "tail": "normal"})
    z, h = stats.norm.ppf(0.99), 10
    exact = h * x.mean() + np.sqrt(h) * x.std() * z
    assert at.loc[("m", 0.99, 10), "var"] == pytest.approx(exact, rel=0.01)
    assert at.loc[("m", 0.99, 10), "mean"] == pytest.approx(h * x.mean(), abs=0.1)
    assert at.loc[("m", 0.99, 10), "sigma"] == pytest.approx(np.sqrt(h) * x.std(), rel=0.01)


def test_heavy_tails_grow_more_slowly_than_the_root_of_time():
    # Independent t4 losses, 10 days: VaR.99 is 2.887 times that of a day, not 3.162 (simulated independently).
    x = stats.t.ppf((np.arange(1000) + 0.5) / 1000, 4)
    at = latest(np.random.default_rng(2).permutation(x), "unconditional-evt")
    one = at.loc[("unconditional-evt", 0.99, 1), "var"]
    assert at.loc[("unconditional-evt", 0.99, 10), "var"] / one == pytest.approx(2.887, rel=0.02)
    assert at.loc[("unconditional-evt sqrt-time", 0.99, 10), "var"] / one == pytest.approx(3.1623, rel=1e-4)


def test_the_variance_of_a_garch_sum_is_that_of_its_parameters():
    loss = -pnl_series(garch_t(600, 3)[0])
    model = {"name": "m", "filter": "garch", "mean": "zero", "tail": "normal"}
    at = latest(loss.to_numpy(), model)
    spec = resolve(model, levels=(0.99,)).filter
    fitted = apply_filter(loss.to_numpy()[None], spec, np.array([0]), np.array([True]))
    omega, alpha, beta = (fitted.fits[k][0] for k in ("omega", "alpha", "beta"))
    h, total = fitted.sigma[0] ** 2, 0.0
    for _ in range(10):
        total += h
        h = omega + (alpha + beta) * h
    assert at.loc[("m", 0.99, 10), "sigma"] == pytest.approx(np.sqrt(total), rel=0.01)


def test_a_constant_past_repeats_itself():
    at = latest(np.full(300, 4.2), "conditional-evt", paths=1000)
    np.testing.assert_allclose(at.loc[("conditional-evt", 0.99, 10), ["var", "es"]].astype(float), 42, rtol=1e-12)


def test_longer_rows_have_no_pit_and_the_status_of_the_day():
    made = backtest.forecast(
        pnl_series(garch_t(320, 4)[0]),
        models=["conditional-evt", "historical"],
        window=300,
        horizons=[10, 5],
        paths=1000,
    )
    assert sorted(made["horizon"].unique()) == [1, 5, 10]
    assert set(made["model"]) == {m + s for m in ("conditional-evt", "historical") for s in ("", " sqrt-time")}
    longer = made[made["horizon"] > 1]
    assert longer[["pit_hypothetical", "shape", "threshold"]].isna().all(axis=None)
    one = made[made["horizon"] == 1].set_index(["date", "model", "level"])["status"]
    own = longer[~longer["model"].str.endswith("sqrt-time")]
    assert (own["status"].to_numpy() == one.reindex(pd.MultiIndex.from_frame(own[["date", "model", "level"]]))).all()


def test_judging_reads_one_day_rows_only():
    pnl = pnl_series(garch_t(420, 5)[0])
    options = {"models": ["historical"], "window": 300}
    plain = backtest.judge(pnl, backtest.forecast(pnl, **options), simulations=199)
    both = backtest.judge(pnl, backtest.forecast(pnl, **options, horizons=[10], paths=1000), simulations=199)
    pd.testing.assert_frame_equal(plain, both)


def test_draws_depend_on_seed_and_day_alone():
    pnl = pnl_series(garch_t(330, 6)[0])
    options = {"models": ["filtered-historical"], "window": 300, "horizons": [5], "paths": 1000}
    made = backtest.forecast(pnl, **options)
    fewer = backtest.forecast(pnl.iloc[:320], **options)
    pd.testing.assert_frame_equal(made[made["date"] <= fewer["date"].max()].reset_index(drop=True), fewer)
    other = backtest.forecast(pnl, **options, seed=2)
    far = (made["horizon"] == 5) & (made["model"] == "filtered-historical")
    assert (made.loc[far, "var"] != other.loc[far, "var"]).all()
    assert (made.loc[~far, "var"] == other.loc[~far, "var"]).all()


@pytest.mark.parametrize(
    ("options", "said"),
    [
        ({"bands": "profile"}, "unknown bands"),
        ({"horizons": [0]}, "forecast.horizons: .* found 0 "),
        ({"horizons": [2.5]}, "forecast.horizons: .* found 2.5 "),
        ({"horizons": [251]}, "at least 1, at most 250"),
        ({"paths": 10}, "at least 1000"),
        ({"bootstraps": 5}, "at least 99"),
        ({"bootstrap_days": 0}, "at least 1"),
    ],
)
def test_what_cannot_be_simulated_is_refused(options, said):
    with pytest.raises(StudyError, match=said):
        ask(**options)


@pytest.fixture(scope="module")
def table_5() -> pd.Series:
    """Counts of losses over h overlapping days beyond their VaR, BMW, 1,000 paths a day as in the paper."""
    loss = bmw()
    made = backtest.forecast(-loss, models=[A], levels=(0.95, 0.99), horizons=[5, 10], paths=1000)
    counts = []
    for h in (5, 10):
        part = made[made["horizon"] == h]
        realised = loss[::-1].rolling(h).sum()[::-1].reindex(part["date"]).to_numpy()
        counts.append(part.assign(hit=realised > part["var"].to_numpy(), n=~np.isnan(realised)))
    grouped = pd.concat(counts).groupby(["model", "horizon", "level"])
    # The paper prints 5,141 and 5,136 days; its own set of days, and ours, has one more.
    days = grouped["n"].sum()
    assert (days[("A", 5, 0.95)], days[("A", 10, 0.95)]) == (5142, 5137)
    return grouped["hit"].sum()


@pytest.mark.slow
@pytest.mark.parametrize(
    ("model", "horizon", "level", "published", "within"),
    [
        # Table 5, BMW. Root of time +-3; simulation +-15 at .95 and +-12 at .99: seeds, start-up and mean equation.
        ("A sqrt-time", 5, 0.95, 322, 3),
        ("A sqrt-time", 5, 0.99, 65, 3),
        ("A sqrt-time", 10, 0.95, 315, 3),
        ("A sqrt-time", 10, 0.99, 70, 3),
        ("A", 5, 0.95, 231, 15),
        ("A", 5, 0.99, 57, 12),
        ("A", 10, 0.95, 231, 15),
        ("A", 10, 0.99, 53, 12),
    ],
)
def test_table_5(table_5, model, horizon, level, published, within):
    assert abs(table_5[(model, horizon, level)] - published) <= within
