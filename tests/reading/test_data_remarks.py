"""Each remark fires on data that show it, names desk, dates and count, and keeps silent on data that do not."""

from collections.abc import Callable
from pathlib import Path

import pandas as pd
import pytest

from backtest.reading.inputs import read_inputs
from backtest.records import Remark
from tests.reference.invented_extract import business_days, invented, written_study

STUDY = """
[review]
firm = "Firm"
[data]
pnl = "extract.csv"
reported = "extract.csv"
desks = "desks.csv"
calendar = "calendar.csv"
[data.columns]
hypothetical = "hpl"
var = [{ column = "var_99", level = 0.99 }, { column = "var_975", level = 0.975 }]
es = [{ column = "es_975", level = 0.975 }]
[forecast]
window = 250
"""
N = 300
DAYS = [str(day) for day in business_days(N)]
DESKS = "desk,parent\nFirm,\nLumber,Firm\nWool,Firm\n"


def clean() -> pd.DataFrame:
    """Return a firm and two desks that add up, on 300 days, without anything to remark on."""
    table = invented(N, ("Firm", "Lumber", "Wool"))
    desks = table[table["desk"] != "Firm"].groupby("date")["hpl"].sum().round(2)
    table.loc[table["desk"] == "Firm", "hpl"] = desks.to_numpy()
    return table.assign(date=table["date"].astype(str))


def remarks(folder: Path, table: pd.DataFrame, study: str = STUDY, desks: str = DESKS) -> dict[str, list[Remark]]:
    calendar = "date\n" + "\n".join(DAYS)
    files = {"extract.csv": table.to_csv(index=False), "desks.csv": desks, "calendar.csv": calendar}
    found: dict[str, list[Remark]] = {}
    for remark in read_inputs(written_study(folder, study, files)).remarks:
        found.setdefault(remark.rule, []).append(remark)
    return found


def at(table: pd.DataFrame, desk: str, first: int, last: int) -> pd.Series:
    """Say which rows are of a desk from day ``first`` to day ``last`` (numbers of business days, inclusive)."""
    return (table["desk"] == desk) & table["date"].between(DAYS[first], DAYS[last])


def put(column: str, first: int, last: int, value: object) -> Callable[[pd.DataFrame], pd.DataFrame]:
    def change(table: pd.DataFrame) -> pd.DataFrame:
        table.loc[at(table, "Wool", first, last), column] = value
        return table

    return change


def drop(first: int, last: int) -> Callable[[pd.DataFrame], pd.DataFrame]:
    return lambda table: table[~at(table, "Wool", first, last)]


def extra_day(day: str) -> Callable[[pd.DataFrame], pd.DataFrame]:
    def change(table: pd.DataFrame) -> pd.DataFrame:
        row = table[at(table, "Wool", 10, 10)].assign(date=day, hpl=123.45, var_99=3000, var_975=2500, es_975=3000)
        return pd.concat([table, row])

    return change


