import math
import re
from decimal import Decimal

import numpy as np
import pandas as pd
import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from backtest.reporting import wording as say

SHARES = st.floats(0, 1)


@pytest.mark.parametrize(
    ("p", "text"),
    [
        (0.012, "p = 0.012"),
        (0.0, "p < 0.001"),
        (0.0009999, "p < 0.001"),
        (0.0496, "p = 0.0496"),
        (0.04996, "p = 0.04996"),
        (0.05, "p = 0.050"),
        (0.0502, "p = 0.0502"),
        (0.0099, "p = 0.0099"),
        (0.0999, "p = 0.0999"),
        (0.23, "p = 0.23"),
        (0.05 - 1e-9, "p just below 0.05"),
        (0.05 + 1e-9, "p just above 0.05"),
        (0.999, "p > 0.99"),
        (1.0, "p > 0.99"),
    ],
)
def test_a_p_value_reads_as_it_should(p, text):
    assert say.p_value(p) == text


@given(SHARES, st.sampled_from([0.05, 0.01, 0.1, 0.02, 0.001]))
@example(0.0495, 0.05)
@example(0.0004, 0.05)
@example(0.875, 0.05)
def test_rounding_a_p_value_never_crosses_a_threshold(p, significance):
    text = say.p_value(p, significance)
    shown = float(re.findall(r"[\d.]+", text)[0])
    if text.startswith("p = "):
        assert all((shown > m) == (p > m) and (shown < m) == (p < m) for m in (*say.P_THRESHOLDS, significance))
        off = abs(Decimal(text.removeprefix("p = ")) - Decimal(p))  # exact: in floats the tie 0.875 is further off
        assert off <= Decimal("0.005")
    else:
        assert (p < shown) if "<" in text or "below" in text else (p > shown)


@given(SHARES)
def test_a_p_value_never_reads_nought(p):
    assert not re.search(r"= 0\.?0*$", say.p_value(p))


@pytest.mark.parametrize("p", [-0.1, 1.1, math.nan])
def test_what_is_no_probability_is_refused(p):
    with pytest.raises(ValueError, match=r"lies in \[0, 1\]"):
        say.p_value(p)


def test_a_column_of_p_values_leaves_the_letter_to_the_header():
    assert [say.p_cell(p) for p in (0.012, 0.0001)] == ["0.012", "< 0.001"]


@pytest.mark.parametrize(
    ("confidence", "text"), [(0.975, "97.5%"), (0.99, "99%"), (0.999, "99.9%"), (1 - 0.02, "98%"), (0.9975, "99.75%")]
)
def test_a_level_reads_as_a_percentage(confidence, text):
    assert say.level(confidence) == text


@pytest.mark.parametrize(
    ("count", "days", "text"),
    [
        (6, 250, "6 of 250 days (2.4%)"),
        (0, 250, "0 of 250 days (0%)"),
        (250, 250, "250 of 250 days (100%)"),
        (1, 100_000, "1 of 100,000 days (0.0010%)"),
        (25, 1001, "25 of 1,001 days (2.498%)"),
        (25, 1000, "25 of 1,000 days (2.5%)"),
        (0, 0, "0 days"),
        (1, 1, "1 of 1 day (100%)"),
    ],
)
def test_a_rate_stands_beside_its_count(count, days, text):
    assert say.rate(count, days, 0.025) == text


@given(SHARES, st.sampled_from([0.01, 0.025]))
def test_a_percentage_stays_on_its_side_of_the_expected_share(share, mark):
    shown = float(say.percent(share, mark).removesuffix("%"))
    value = 100 * share
    assert (shown > 100 * mark, shown < 100 * mark) == (value > 100 * mark, value < 100 * mark)
    assert (shown == 0, shown == 100) == (value == 0, value == 100)


@pytest.mark.parametrize(("days", "text"), [(250, "2.5"), (1860, "18.6"), (50, "0.5"), (20, "0.2"), (499, "5.0")])
def test_the_expected_number_of_exceptions(days, text):
    assert say.expected(days, 0.99) == text


