"""P&L handed over in memory: the forms it may have, and what is refused with row, column and value."""

import numpy as np
import pandas as pd
import pytest

from backtest.errors import DataError
from backtest.reading.frames import calendar_days, pnl_table, reported_table, vectors_table
from backtest.records import DATE_DTYPE

DAYS = pd.bdate_range("2024-01-01", periods=4)


def long_table(**columns: object) -> pd.DataFrame:
    return pd.DataFrame({"date": DAYS, "desk": "Wool", "hypothetical": [1.0, -2.0, 3.0, -4.0]} | columns)


def test_a_series_is_one_desk_of_hypothetical_pnl():
    table = pnl_table(pd.Series([1.0, -2.0, 3.0, -4.0], index=DAYS))
    assert table["desk"].tolist() == ["desk"] * 4
    assert table["hypothetical"].tolist() == [1.0, -2.0, 3.0, -4.0]
    assert table["date"].tolist() == list(DAYS)


def test_dates_are_days_without_a_time_in_one_unit():
    table = pnl_table(long_table(date=DAYS.as_unit("ns") + pd.Timedelta(hours=17)))
    assert table["date"].dtype == table["known_on"].dtype == DATE_DTYPE
    assert table["date"].tolist() == list(DAYS)


def test_text_dates_and_object_numbers_are_read():
    given = long_table(date=[f"{d:%Y-%m-%d}" for d in DAYS], hypothetical=pd.Series([1, -2, None, -4], dtype=object))
    table = pnl_table(given)
    assert table["date"].tolist() == list(DAYS)
    np.testing.assert_array_equal(table["hypothetical"], [1.0, -2.0, np.nan, -4.0])


def test_a_value_is_known_on_its_own_day_unless_said_otherwise():
    known = [pd.NaT, pd.NaT, pd.Timestamp("2024-01-10"), pd.NaT]
    assert pnl_table(long_table())["known_on"].tolist() == list(DAYS)
    assert pnl_table(long_table(known_on=known))["known_on"].tolist() == [
        DAYS[0], DAYS[1], pd.Timestamp("2024-01-10"), DAYS[3],
    ]  # fmt: skip


def test_rows_are_sorted_by_desk_day_and_when_they_became_known():
    again = long_table(known_on=DAYS + pd.Timedelta(days=7)).assign(hypothetical=9.0)
    given = pd.concat([again, long_table().assign(desk="Amber"), long_table()])
    table = pnl_table(given.sample(frac=1, random_state=3))
    keys = ["desk", "date", "known_on"]
    pd.testing.assert_frame_equal(table[keys], table[keys].sort_values(keys).reset_index(drop=True))
    wool = table[(table["desk"] == "Wool") & (table["date"] == DAYS[0])]
    assert wool["hypothetical"].tolist() == [1.0, 9.0]


def test_other_kinds_are_kept_and_other_columns_left_out():
    table = pnl_table(long_table(actual=1.5, risk_theoretical=0.5, comment="x"))
    assert set(table.columns) == {"date", "desk", "hypothetical", "actual", "risk_theoretical", "known_on"}


def test_what_is_handed_over_is_not_changed():
    given = long_table(actual=1.5)
    before = given.copy()
    table = pnl_table(given)
    table["hypothetical"] = 0.0
    pd.testing.assert_frame_equal(given, before)


def test_a_day_without_pnl_stays_a_day_without_pnl():
    assert pnl_table(long_table(hypothetical=[1.0, np.nan, 3.0, -4.0]))["hypothetical"].isna().tolist() == [
        False, True, False, False,
    ]  # fmt: skip


