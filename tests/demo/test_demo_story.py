"""The demo's story, point by point, counted from the files with pandas, numpy and scipy alone."""

import numpy as np
import pandas as pd
import pytest
from scipy import stats

STRESS = {"middle": ("2020-09-14", "2020-11-20"), "last": ("2025-03-10", "2025-05-16")}
MODEL_CHANGE = pd.Timestamp("2024-07-01")
METALS_HALVED = pd.Timestamp("2025-07-01")
CREDIT_TWICE = pd.Timestamp("2024-10-01")


def lower_end_of_multiple(ratios, level):
    """Return x_(r), r the largest with P(Bin(n, level) <= r-1) <= .025: lower end of the interval for the quantile."""
    n = len(ratios)
    r = max(r for r in range(1, n + 1) if stats.binom.cdf(r - 1, n, level) <= 0.025)
    return np.sort(ratios)[r - 1]


def attribution(demo, desk):
    """Return Spearman's correlation and the largest gap in days, of 250, of the two distribution functions."""
    h, r = (demo.loss(kind).loc[demo.last, desk].dropna() for kind in ("hypothetical", "risk_theoretical"))
    gap = stats.ks_2samp(h, r).statistic * len(h)
    return stats.spearmanr(h, r).statistic, round(gap, 6)


def empirical(losses, level):
    """Return the ceil(nq)-th smallest loss, and the integral of the step function beyond it over 1 - q."""
    x = np.sort(losses)
    edges = np.arange(x.size + 1) / x.size
    weight = np.clip(edges[1:], level, None) - np.clip(edges[:-1], level, None)
    return x[int(np.ceil(round(x.size * level, 9))) - 1], float(weight @ x) / (1 - level)


def past_known_before(demo, desk, day, window):
    """Return the last ``window`` losses of a desk that were known the evening before ``day``."""
    rows = demo.rows[(demo.rows["desk"] == desk) & (demo.rows["date"] < day)]
    known = rows[rows["known_on"].fillna(rows["date"]) < day]
    return -known.drop_duplicates("date", keep="last")["hypothetical"].to_numpy()[-window:]


def reperformed_over_reported(demo, desk, days, window):
    """Return VaR 97.5, VaR 99 and ES 97.5 performed again, over what was reported; one row a day."""
    reported = demo.reported[demo.reported["desk"] == desk].set_index("date").loc[days]
    again = []
    for day in days:
        past = past_known_before(demo, desk, day, window)
        assert past.size == window
        var, es = empirical(past, 0.975)
        again.append([var, empirical(past, 0.99)[0], es])
    return np.array(again) / reported[["var_975_1d", "var_99_1d", "es_975_1d"]].to_numpy()


def closeness(hits, gap=10):
    """Return how many pairs of exceptions lie at most ``gap`` days apart."""
    places = np.flatnonzero(hits)
    return int((np.abs(np.subtract.outer(places, places)) <= gap).sum() - places.size) // 2


def permutation_p(hits, rng, draws=999):
    """Return the share of orders of the days with pairs at least as close, the observed order counted in."""
    seen = closeness(hits)
    return (1 + sum(closeness(rng.permutation(hits)) >= seen for _ in range(draws))) / (draws + 1)


def test_firm_is_amber_on_hypothetical_pnl(demo):
    assert 5 <= demo.exceptions().loc[demo.last, "Firm"].sum() <= 9


def test_firm_has_exactly_one_exception_more_on_actual_pnl_and_stays_amber(demo):
    hypothetical, actual = (demo.exceptions(kind).loc[demo.last, "Firm"] for kind in ("hypothetical", "actual"))
    assert actual.sum() == hypothetical.sum() + 1 <= 9


def test_the_additional_actual_exception_is_the_intraday_loss(demo):
    hypothetical, actual = (demo.exceptions(kind).loc[demo.last, "Firm"] for kind in ("hypothetical", "actual"))
    assert list(demo.last[actual & ~hypothetical]) == [pd.Timestamp("2025-02-05")]
    assert not (hypothetical & ~actual).any()