@pytest.mark.parametrize(
    ("amount", "text"),
    [
        (3_214_567, "EUR 3.21 m"),
        (999_600, "EUR 1.00 m"),
        (450_000, "EUR 450 k"),
        (12_345_678_901, "EUR 12.3 bn"),
        (-3_214_567, "EUR −3.21 m"),
        (0, "EUR 0"),
        (12.345, "EUR 12.3"),
        (0.012345, "EUR 0.0123"),
    ],
)
def test_money_carries_unit_and_scale(amount, text):
    assert say.money(amount, "EUR") == text


@given(st.floats(1e-6, 1e14))
def test_money_is_never_more_than_half_a_percent_off(amount):
    _, figures, *scale = say.money(amount, "EUR").split(" ")
    shown = float(figures.replace(",", "")) * {"bn": 1e9, "m": 1e6, "k": 1e3}.get("".join(scale), 1)
    assert shown == pytest.approx(amount, rel=0.0051)


@pytest.mark.parametrize(("value", "text"), [(1.554, "1.55"), (0.996, "0.996"), (1.004, "1.004"), (1, "1.00")])
def test_a_multiple_that_is_not_one_never_reads_one(value, text):
    assert say.multiple(value) == text


def test_a_multiple_next_to_one_says_so():
    assert say.multiple(1 - 1e-9) == "just below 1"


@pytest.mark.parametrize(
    ("low", "high", "text"),
    [
        (1.03, 3.08, "1.03 to 3.08"),
        (1.03, None, "at least 1.03; no upper limit at this length"),
        (None, 3.08, "at most 3.08; no lower limit at this length"),
        (None, None, "no limits at this length"),
    ],
)
def test_an_open_interval_says_so(low, high, text):
    assert say.interval(low, high) == text


@pytest.mark.parametrize(
    ("share", "text"),
    [
        (0.3779, "38 of 100"),
        (0.001, "fewer than 1 of 100"),
        (0.995, "more than 99 of 100"),
        (0.005, "fewer than 1 of 100"),
    ],
)
def test_power_as_cases_in_a_hundred(share, text):
    assert say.in_hundred(share) == text


def test_a_power_beside_an_answer():
    assert [say.power(p) for p in (0.598, 0.001, 0.999)] == ["60 in 100", "fewer than 1 in 100", "more than 99 in 100"]


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (9.5296, "9.53"),
        (-0.0512345, "−0.05123"),
        (123456.7, "123,457"),
        (0, "0"),
        (math.inf, "infinite"),
        (1e-12, "1.000e−12"),
        (1e300, "1.000e+300"),
    ],
)
def test_a_plain_number_keeps_four_figures(value, text):
    assert say.number(value) == text


@pytest.mark.parametrize(
    ("value", "text"),
    [
        ("", "–"),
        (None, "–"),
        (math.nan, "–"),
        (pd.NaT, "–"),
        ("<b>", "<b>"),
        (True, "yes"),
        (np.False_, "no"),
        (12345, "12,345"),
        (-2852546.4, "−2,852,546"),
        (1.5, "1.5"),
        (pd.Timestamp("2025-01-02"), "2025-01-02"),
    ],
)
def test_any_recorded_value_becomes_a_cell(value, text):
    assert say.cell(value) == text


def test_an_axis_names_its_unit():
    assert say.axis_scale(5.2e6, "EUR") == (1e6, "EUR m")
    assert say.axis_scale(0.2, "EUR") == (1.0, "EUR")


def test_a_list_that_is_cut_says_how_many_are_missing():
    assert say.listed(["a"]) == "a"
    assert say.listed(["a", "b", "c"]) == "a, b and c"
    assert say.listed(list("abcdefgh"), most=2) == "a, b and 6 more"


def test_a_name_from_right_to_left_is_closed_in():
    assert say.name("Rates") == "Rates"
    assert say.name("\u202eevil") == "\u2068\u202eevil\u2069"


def test_plurals():
    assert [say.plural(n, "day") for n in (0, 1, 1200)] == ["no days", "1 day", "1,200 days"]


@pytest.mark.parametrize(("value", "text"), [(14.4123, "14.4"), (-2.0, "−2.0"), (0.02, "0.02"), (-0.004, "−0.004")])
def test_percentage_points_that_are_not_nought_never_read_nought(value, text):
    assert say.points(value) == text