REFUSED = {
    "a missing column": (lambda t: t.drop(columns="desk"), "desk"),
    "a missing measure": (lambda t: t.rename(columns={"hypothetical": "pnl"}), "hypothetical"),
    "no rows": (lambda t: t.iloc[:0], "no rows"),
    "no date": (lambda t: t.assign(date="yesterday"), "row 0, date"),
    "a date whose day and month only a guess could tell": (lambda t: t.assign(date="05/09/2024"), "'05/09/2024'"),
    "a number for a date": (lambda t: t.assign(date=[20240101, 20240102, 20240103, 20240104]), "20240101"),
    "a period": (lambda t: t.assign(date=DAYS.to_period("D")), "not a date"),
    "an empty date": (lambda t: t.assign(date=[*DAYS[:2], pd.NaT, DAYS[3]]), "row 2"),
    "a date with a zone": (lambda t: t.assign(date=DAYS.tz_localize("Europe/Paris")), "time zone"),
    "no number": (lambda t: t.assign(hypothetical=["1", "2", "x", "4"]), "hypothetical"),
    "an infinite value": (lambda t: t.assign(actual=[1.0, np.inf, 0.0, 0.0]), "row 1, actual"),
    "a complex number": (lambda t: t.assign(hypothetical=[1j, 2, 3, 4]), "complex"),
    "truth values": (lambda t: t.assign(hypothetical=[True, False, True, True]), "bool"),
    "a truth value among numbers": (
        lambda t: t.assign(actual=pd.Series([1.0, True, 2.0, 3.0], dtype=object)),
        "actual",
    ),
    "dates for amounts": (lambda t: t.assign(actual=DAYS), "actual"),
    "more than all money": (lambda t: t.assign(hypothetical=[1.0, 2.0, -1e151, 0.0]), "row 2, hypothetical"),
    "a desk that is NaN": (lambda t: t.assign(desk=["Wool", np.nan, "Wool", "Wool"]), "row 1, desk"),
    "a desk that is None": (lambda t: t.assign(desk=["Wool", "Wool", None, "Wool"]), "row 2, desk"),
    "a desk of blanks": (lambda t: t.assign(desk=" "), "row 0, desk"),
    "a column twice": (lambda t: pd.concat([t, t[["desk"]]], axis=1), "'desk'"),
    "no table": (lambda t: t.to_dict("list"), "dict"),
    "nothing": (lambda t: None, "NoneType"),
    "a row twice": (lambda t: pd.concat([t, t.iloc[[2]]]), "2024-01-03 Wool"),
    "known before its day": (lambda t: t.assign(known_on=DAYS[0]), "row 1, known_on"),
}


@pytest.mark.parametrize("case", REFUSED)
def test_what_cannot_be_used_is_refused_in_one_line_with_its_place(case):
    change, says = REFUSED[case]
    with pytest.raises(DataError) as caught:
        pnl_table(change(long_table()))
    assert says in str(caught.value)
    assert caught.value.place.startswith("pnl")
    assert "\n" not in str(caught.value)


def test_the_largest_amount_is_taken():
    assert pnl_table(long_table(hypothetical=[1e150, -1e150, 0.0, 1.0]))["hypothetical"].max() == 1e150


@pytest.mark.parametrize("read", [vectors_table, reported_table])
def test_other_tables_are_tables_too(read):
    with pytest.raises(DataError, match=r"not a table.*list"):
        read([1.0], ["Wool"])


@pytest.mark.parametrize(
    "days", [DAYS, DAYS[::-1], list(DAYS), DAYS.to_numpy(), pd.Series(DAYS), DAYS.strftime("%Y-%m-%d")]
)
def test_a_calendar_is_sorted_days(days):
    found = calendar_days(days)
    assert found.dtype == "datetime64[D]"
    assert found.tolist() == [day.date() for day in DAYS]


NO_CALENDAR = {
    "no day": ([], "no day"),
    "numbers": (range(20240101, 20240105), "a number is no date"),
    "an array of numbers": (np.arange(4), "a number is no date"),
    "a missing day": ([DAYS[0], pd.NaT], "row 1"),
    "None among days": ([DAYS[0], None], "row 1"),
    "text": ("2024-01-01", "not a list of days"),
    "one number": (5, "not a list of days"),
    "a table": (long_table(), "not a list of days"),
    "an array of two dimensions": (np.zeros((2, 2)), "2 dimensions"),
    "words": (["monday"], "'monday'"),
}


@pytest.mark.parametrize("case", NO_CALENDAR)
def test_what_is_no_calendar_is_refused(case):
    days, says = NO_CALENDAR[case]
    with pytest.raises(DataError, match=says) as caught:
        calendar_days(days)
    assert caught.value.place.startswith("calendar")
