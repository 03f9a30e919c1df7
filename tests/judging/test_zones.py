"""Basel zones: the published tables, and the counting rules."""

import numpy as np
import pandas as pd
import pytest
from scipy import stats

from backtest.errors import StudyError
from backtest.judging.battery import judge_table
from backtest.judging.counts import at_least, at_most
from backtest.judging.rules.basel_mar32 import PROFILE
from backtest.judging.zones import resolve_rules
from tests.reference.judging_tables import business_days


def test_zones_follow_from_the_cumulative_binomial_law():
    # Basel Committee (1996), Table 2, cumulative % for 0..10 exceptions, 250 days at 99%
    printed = [8.11, 28.58, 54.32, 75.81, 89.22, 95.88, 98.63, 99.60, 99.89, 99.97, 99.99]
    found = [100 * at_most(k, 250, 0.01) for k in range(11)]
    np.testing.assert_allclose(found, printed, atol=0.0051)
    # amber starts where the cumulative probability reaches 95%, red where it reaches 99.99%
    amber = next(k for k in range(20) if at_most(k, 250, 0.01) >= 0.95)
    red = next(k for k in range(20) if at_most(k, 250, 0.01) >= 0.9999)
    assert [(z.name, z.start) for z in PROFILE.zones] == [("green", 0), ("amber", amber), ("red", red)]


# Basel Committee (1996), Table 1: % exact, then type 1 (99% column) or type 2 error; rows k = 0..10
ERRORS = {
    0.01: ([8.1, 20.5, 25.7, 21.5, 13.4, 6.7, 2.7, 1.0, 0.3, 0.1, 0.0],
           [100.0, 91.9, 71.4, 45.7, 24.2, 10.8, 4.1, 1.4, 0.4, 0.1, 0.0]),
    0.02: ([0.6, 3.3, 8.3, 14.0, 17.7, 17.7, 14.8, 10.5, 6.5, 3.6, 1.8],
           [0.0, 0.6, 3.9, 12.2, 26.2, 43.9, 61.6, 76.4, 86.9, 93.4, 97.0]),
    0.03: ([0.0, 0.4, 1.5, 3.8, 7.2, 10.9, 13.8, 14.9, 14.0, 11.6, 8.6],
           [0.0, 0.0, 0.4, 1.9, 5.7, 12.8, 23.7, 37.5, 52.4, 66.3, 77.9]),
    0.04: ([0.0, 0.0, 0.2, 0.7, 1.8, 3.6, 6.2, 9.0, 11.3, 12.7, 12.8],
           [0.0, 0.0, 0.0, 0.2, 0.9, 2.7, 6.3, 12.5, 21.5, 32.8, 45.5]),
    0.05: ([0.0, 0.0, 0.0, 0.1, 0.3, 0.9, 1.8, 3.4, 5.4, 7.6, 9.6],
           [0.0, 0.0, 0.0, 0.0, 0.1, 0.5, 1.3, 3.1, 6.5, 11.9, 19.5]),
}  # fmt: skip


@pytest.mark.parametrize("rate", ERRORS)
def test_type_one_and_type_two_errors(rate):
    exact, errors = ERRORS[rate]
    chances = [100 * (at_most(k, 250, rate) - at_most(k - 1, 250, rate)) for k in range(11)]
    np.testing.assert_allclose(chances, exact, atol=0.051)
    wrong = [100 * (at_least(k, 250, rate) if rate == 0.01 else at_most(k - 1, 250, rate)) for k in range(11)]
    np.testing.assert_allclose(wrong, errors, atol=0.051)


def test_multipliers_of_the_rule():
    # MAR32.9, table 1
    found = [PROFILE.multiplier(k).value for k in range(12)]
    assert found == [1.5, 1.5, 1.5, 1.5, 1.5, 1.7, 1.76, 1.83, 1.88, 1.92, 2.0, 2.0]
    assert {PROFILE.zone(k) for k in range(5)} == {"green"}
    assert (PROFILE.zone(5), PROFILE.zone(9), PROFILE.zone(10), PROFILE.zone(250)) == ("amber", "amber", "red", "red")


def test_unknown_profile_gets_the_near_miss():
    with pytest.raises(StudyError, match="Did you mean 'basel-mar32'"):
        resolve_rules("basel-mar23")
    assert resolve_rules(None) is None


