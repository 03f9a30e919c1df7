"""A study drafted from an unknown extract says what it found and why, and, once confirmed, is read unchanged."""

import io
import re
from pathlib import Path

import pandas as pd
import pytest

from backtest.errors import DataError
from backtest.reading.draft import draft_study
from backtest.reading.draft_names import pnl_kind, risk_column
from backtest.reading.inputs import read_inputs
from backtest.records import Inputs
from backtest.study import read_study
from backtest.study_form import Study
from tests.reference.invented_extract import invented, pnl_text, reported_text

DESKS = ("Lumber", "Wool", "Amber")


def firm_table(n: int = 300) -> pd.DataFrame:
    """Return three desks and their sum, called Whole House, whose VaR belongs to the sum only in size."""
    table = invented(n, DESKS)
    total = table.groupby("date", as_index=False)[["hpl", "var_99", "var_975", "es_975"]].sum().round(2)
    return pd.concat([table, total.assign(desk="Whole House")], ignore_index=True)


def drafted(folder: Path, files: dict[str, str | bytes]) -> tuple[str, Study]:
    """Write the files, draft their study, save the draft beside them and read it."""
    for name, content in files.items():
        (folder / name).write_bytes(content if isinstance(content, bytes) else content.encode())
    text = draft_study([folder / name for name in files])
    (folder / "study.toml").write_text(text, encoding="utf-8")
    return text, read_study(folder / "study.toml")


def assert_reads(study: Study, table: pd.DataFrame) -> Inputs:
    inputs = read_inputs(study)
    rows = table.sort_values(["desk", "date"])
    assert inputs.pnl["desk"].tolist() == rows["desk"].tolist()
    assert inputs.pnl["hypothetical"].tolist() == rows["hpl"].tolist()
    assert inputs.reported.loc[inputs.reported["level"] == 0.99, "var"].tolist() == rows["var_99"].tolist()
    assert inputs.reported.loc[inputs.reported["level"] == 0.975, "es"].tolist() == rows["es_975"].tolist()
    return inputs


def european(table: pd.DataFrame) -> str:
    names = {
        "date": "business_date",
        "desk": "desk_id",
        "var_99": "VaR_99_1d",
        "var_975": "var975",
        "es_975": "ES_97.5",
    }
    days = [day.strftime("%d.%m.%Y") for day in table["date"]]
    wide = table.assign(date=days, ccy="CHF", var_99_10d=table["var_99"] * 3).rename(columns=names)
    return wide.to_csv(index=False, sep=";", decimal=",")


def test_a_wide_extract_with_semicolons_and_decimal_commas_reads_back(tmp_path: Path) -> None:
    text, study = drafted(tmp_path, {"extract.csv": european(firm_table())})
    data = study.data
    assert (data.separator, data.decimal, data.date_format, data.currency) == (";", ",", "%d.%m.%Y", "CHF")
    assert (data.pnl_sign, data.var_sign, data.var_date) == ("profit-positive", "positive", "target")
    assert study.review.firm == "Whole House"
    assert "var_99_10d (its name says 10 days" in text
    inputs = assert_reads(study, firm_table())
    assert [r.rule for r in inputs.remarks if r.rule.startswith(("likely", "not-adding"))] == []


def test_every_line_is_a_value_to_confirm_or_a_comment_to_complete(tmp_path: Path) -> None:
    text, _ = drafted(tmp_path, {"extract.csv": european(firm_table())})
    for line in text.splitlines():
        if line and not line.startswith("["):
            assert re.fullmatch(r"# \w+ = .*  # complete: .+|\w+ = .*  # confirm: .+|# [A-Za-z][^=]*", line), line
    assert '# desks = "desks.csv"  # complete: no file was recognised as desks' in text


def test_pnl_and_long_forecasts_in_two_files_read_back(tmp_path: Path) -> None:
    table = firm_table()
    files = {"pnl_2022.csv": pnl_text(table), "risk.csv": reported_text(table).replace("date", "cob_date", 1)}
    _, study = drafted(tmp_path, files)
    assert (study.data.pnl, study.data.reported) == ("pnl_2022.csv", "risk.csv")
    assert study.review.subject == "House HS"
    assert_reads(study, table)


