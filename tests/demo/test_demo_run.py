"""The demo's story as a run tells it: the designed points, read from the record of a run and nowhere else."""

from pathlib import Path

import pandas as pd
import pytest

from backtest.recording.run_folder import read_record
from backtest.records import Record
from tests.reference.invented_studies import Said, tailmark

pytestmark = pytest.mark.slow

STUDY = Path(__file__).parents[2] / "data_demo" / "study.toml"


@pytest.fixture(scope="module")
def said(tmp_path_factory) -> Said:
    return tailmark("run", STUDY, "--out", tmp_path_factory.mktemp("demo") / "run")


@pytest.fixture(scope="module")
def record(said) -> Record:
    return read_record(Path(said.out.splitlines()[-1].removeprefix("Summary: ")).parent)


def rows(record: Record, desk: str, test: str, level: float, year: bool, model: str = "HS-250") -> pd.Series:
    """Return the one result of a desk, model, test, level and span, on hypothetical P&L."""
    found = record.results
    found = found[(found["desk"] == desk) & (found["model"] == model) & (found["test"] == test)]
    found = found[(found["level"] == level) & (found["pnl_kind"] == "hypothetical")]
    found = found.sort_values("from")
    return found.iloc[-1 if year else 0]


def test_the_demo_is_done_and_nothing_fell_back(said, record):
    assert said.code == 0
    assert len(said.out.splitlines()) == 8
    counted = record.manifest["fallbacks"]
    assert counted["forecasts"] > 50_000
    assert counted["fallbacks"] <= 0.01 * counted["forecasts"]


def test_the_firm_is_amber_by_rule_with_seven(record):
    (zone,) = record.results[record.results["test"] == "basel-zone"].itertuples()
    assert (zone.desk, zone.days, zone.statistic, zone.decision, zone.estimate) == ("Firm", 250, 7, "amber", 1.83)
    assert (zone._6, zone.to) == ("2025-01-10", "2025-12-31")


def test_the_firm_has_six_on_hypothetical_and_seven_on_actual_pnl(record):
    log = record.exceptions
    year = log[(log["desk"] == "Firm") & (log["date"] >= "2025-01-10")]
    assert year["exception_hypothetical_0.99"].sum() == 6
    assert year["exception_actual_0.99"].sum() == 7


def test_power_and_gas_is_short_in_size_though_inside_its_limit(record):
    year = rows(record, "Power and gas", "sufficient-var-multiple", 0.99, year=True)
    assert (year["days"], year["direction"]) == (250, "VaR too low")
    assert year["low"] > 1.3
    assert year["exceptions"] <= 12
    whole = rows(record, "Power and gas", "sufficient-var-multiple", 0.99, year=False)
    assert whole["days"] > 1500
    assert 1 < whole["low"] < year["low"]
    assert rows(record, "Power and gas", "sufficient-es-multiple", 0.975, year=True)["low"] > 1


@pytest.mark.parametrize("level", [0.975, 0.99])
def test_currencies_is_too_high(record, level):
    count = rows(record, "Currencies", "binomial", level, year=False)
    assert (count["decision"], count["phrase"]) == ("rejected", "evidence that VaR is too high")
    multiple = rows(record, "Currencies", "sufficient-var-multiple", level, year=False)
    assert (multiple["direction"], multiple["high"] < 0.75) == ("VaR too high", True)
    assert rows(record, "Currencies", "binomial", level, year=True)["exceptions"] == 0


def test_structured_is_judged_on_its_reported_forecasts_and_has_no_challenger(said, record):
    assert set(record.forecasts.loc[record.forecasts["desk"] == "Structured", "model"]) == {"HS-250"}
    assert set(record.results.loc[record.results["desk"] == "Structured", "model"]) == {"HS-250"}
    assert record.bridge.loc[record.bridge["desk"] == "Structured", "note"].tolist() == ["not tested: history"]
    assert "without any challenger: Structured" in said.out
    assert "short-history" in set(record.remarks.loc[record.remarks["desk"] == "Structured", "rule"])


def average_var(record: Record, desk: str, step: str) -> float:
    table = record.bridge
    found = table[(table["desk"] == desk) & (table["step"] == step) & (table["level"] == 0.99)]
    return float(found.loc[found["pnl_kind"] == "hypothetical", "average_var"].iloc[0])


def test_the_bridge_finds_the_add_on_and_the_credit_and_a_faithful_method(record):
    ratio = {
        desk: average_var(record, desk, "reported") / average_var(record, desk, "re-performed")
        for desk in ("Currencies", "Power and gas", "Firm", "Rates", "Credit")
    }
    assert ratio["Currencies"] == pytest.approx(1.7, rel=0.01)
    assert ratio["Power and gas"] < 0.85
    for desk in ("Firm", "Rates", "Credit"):
        assert ratio[desk] == pytest.approx(1, rel=0.01)


@pytest.mark.parametrize("level", [0.975, 0.99])
def test_conditional_evt_covers_the_firm_within_binomial_limits(record, level):
    count = rows(record, "Firm", "binomial", level, year=False, model="conditional-evt")
    assert count["days"] > 1500
    assert count["low"] < 1 - level < count["high"]


def test_what_is_odd_in_the_data_is_remarked_on(record):
    found = set(zip(record.remarks["rule"], record.remarks["desk"], strict=True))
    assert {
        ("missing-days", "Equity options"),
        ("restated", "Firm"),
        ("restated", "Rates"),
        ("unchanged-short-pnl", "Structured"),
    } <= found