def test_firm_exceptions_of_the_year_cluster_in_the_stress_episode(demo):
    hits = demo.exceptions().loc[demo.last, "Firm"]
    episode = slice(*STRESS["last"])
    assert hits.loc[episode].sum() >= 0.6 * hits.sum()
    assert hits.loc[episode].size < 0.2 * hits.size


def test_reported_exceptions_of_the_firm_cluster_over_eleven_years(demo, rng):
    assert permutation_p(demo.exceptions()["Firm"].to_numpy(), rng) < 0.01


def test_exceptions_of_the_true_var_do_not_cluster(demo, rng):
    hits = (demo.loss()["Firm"] > demo.true("var_99")["Firm"]).to_numpy()
    assert permutation_p(hits, rng) > 0.05


@pytest.mark.parametrize("kind", ["hypothetical", "actual"])
def test_every_desk_keeps_its_limits(demo, kind):
    missing = demo.loss(kind).loc[demo.last].isna().sum()
    assert (demo.exceptions(kind, "var_99_1d").loc[demo.last].sum() + missing).drop("Firm").le(12).all()
    assert (demo.exceptions(kind, "var_975_1d").loc[demo.last].sum() + missing).drop("Firm").le(30).all()


def test_power_and_gas_is_clearly_short_in_size(demo):
    ratios = (demo.loss() / demo.forecast("var_99_1d")).loc[demo.last, "Power and gas"]
    assert lower_end_of_multiple(ratios, 0.99) > 1.3


def test_power_and_gas_losses_go_clearly_beyond_its_expected_shortfall(demo):
    loss, es = demo.loss().loc[demo.last, "Power and gas"], demo.forecast("es_975_1d").loc[demo.last, "Power and gas"]
    beyond = demo.exceptions(column="var_975_1d").loc[demo.last, "Power and gas"]
    assert (loss[beyond] / es[beyond]).mean() > 1.2


def test_power_and_gas_var_is_far_below_the_true_one_only_since_the_credit_was_granted_twice(demo):
    multiple = (demo.true("var_99") / demo.forecast("var_99_1d"))["Power and gas"].dropna()
    assert multiple[demo.last].median() > 1.6
    assert 0.8 < multiple[:CREDIT_TWICE].median() < 1.2


def test_currencies_has_no_exception_in_the_year_and_nearly_none_in_eight(demo):
    hits = demo.exceptions()["Currencies"]
    days = demo.loss()["Currencies"].notna().sum()
    assert hits[demo.last].sum() == 0
    assert stats.binom.cdf(hits.sum(), days, 0.01) < 1e-4


def test_currencies_var_is_half_as_large_again_as_the_true_one_and_more(demo):
    multiple = (demo.forecast("var_99_1d") / demo.true("var_99"))["Currencies"].dropna()
    assert 1.5 <= multiple.median() <= 1.8


def test_credit_attribution_is_poor(demo):
    assert attribution(demo, "Credit")[0] < 0.7


def test_attribution_of_the_other_desks_is_good(demo):
    for desk in set(demo.names) - {"Firm", "Credit"}:
        correlation, gap = attribution(demo, desk)
        assert correlation > 0.8, desk
        assert gap <= 22, desk


def test_metals_positions_halve_midway_through_the_year_as_recorded(demo):
    row = demo.changes[demo.changes["kind"] == "positions"]
    assert list(zip(row["desk"], row["date"], strict=True)) == [("Metals", METALS_HALVED)]
    assert 100 <= (demo.last >= METALS_HALVED).sum() <= 150
    # Rates reacts to the common volatility in the same way, so that the ratio shows the positions alone.
    ratio = (demo.true("sigma")["Metals"] / demo.true("sigma")["Rates"]).dropna()
    after, before = ratio[METALS_HALVED:], ratio[: METALS_HALVED - pd.Timedelta(days=1)]
    np.testing.assert_allclose(after / before.mean(), 0.5, rtol=1e-4)


def test_metals_pnl_follows_its_halved_positions(demo):
    standard = ((demo.loss() + demo.true("mean")) / demo.true("sigma"))["Metals"].loc[demo.last]
    for part in (standard[METALS_HALVED:], standard[: METALS_HALVED - pd.Timedelta(days=1)]):
        assert 0.75 < part.std() < 1.25


