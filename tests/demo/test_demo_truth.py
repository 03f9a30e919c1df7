"""The stored truth is the law of the P&L, and that law has the features the story tells of."""

import importlib.util
import sys

import numpy as np
import pandas as pd
import pytest
from scipy import stats

LEVELS = {"975": 0.975, "99": 0.99}
STRESS = [("2020-09-14", "2020-11-20"), ("2025-03-10", "2025-05-16")]


@pytest.fixture(scope="module")
def world(demo):
    """Load the constants of the demo's world (data_demo is no package)."""
    spec = importlib.util.spec_from_file_location("demo_world", demo.folder / "world.py")
    module = importlib.util.module_from_spec(spec)
    sys.modules["demo_world"] = module
    spec.loader.exec_module(module)
    yield module
    del sys.modules["demo_world"]


@pytest.fixture(scope="module")
def draws(world):
    """Draw each desk's shock a million times, by the formula of world.py's docstring written again."""
    rng = np.random.default_rng(7)
    n = 1_000_000
    V = rng.choice(world.CLASS_VARIANCE, p=world.CLASS_SHARE, size=n)
    x = (np.sqrt(V) * rng.standard_normal(n) - world.SKEW * (V - 1)) / world.UNIT
    shocks = {}
    for book in world.BOOKS[:-1]:
        own = np.sqrt(V) * rng.standard_normal(n) / world.UNIT
        ordinary = book.common * x + np.sqrt(1 - book.common**2) * own - book.skew * (V - 1)
        spike = (rng.random(n) < book.spikes) * (world.SPIKE + world.SPIKE_SD * rng.standard_normal(n))
        shocks[book.name] = book.calm * ordinary - spike + book.spikes * world.SPIKE
    return pd.DataFrame(shocks)


def assert_law(pnl, truth):
    """Compare draws of a day's P&L with the stored mean, sigma, VaR and ES of that day."""
    loss = -pnl
    assert truth["mean"] == pytest.approx(-loss.mean(), abs=4 * loss.std() / np.sqrt(loss.size))
    assert truth["sigma"] == pytest.approx(loss.std(), rel=0.01)
    for name, level in LEVELS.items():
        var = np.quantile(loss, level)
        assert truth[f"var_{name}"] == pytest.approx(var, rel=0.01)
        assert truth[f"es_{name}"] == pytest.approx(loss[loss > var].mean(), rel=0.01)


def standardised(demo):
    return (demo.loss() + demo.true("mean")) / demo.true("sigma")


@pytest.mark.parametrize("day", ["2019-07-01", "2020-10-15", "2025-04-07", "2025-12-31"])
def test_stored_law_of_firm_and_desks_is_that_of_simulated_draws(demo, world, draws, day):
    truth = demo.truth[demo.truth["date"] == day].set_index("desk")
    total = 0.0
    for book in world.BOOKS[:-1]:
        if book.name in truth.index:
            row = truth.loc[book.name]
            pnl = row["mean"] + row["sigma"] * (draws[book.name] / draws[book.name].std())
            assert_law(pnl, row)
            total = total + pnl
    assert_law(total, truth.loc["Firm"])


@pytest.mark.parametrize("name", LEVELS)
def test_firm_exceeds_its_true_var_within_binomial_limits(demo, name):
    hits = demo.loss()["Firm"] > demo.true(f"var_{name}")["Firm"]
    low, high = stats.binom.interval(0.95, hits.size, 1 - LEVELS[name])
    assert low <= hits.sum() <= high


@pytest.mark.parametrize("name", LEVELS)
def test_desks_exceed_their_true_var_within_binomial_limits_for_seven(demo, name):
    loss, var = demo.loss(), demo.true(f"var_{name}")
    for desk in demo.names[1:]:
        days = loss[desk].dropna().index
        low, high = stats.binom.interval(1 - 0.05 / 7, days.size, 1 - LEVELS[name])
        assert low <= (loss[desk] > var[desk]).sum() <= high, desk


@pytest.mark.parametrize("name", LEVELS)
def test_firm_losses_beyond_the_true_var_average_the_true_es(demo, name):
    loss, var, es = demo.loss()["Firm"], demo.true(f"var_{name}")["Firm"], demo.true(f"es_{name}")["Firm"]
    excess = ((loss - es) / demo.true("sigma")["Firm"])[loss > var]
    assert abs(stats.ttest_1samp(excess, 0.0).statistic) < 2.5


def test_reported_var_of_the_firm_is_exceeded_too_often_in_the_year_and_the_true_var_is_not(demo):
    limit = stats.binom.ppf(0.95, demo.last.size, 0.01)
    true = demo.loss()["Firm"] > demo.true("var_99")["Firm"]
    assert demo.exceptions().loc[demo.last, "Firm"].sum() > limit
    assert true[demo.last].sum() <= limit


def test_innovations_are_heavy_tailed_and_loss_heavy(demo):
    residuals = standardised(demo)["Firm"]
    assert stats.kurtosis(residuals) > 1.0
    assert stats.skew(residuals) > 0.1
    assert stats.jarque_bera(residuals).pvalue < 1e-6


def test_residuals_of_the_truth_have_no_volatility_left_but_losses_do(demo):
    residuals, losses = standardised(demo)["Firm"] ** 2, demo.loss()["Firm"] ** 2
    limit = 3 / np.sqrt(losses.size)
    assert stats.spearmanr(losses[1:], losses[:-1]).statistic > limit
    assert abs(stats.spearmanr(residuals[1:], residuals[:-1]).statistic) < limit


def test_volatility_rises_more_after_losses_than_after_gains(demo):
    growth = np.log(demo.true("sigma")["Firm"]).diff().shift(-1)
    residual = standardised(demo)["Firm"]
    losses, gains = growth[residual > 1], growth[residual < -1]
    assert losses.median() > gains.median()
    assert stats.mannwhitneyu(losses.dropna(), gains.dropna(), alternative="greater").pvalue < 1e-6


@pytest.mark.parametrize("episode", STRESS)
def test_volatility_more_than_doubles_in_each_stress_episode(demo, episode):
    sigma = demo.true("sigma")["Firm"]
    before = sigma[: pd.Timestamp(episode[0]) - pd.Timedelta(days=1)].iloc[-60:]
    assert sigma.loc[slice(*episode)].median() > 2 * before.median()


def test_one_episode_lies_in_the_middle_and_one_in_the_last_year(demo):
    places = [demo.days.get_indexer([pd.Timestamp(first)])[0] / demo.days.size for first, _ in STRESS]
    assert 0.4 < places[0] < 0.6
    assert pd.Timestamp(STRESS[1][0]) > demo.last[0]


def test_all_desks_but_power_and_gas_share_one_volatility(demo, world):
    sigma = np.log(demo.true("sigma"))
    rates = sigma["Rates"].diff()
    for book in world.BOOKS[1:-1]:
        moves = sigma[book.name].diff().drop(pd.Timestamp("2025-07-01")).dropna()
        assert np.abs(moves - book.power * rates.loc[moves.index]).max() < 1e-4, book.name


def test_worst_loss_of_the_firm_is_at_most_five_times_its_median_var(demo):
    assert demo.loss()["Firm"].max() <= 5 * demo.forecast("var_99_1d")["Firm"].median()