def test_parquet_and_side_files_are_recognised(tmp_path: Path) -> None:
    table, buffer = firm_table(), io.BytesIO()
    table.to_parquet(buffer, index=False)
    files: dict[str, str | bytes] = {
        "extract.parquet": buffer.getvalue(),
        "hierarchy.csv": "desk,parent\nWhole House,\nLumber,Whole House\nWool,Whole House\nAmber,Whole House\n",
        "events.csv": "date,desk,kind,note\n2022-03-01,Wool,model,new window\n",
        "days.csv": "date\n" + "\n".join(str(day) for day in sorted(set(table["date"]))),
    }
    _, study = drafted(tmp_path, files)
    assert (study.data.desks, study.data.changes, study.data.calendar) == ("hierarchy.csv", "events.csv", "days.csv")
    assert len(assert_reads(study, table).changes) == 1


VECTORS = "date,desk,scenario,pnl\n2022-03-01,Wool,2022-02-28,1\n"
FACTORS = "date,factor,return\n2022-02-28,oak,0.1\n"
EXPOSURES = "date,desk,factor,amount\n2022-03-01,Wool,oak,10\n"


def test_vectors_are_not_taken_for_pnl(tmp_path: Path) -> None:
    table = firm_table()
    files = {"moves.csv": VECTORS, "pnl.csv": pnl_text(table), "risk.csv": reported_text(table)}
    _, study = drafted(tmp_path, files)
    assert (study.data.pnl, study.data.vectors) == ("pnl.csv", "moves.csv")
    assert list(assert_reads(study, table).vectors) == ["Wool"]


@pytest.mark.parametrize("alone", [False, True])
def test_factors_are_named_only_together_with_exposures(tmp_path: Path, alone: bool) -> None:
    table = firm_table()
    files = {"pnl.csv": pnl_text(table), "risk.csv": reported_text(table), "f.csv": FACTORS}
    text, study = drafted(tmp_path, files if alone else files | {"e.csv": EXPOSURES})
    assert (study.data.factors, study.data.exposures) == ((None, None) if alone else ("f.csv", "e.csv"))
    assert ("f.csv has no role here" in text) == alone
    assert list(assert_reads(study, table).vectors) == ([] if alone else ["Wool"])


def test_negative_var_losses_and_as_of_dates_are_detected(tmp_path: Path) -> None:
    table = invented(400, DESKS)
    risk = ["var_99", "var_975", "es_975"]
    stored = table.assign(loss=-table["hpl"]).drop(columns="hpl")
    stored[risk] = -stored.groupby("desk")[risk].shift(-1)
    text, study = drafted(tmp_path, {"extract.csv": stored.to_csv(index=False)})
    assert (study.data.pnl_sign, study.data.var_sign, study.data.var_date) == ("loss-positive", "negative", "as-of")
    assert "of the same day on 3" in text
    inputs = read_inputs(study)
    at_99 = inputs.reported[inputs.reported["level"] == 0.99]
    first_day = table["date"].min()
    expected = table[table["date"] > first_day].sort_values(["desk", "date"])["var_99"]
    assert at_99["var"].tolist() == expected.tolist()
    assert not [r for r in inputs.remarks if r.rule == "likely-shift"]


def test_what_cannot_be_told_is_left_to_complete(tmp_path: Path) -> None:
    days = pd.bdate_range("2022-01-03", periods=60)
    table = pd.DataFrame({"date": days, "unit_code": "Wool", "pnl": range(60), "var": 100})
    text, study = drafted(tmp_path, {"extract.csv": table.to_csv(index=False)})
    assert re.search(r'# desk = ""  # complete: not recognised; .*unit_code', text)
    assert '# var = [{ column = "var", level = 0.99 }]  # complete: no usual level in the name' in text
    assert '# var_date = "target"  # complete' in text
    assert '# decimal = "."  # complete: no sampled number has decimals' in text
    with pytest.raises(DataError, match="'desk'"):
        read_inputs(study)


def test_pnl_alone_gets_a_window_it_reaches(tmp_path: Path) -> None:
    _, study = drafted(tmp_path, {"pnl.csv": pnl_text(invented(300, DESKS))})
    assert (study.forecast.window, study.data.reported) == (250, None)
    assert len(read_inputs(study).pnl) == 900


def test_day_and_month_are_told_apart_by_weekends_and_the_doubt_is_named(tmp_path: Path) -> None:
    days = ["05/09/2022", "06/09/2022", "07/09/2022"]  # Monday to Wednesday, or May, June and July the 9th
    rows = "".join(f"{day},Wool,1.5,2.5\n" for day in days)
    text, study = drafted(tmp_path, {"extract.csv": "date,desk,pnl,var_99\n" + rows})
    assert study.data.date_format == "%d/%m/%Y"
    assert "could also be %m/%d/%Y" in text