def test_metals_var_follows_current_positions_at_once(demo):
    var = demo.forecast("var_99_1d")["Metals"]
    place = demo.days.get_loc(METALS_HALVED)
    assert var.iloc[place] / var.iloc[place - 1] == pytest.approx(0.5, rel=0.045)


@pytest.mark.parametrize("desk", ["Firm", "Rates", "Credit"])
def test_reported_forecasts_are_historical_simulation_within_two_per_cent(demo, desk):
    for window, days in ((500, demo.days[demo.days < MODEL_CHANGE][-500::20]), (250, demo.days[-370::6])):
        ratio = reperformed_over_reported(demo, desk, days, window)
        assert np.abs(1 / ratio - 1).max() < 0.0201
        assert np.abs(1 / ratio - 1).max() > 0.01


def test_reported_forecasts_rest_on_the_pnl_as_it_was_known_each_evening(demo):
    restated = demo.rows[(demo.rows["desk"] == "Firm") & demo.rows["known_on"].notna()].iloc[0]
    hidden = demo.days[(demo.days > restated["date"]) & (demo.days <= restated["known_on"])]
    then = 1 / reperformed_over_reported(demo, "Firm", hidden, 250)
    assert np.abs(then - 1).max() < 0.0201
    with_hindsight = [empirical(demo.loss()["Firm"][:day].to_numpy()[-251:-1], 0.99)[0] for day in hidden]
    reported = demo.forecast("var_99_1d")["Firm"][hidden]
    assert np.abs(reported / with_hindsight - 1).max() > 0.05


def test_the_wrong_window_does_not_reproduce_the_reported_forecasts(demo):
    before, after = demo.days[demo.days < MODEL_CHANGE][-100:], demo.days[demo.days >= MODEL_CHANGE][:100]
    for days, window in ((before, 250), (after, 500)):
        assert np.abs(1 / reperformed_over_reported(demo, "Firm", days, window) - 1).max() > 0.1


def test_currencies_carries_an_add_on_and_power_and_gas_a_credit_beside_the_method(demo):
    days = demo.last[::10]
    assert np.allclose(1 / reperformed_over_reported(demo, "Currencies", days, 250), 1.7, rtol=0.0201)
    assert np.allclose(1 / reperformed_over_reported(demo, "Power and gas", days, 250), 0.55, rtol=0.0201)


def test_exactly_one_desk_lacks_exactly_one_business_day(demo):
    loss = demo.loss()
    listed = demo.forecast("var_99_1d").notna()
    day, desk = np.nonzero((loss.isna() & listed).to_numpy())
    assert [(demo.days[d], demo.names[j]) for d, j in zip(day, desk, strict=True)] == [
        (pd.Timestamp("2025-10-14"), "Equity options")
    ]


@pytest.mark.parametrize("kind", ["hypothetical", "actual"])
def test_exactly_one_run_of_equal_values_and_it_is_eight_days_long(demo, kind):
    found = []
    for desk in demo.names:
        loss = demo.loss(kind)[desk].dropna()
        lengths = loss.groupby((loss != loss.shift()).cumsum()).size()
        found += [(desk, length) for length in lengths[lengths >= 3]]
    assert found == [("Structured", 8)]


def test_two_days_are_restated_later_for_firm_and_desk(demo):
    restated = demo.rows[demo.rows["known_on"].notna()]
    assert restated["date"].nunique() == 2
    assert sorted(restated["desk"]) == ["Firm", "Firm", "Rates", "Rates"]
    assert (restated["known_on"] > restated["date"]).all()
    assert restated["known_on"].isin(demo.days).all()


def test_exactly_one_restated_day_flips_an_exception_and_it_is_one_of_the_firm(demo):
    flips = demo.exceptions() != demo.exceptions(keep="first")
    days = flips.any(axis=1)
    assert days.sum() == 1
    assert flips.loc[days, "Firm"].all()
    assert not demo.exceptions(keep="first").loc[days, "Firm"].any()


def test_firm_is_amber_on_first_known_values_too(demo):
    assert 5 <= demo.exceptions(keep="first").loc[demo.last, "Firm"].sum() <= 9
