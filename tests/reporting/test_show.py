import datetime as dt
from dataclasses import replace

import numpy as np
import pytest

from backtest.errors import RecordError
from backtest.reporting.show import day_view
from tests.reference.invented_record import DATES, FIRM, invented_record, renamed


@pytest.fixture(scope="module")
def record():
    return invented_record()


def exception_day(record):
    log = record.exceptions
    return log.loc[
        (log["desk"] == FIRM) & log["exception_hypothetical_0.99"] & log["exception_actual_0.99"], "date"
    ].iloc[-1]


def test_a_day_is_shown_with_every_model_level_origin_and_exception(record):
    day = exception_day(record)
    lines = day_view(record, FIRM, str(day.date()))
    pnl = record.pnl[(record.pnl["desk"] == FIRM) & (record.pnl["date"] == day)].iloc[0]
    assert lines[0] == f"Firm, {day.date()}"
    assert lines[1] == f"  P&L hypothetical: EUR −{-pnl['hypothetical']:,.0f}"
    assert lines[2] == f"  P&L actual: EUR −{-pnl['actual']:,.0f}"
    assert lines[4].split() == ["model", "level", "origin", "VaR", "ES", "exception", "status"]
    assert [line.split()[:2] for line in lines[5:]] == [
        [m, level] for m in ("HS-250", "historical", "conditional-evt") for level in ("97.5%", "99%")
    ]
    assert lines[6].split()[2:] == [
        str((day - np.timedelta64(1, "D")).date()), "2,419,402", "3,024,252", "both", "as", "reported",
    ]  # fmt: skip
    assert max(len(line) for line in lines) <= 100


def test_a_fallback_is_shown_by_its_status(record):
    own = record.forecasts[record.forecasts["status"].str.startswith("fallback")]
    lines = day_view(record, FIRM, own["date"].iloc[0].to_datetime64())
    assert [line for line in lines if "fallback" in line] == ["    status: fallback: last good parameters"] * 2


def test_a_day_before_the_first_forecast_says_so(record):
    assert day_view(record, FIRM, str(DATES[0])[:10])[-1] == "No model forecast this day."


def test_a_day_without_pnl_is_not_tested(record):
    missing = record.pnl[(record.pnl["desk"] == FIRM) & record.pnl["hypothetical"].isna()]["date"].iloc[0]
    lines = day_view(record, FIRM, missing.date())
    assert lines[1] == "  P&L hypothetical: not known"


def test_an_unknown_desk_is_answered_with_the_near_miss(record):
    with pytest.raises(RecordError, match=r"no such desk, found 'Frim'\. Did you mean 'Firm'\?"):
        day_view(record, "Frim", "2025-12-26")


def test_an_unknown_day_is_answered_with_the_nearest(record):
    with pytest.raises(RecordError, match=r"no such day, found '2025-12-28'\. The nearest recorded day is 2025-12-26"):
        day_view(record, FIRM, dt.date(2025, 12, 28))


def test_what_is_no_date_is_refused(record):
    with pytest.raises(RecordError, match=r"this is no date, found '31\.12\.2025'\. Write it as 2025-12-31"):
        day_view(record, FIRM, "31.12.2025")


def test_a_long_model_name_is_shown_in_full_and_the_table_keeps_its_width(record):
    lines = day_view(renamed(record, {"historical": "h" * 60}), FIRM, "2025-12-26")
    assert lines.count("h" * 60) == 2
    assert max(len(line) for line in lines) <= 100


def test_a_restated_value_is_shown_beside_the_one_known_at_the_cut_off(record):
    pnl = record.pnl.assign(first_known_hypothetical=np.where(record.pnl["date"] == DATES[-1], -1e6, np.nan))
    restated = replace(record, pnl=pnl)
    assert "  P&L first known hypothetical: EUR −1,000,000" in day_view(restated, FIRM, "2025-12-26")
    assert not any("first known" in line for line in day_view(restated, FIRM, "2025-12-25"))