def firm(days=300, *, hypothetical=(), actual=None, level=0.99):
    dates = business_days(days)

    def pnl(places):
        values = np.full(days, 0.1)
        values[list(places)] = -2.0
        return values

    table = pd.DataFrame({"date": dates, "desk": "Firm", "hypothetical": pnl(hypothetical)})
    if actual is not None:
        table["actual"] = pnl(actual)
    forecasts = pd.DataFrame({"date": dates, "desk": "Firm", "model": "HS", "level": level, "var": 1.0})
    return table, forecasts


def zone(pnl, forecasts, **more):
    asked = {"subject": "HS", "firm": "Firm", "rules": "basel-mar32", **more}
    (row,) = judge_table(pnl, forecasts, tests=["basel-zone"], **asked)
    return row


def test_larger_of_the_two_counts_not_the_union():
    row = zone(*firm(hypothetical=range(100, 105), actual=range(103, 109)))
    assert (row.exceptions, row.decision, row.estimate) == (6, "amber", 1.76)
    assert row.phrase == "amber zone: 6 exceptions in 250 business days, multiplier 1.76"
    assert "counts: hypothetical 5, actual 6" in row.note
    assert row.p_value is None


def test_without_actual_no_multiplier():
    row = zone(*firm(hypothetical=range(100, 106)))
    assert (row.decision, row.estimate) == ("amber", None)
    assert "count on hypothetical only; the rule takes the larger" in row.note
    assert row.phrase.endswith("on hypothetical P&L only, no multiplier")


def test_loss_equal_to_var_is_no_exception():
    pnl, forecasts = firm(actual=())
    pnl["hypothetical"] = -1.0
    assert zone(pnl, forecasts).exceptions == 0


def test_only_the_last_250_business_days_count():
    row = zone(*firm(300, hypothetical=[*range(45, 55)], actual=()))
    assert (row.days, row.exceptions, row.decision) == (250, 5, "amber")


def test_missing_pnl_counts_in_its_column_and_missing_var_in_both():
    pnl, forecasts = firm(hypothetical=[100, 101], actual=[100])
    pnl.loc[200, "hypothetical"] = np.nan
    forecasts.loc[210, "var"] = np.nan
    row = zone(pnl, forecasts)
    assert "counts: hypothetical 4, actual 2" in row.note
    assert "MAR32.5(2)): hypothetical 2, actual 1" in row.note
    assert row.exceptions == 4


def test_the_other_reading_of_missing_days_is_shown_where_it_differs():
    pnl, forecasts = firm(hypothetical=[100, 101], actual=[])
    pnl.loc[200:202, "actual"] = np.nan
    row = zone(pnl, forecasts)
    assert row.exceptions == 3
    assert "counting every such day in both columns would give 5" in row.note


def test_a_day_absent_from_both_tables_counts_only_if_the_calendar_has_it():
    pnl, forecasts = firm(actual=())
    days = pnl["date"].to_numpy()
    pnl, forecasts = pnl.drop(index=250), forecasts.drop(index=250)
    assert zone(pnl, forecasts).exceptions == 0
    row = zone(pnl, forecasts, calendar=days)
    assert (row.exceptions, row.days) == (1, 250)


def test_fewer_than_250_days_have_no_zone():
    row = zone(*firm(200, hypothetical=range(30), actual=()))
    assert (row.decision, row.estimate, row.days) == ("not tested", None, 200)
    assert row.phrase == "not tested: 200 of 250 business days, no zone"


def test_days_before_the_reported_var_began_are_not_missing():
    pnl, forecasts = firm(400, actual=())
    row = zone(pnl, forecasts.iloc[300:])
    assert row.phrase == "not tested: 100 of 250 business days, no zone"


def test_what_the_rule_needs_is_named():
    assert zone(*firm(level=0.975)).phrase == "not tested: needs the reported VaR at 0.99"
    assert zone(*firm(), subject=None).phrase.startswith("not tested: needs the reported firm-wide model")
    assert zone(*firm(), rules=None).decision == "not tested"


def test_first_known_values_are_counted_beside():
    pnl, forecasts = firm(hypothetical=[100], actual=[])
    early = pnl.copy()
    early.loc[150, "hypothetical"] = -5.0
    row = zone(pnl, forecasts, first_known=early)
    assert row.exceptions == 1
    assert "on P&L as first known: 2" in row.note


def test_false_alarms_of_the_rule():
    # a true 99% VaR is amber or red in 10.8 of 100 years, not in 5
    assert stats.binom.sf(4, 250, 0.01) == pytest.approx(at_least(5, 250, 0.01), rel=1e-9)
    assert at_least(PROFILE.zones[1].start, 250, 0.01) == pytest.approx(0.108, abs=5e-4)