def test_cp1252_bytes_are_detected(tmp_path: Path) -> None:
    text = invented(60, ("Café",)).to_csv(index=False)
    _, study = drafted(tmp_path, {"extract.csv": text.encode("cp1252")})
    assert study.data.encoding == "cp1252"
    assert set(read_inputs(study).pnl["desk"]) == {"Café"}


def test_a_name_with_quotes_and_a_line_feed_in_the_header_stay_harmless(tmp_path: Path) -> None:
    table = invented(60, ('Say "hay"',)).rename(columns={"hpl": 'hpl "clean" # x', "date": "date"})
    text, study = drafted(
        tmp_path, {'ex"tract.csv': table.rename(columns={'hpl "clean" # x': "hpl"}).to_csv(index=False)}
    )
    assert study.data.pnl == 'ex"tract.csv'
    assert set(read_inputs(study).pnl["desk"]) == {'Say "hay"'}
    assert "\\" in text


@pytest.mark.parametrize(
    ("name", "measure", "level"),
    [
        ("VaR_99_1d", "var", 0.99),
        ("es_975", "es", 0.975),
        ("var975", "var", 0.975),
        ("1d_var_97.5", "var", 0.975),
        ("VaR 0.99", "var", 0.99),
        ("Expected Shortfall 97,5%", "es", 0.975),
        ("var_999", "var", 0.999),
        ("var", "var", None),
        ("var_99_10d", "var", None),
        ("stressed_var_99", "var", None),
        ("var_1", "var", None),
    ],
)  # fmt: skip
def test_measure_and_level_are_read_from_names(name: str, measure: str, level: float | None) -> None:
    found = risk_column(name)
    assert found is not None
    assert (found.measure, found.level) == (measure, level)


@pytest.mark.parametrize("name", ["variance", "desk", "invar", "responses_99", "es_desk_name"[3:]])
def test_other_names_are_no_risk_columns(name: str) -> None:
    assert risk_column(name) is None


@pytest.mark.parametrize(
    ("name", "kind"),
    [
        ("hpl", "hypothetical"),
        ("Hyp P&L", "hypothetical"),
        ("clean_pnl", "hypothetical"),
        ("apl", "actual"),
        ("actual_loss", "actual"),
        ("rtpl", "risk_theoretical"),
        ("PnL", "any"),
        ("loss", "any"),
        ("HypPnL", "hypothetical"),
        ("ActPnL", "actual"),
        ("hyp_pl", "hypothetical"),
        ("act_pl", "actual"),
        ("HPnL", None),
        ("ActualP&L", "actual"),
        ("pnlClean", "hypothetical"),
        ("RTPL", "risk_theoretical"),
        ("deskpl", None),
        ("desk", None),
        ("stop_loss_limit", None),
    ],
)
def test_pnl_kinds_are_read_from_names(name: str, kind: str | None) -> None:
    assert pnl_kind(name) == kind


@pytest.mark.parametrize(
    ("name", "content"),
    [
        ("none.csv", None),
        ("empty.csv", b""),
        ("header.csv", b"date,desk\n"),
        ("bad.parquet", b"x"),
        ("book.xlsx", b"PK"),
    ],
)
def test_an_unreadable_file_is_a_data_error(tmp_path: Path, name: str, content: bytes | None) -> None:
    if content is not None:
        (tmp_path / name).write_bytes(content)
    with pytest.raises(DataError) as caught:
        draft_study([tmp_path / name])
    assert name in caught.value.place
    assert caught.value.remedy


def test_one_column_a_desk_is_named_as_what_it_is(tmp_path: Path) -> None:
    wide = firm_table().pivot_table(index="date", columns="desk", values="hpl").reset_index()
    (tmp_path / "wide.csv").write_text(wide.to_csv(index=False), encoding="utf-8")
    text = draft_study([tmp_path / "wide.csv"])
    assert "wide.csv: one column a desk is not read: melt it to date, desk, value" in text
    assert "no role" not in text


def test_a_calendar_of_one_column_does_not_decide_how_files_are_written(tmp_path: Path) -> None:
    table = firm_table()
    days = "date\n" + "\n".join(day.strftime("%d.%m.%Y") for day in sorted(set(table["date"])))
    text, study = drafted(tmp_path, {"days.csv": days, "extract.csv": european(table)})
    assert (study.data.separator, study.data.decimal, study.data.calendar) == (";", ",", "days.csv")
    assert "differ" not in text
    assert_reads(study, table)


def test_no_file_is_a_data_error() -> None:
    with pytest.raises(DataError, match="no file"):
        draft_study([])