FIRED = {
    "missing-days": (drop(20, 22), "missing-days", "Wool", 20, 22, 3, "without a P&L row: 3"),
    "empty P&L": (put("hpl", 30, 31, None), "empty-hypothetical", "Wool", 30, 31, 2, "of hypothetical P&L: 2"),
    "long stretch": (put("hpl", 40, 59, 7.0), "unchanged-long-pnl", "Wool", 40, 59, 20, "EU 2024/1085 Art. 35"),
    "long zero stretch": (put("hpl", 40, 61, 0.0), "unchanged-long-pnl", "Wool", 40, 61, 22, "of these at zero 22"),
    "short stretch": (put("hpl", 40, 44, 7.0), "unchanged-short-pnl", "Wool", 40, 44, 5, "common practice, no source"),
    "long VaR stretch": (put("var_99", 40, 59, 2500), "unchanged-long-var", "Wool", 40, 59, 20, "at 0.99"),
    "short VaR stretch": (put("var_99", 40, 45, 2500), "unchanged-short-var", "Wool", 40, 45, 6, "'reported'"),
    "negative VaR": (put("var_99", 50, 51, -1.0), "var-negative", "Wool", 50, 51, 2, "judged as they stand"),
    "ES below VaR": (put("es_975", 50, 50, 1.0), "es-below-var", "Wool", 50, 50, 1, "judged as they stand"),
    "empty VaR": (put("var_99", 50, 52, None), "reported-empty", "Wool", 50, 52, 3, "rows without a VaR, left out: 3"),
    "VaR missing": (put("var_99", 50, 52, None), "pnl-without-reported", "Wool", 50, 52, 3, "had begun by then: 3"),
    "P&L missing": (put("hpl", 50, 52, None), "reported-without-pnl", "Wool", 50, 52, 3, "and no P&L: 3"),
    "short history": (drop(0, 99), "short-history", "Wool", 100, 299, 199, "199 of 250"),
    "short year": (drop(0, 99), "short-year", "Wool", 100, 299, 200, "200 of 250 days with P&L: no zone"),
    "not adding up": (put("hpl", 60, 61, 9999.0), "not-adding-up-hypothetical", "Firm", 60, 61, 2, "2 of 300 days"),
}  # fmt: skip


def test_clean_data_have_no_remarks(tmp_path: Path) -> None:
    assert remarks(tmp_path, clean()) == {}


@pytest.mark.parametrize("name", FIRED)
def test_remark_fires_with_desk_dates_and_count(tmp_path: Path, name: str) -> None:
    change, rule, desk, first, last, count, says = FIRED[name]
    found = remarks(tmp_path, change(clean()))
    (remark,) = found[rule]
    assert (remark.desk, remark.first, remark.last, remark.count) == (desk, DAYS[first], DAYS[last], count)
    assert says in remark.text


@pytest.mark.parametrize(
    ("named", "missing"), [("", "review.subject and review.firm"), ('firm = "Firm"', "review.subject")]
)
def test_rules_that_lack_the_subject_or_the_firm_are_remarked(tmp_path: Path, named: str, missing: str) -> None:
    study = STUDY.replace('firm = "Firm"', f'{named}\nrules = "basel-mar32"')
    (remark,) = remarks(tmp_path, clean(), study)["rules-not-applied"]
    assert (remark.source, remark.count) == ("study.toml", 1)
    assert f"'basel-mar32' are not applied: {missing} not named" in remark.text
    assert "rules-not-applied" not in remarks(tmp_path, clean())


def test_four_equal_values_are_no_stretch(tmp_path: Path) -> None:
    found = remarks(tmp_path, put("hpl", 40, 43, 7.0)(clean()))
    assert [rule for rule in found if rule.startswith("unchanged")] == []


def test_a_missing_day_ends_a_stretch(tmp_path: Path) -> None:
    table = put("hpl", 40, 48, 7.0)(clean())
    found = remarks(tmp_path, table[~at(table, "Wool", 44, 44)])
    assert [rule for rule in found if rule.startswith("unchanged")] == []


def test_reported_forecasts_of_a_short_desk_are_said_to_be_judged_all_the_same(tmp_path: Path) -> None:
    (remark,) = remarks(tmp_path, drop(0, 99)(clean()))["short-history"]
    assert remark.text.endswith("its reported forecasts are judged from day one all the same")


def test_a_desk_with_exactly_the_window_before_its_last_day_is_not_short(tmp_path: Path) -> None:
    found = remarks(tmp_path, drop(0, 48)(clean()))  # 251 days, 250 of them before the last
    assert "short-history" not in found


def test_a_desk_that_begins_and_ends_by_its_valid_dates_misses_no_day(tmp_path: Path) -> None:
    lives = f"desk,parent,valid_from,valid_to\nFirm,,,\nLumber,Firm,,\nWool,Firm,{DAYS[10]},{DAYS[280]}\n"
    table = clean()
    table = table[~at(table, "Wool", 0, 9) & ~at(table, "Wool", 281, 299)]
    assert "missing-days" not in remarks(tmp_path, table, desks=lives)
    assert remarks(tmp_path, table)["missing-days"][0].count == 19


def test_pnl_outside_the_valid_dates_is_remarked(tmp_path: Path) -> None:
    lives = f"desk,parent,valid_from,valid_to\nFirm,,,\nLumber,Firm,,\nWool,Firm,{DAYS[10]},{DAYS[297]}\n"
    (remark,) = remarks(tmp_path, clean(), desks=lives)["outside-validity"]
    assert (remark.desk, remark.count, remark.first, remark.last) == ("Wool", 12, DAYS[0], DAYS[299])


def test_a_weekend_and_a_day_off_the_calendar_are_remarked(tmp_path: Path) -> None:
    found = remarks(tmp_path, extra_day("2022-01-08")(clean()))
    for rule in ("weekend", "pnl-off-calendar", "reported-off-calendar"):
        assert {(r.desk, r.first, r.count) for r in found[rule]} == {("Wool", "2022-01-08", 1)}


def test_columns_that_nobody_names_are_remarked(tmp_path: Path) -> None:
    (remark,) = remarks(tmp_path, clean().assign(comment="x", trader="y"))["unnamed-columns"]
    assert (remark.source, remark.count) == ("extract.csv", 2)
    assert remark.text.endswith("comment, trader")


def test_a_desk_without_forecasts_is_remarked(tmp_path: Path) -> None:
    table = clean()
    table.loc[table["desk"] == "Wool", ["var_99", "var_975", "es_975"]] = None
    (remark,) = remarks(tmp_path, table)["nothing-reported"]
    assert (remark.desk, remark.count) == ("Wool", N)


def test_a_listed_desk_without_data_is_remarked(tmp_path: Path) -> None:
    (remark,) = remarks(tmp_path, clean(), desks=DESKS + "Amber,Firm\n")["desk-without-data"]
    assert remark.desk == "Amber"


def test_without_a_calendar_the_weekdays_in_no_table_are_counted(tmp_path: Path) -> None:
    study = STUDY.replace('calendar = "calendar.csv"\n', "")
    table = clean()
    (remark,) = remarks(tmp_path, table[table["date"] != DAYS[5]], study)["calendar-from-data"]
    assert remark.count == 1


def test_a_desk_contained_in_another_is_not_added_twice(tmp_path: Path) -> None:
    table = clean()
    part = table[table["desk"] == "Wool"].assign(desk="Merino")
    desks = DESKS + "Merino,Wool\n"
    assert "not-adding-up-hypothetical" not in remarks(tmp_path, pd.concat([table, part]), desks=desks)
    found = remarks(tmp_path, pd.concat([table, part]), desks=DESKS + "Merino,Firm\n")
    assert found["not-adding-up-hypothetical"][0].count > 290


def test_days_on_which_a_living_desk_has_no_value_are_not_compared(tmp_path: Path) -> None:
    found = remarks(tmp_path, drop(20, 22)(clean()))
    assert "not-adding-up-hypothetical" not in found


def test_rounding_to_cents_is_no_gap(tmp_path: Path) -> None:
    table = clean()
    table.loc[table["desk"] == "Firm", "hpl"] += 0.01
    assert "not-adding-up-hypothetical" not in remarks(tmp_path, table)
    table.loc[table["desk"] == "Firm", "hpl"] += 0.03
    assert remarks(tmp_path, table)["not-adding-up-hypothetical"][0].count == N


def test_desks_in_two_currencies_are_not_added(tmp_path: Path) -> None:
    found = remarks(tmp_path, clean(), desks="desk,currency\nFirm,EUR\nLumber,EUR\nWool,USD\n")
    assert [r.desk for r in found["totals-not-checked"]] == ["Firm"]
    assert "EUR, USD" in found["mixed-currencies"][0].text
