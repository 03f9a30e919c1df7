"""Good input in every declared form becomes the same checked tables."""

import hashlib
import io
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from backtest.reading.inputs import read_inputs
from backtest.records import Inputs, first_known, latest_known
from tests.reference.invented_extract import business_days, invented, pnl_text, reported_text, written_study

LONG = '[data]\npnl = "pnl.csv"\nreported = "reported.csv"\n[forecast]\nwindow = 50\n'
WIDE = """
[data]
pnl = "extract.csv"
reported = "extract.csv"
{data}
[data.columns]
hypothetical = "hpl"
var = [{{ column = "var_99", level = 0.99 }}, {{ column = "var_975", level = 0.975 }}]
es = [{{ column = "es_975", level = 0.975 }}]
[forecast]
window = 50
"""
SEMICOLONS = 'separator = ";"\ndecimal = ","\ndate_format = "%d.%m.%Y"\nencoding = "cp1252"'


def read(folder: Path, study: str, files: dict[str, str | bytes]) -> Inputs:
    return read_inputs(written_study(folder, study, files))


def wide(folder: Path, content: str | bytes, data: str = "") -> Inputs:
    return read(folder, WIDE.format(data=data), {"extract.csv": content})


def assert_holds(inputs: Inputs, table: pd.DataFrame) -> None:
    """Check P&L and reported forecasts, value by value, against the invented wide table."""
    rows = table.sort_values(["desk", "date"], ignore_index=True)
    days = pd.to_datetime(rows["date"]).to_numpy()
    assert inputs.pnl["desk"].tolist() == rows["desk"].tolist()
    np.testing.assert_array_equal(inputs.pnl["date"].to_numpy(), days)
    np.testing.assert_array_equal(inputs.pnl["hypothetical"], rows["hpl"])
    for level, var, es in ((0.99, rows["var_99"], np.nan), (0.975, rows["var_975"], rows["es_975"])):
        reported = inputs.reported[inputs.reported["level"] == level]
        np.testing.assert_array_equal(reported["date"].to_numpy(), days)
        np.testing.assert_array_equal(reported["var"], var)
        np.testing.assert_array_equal(reported["es"], np.broadcast_to(es, len(rows)))


def test_long_csv_is_read_value_by_value(tmp_path: Path) -> None:
    table = invented()
    inputs = read(tmp_path, LONG, {"pnl.csv": pnl_text(table), "reported.csv": reported_text(table)})
    assert_holds(inputs, table)
    assert set(inputs.reported["model"]) == {"House HS"}
    assert list(inputs.reported.columns) == ["date", "desk", "model", "level", "var", "es", "sigma", "pit"]
    assert list(inputs.pnl.columns) == ["date", "desk", "hypothetical", "known_on"]
    assert str(inputs.pnl["date"].dtype) == str(inputs.reported["date"].dtype) == "datetime64[us]"
    assert inputs.calendar.tolist() == business_days(60)
    assert inputs.as_of == np.datetime64(business_days(60)[-1])


def test_wide_csv_with_semicolons_and_decimal_commas_in_cp1252_is_read(tmp_path: Path) -> None:
    table = invented(desks=("Café", "Wool"))
    text = table.assign(date=[d.strftime("%d.%m.%Y") for d in table["date"]]).to_csv(index=False, sep=";", decimal=",")
    assert_holds(wide(tmp_path, text.encode("cp1252"), SEMICOLONS), table)


def test_parquet_with_dates_and_categories_is_read(tmp_path: Path) -> None:
    table, buffer = invented(), io.BytesIO()
    table.astype({"desk": "category"}).to_parquet(buffer, index=False)
    study = WIDE.format(data="").replace("extract.csv", "extract.parquet")
    assert_holds(read(tmp_path, study, {"extract.parquet": buffer.getvalue()}), table)


def test_a_byte_order_mark_is_no_part_of_the_first_name(tmp_path: Path) -> None:
    table = invented()
    assert_holds(wide(tmp_path, b"\xef\xbb\xbf" + table.to_csv(index=False).encode()), table)


@pytest.mark.parametrize("ends", ["\r\n", "\r"])
def test_line_ends_of_other_systems_are_read(tmp_path: Path, ends: str) -> None:
    table = invented()
    assert_holds(wide(tmp_path, table.to_csv(index=False).replace("\n", ends).encode()), table)


def test_a_desk_called_na_is_a_desk(tmp_path: Path) -> None:
    table = invented(desks=("NA", "null"))
    assert_holds(wide(tmp_path, table.to_csv(index=False)), table)


def test_text_that_looks_like_a_formula_or_runs_right_to_left_is_kept(tmp_path: Path) -> None:
    table = invented(desks=("=1+1", "\u200fמתכות"))
    assert set(wide(tmp_path, table.to_csv(index=False)).pnl["desk"]) == {"=1+1", "\u200fמתכות"}


def test_row_and_desk_order_of_the_file_change_nothing(tmp_path: Path) -> None:
    table = invented(desks=("Lumber", "Wool", "Amber"))
    (tmp_path / "a").mkdir()
    (tmp_path / "b").mkdir()
    one = wide(tmp_path / "a", table.to_csv(index=False))
    other = wide(tmp_path / "b", table.sample(frac=1, random_state=3).to_csv(index=False))
    for name in ("pnl", "reported", "desks", "changes"):
        pd.testing.assert_frame_equal(getattr(one, name), getattr(other, name))
    assert one.remarks == other.remarks
    assert one.remarks


def test_sources_carry_the_hash_of_the_bytes_and_the_rows(tmp_path: Path) -> None:
    content = invented().to_csv(index=False).encode()
    sources = wide(tmp_path, content).sources
    assert [(s.role, s.name, s.rows) for s in sources] == [
        ("pnl", "extract.csv", 120),
        ("reported", "extract.csv", 120),
    ]
    assert {s.sha256 for s in sources} == {hashlib.sha256(content).hexdigest()}


def test_loss_positive_pnl_and_negative_var_come_out_in_our_convention(tmp_path: Path) -> None:
    table = invented()
    stored = table.assign(**{c: -table[c] for c in ("hpl", "var_99", "var_975", "es_975")})
    signs = 'pnl_sign = "loss-positive"\nvar_sign = "negative"'
    assert_holds(wide(tmp_path, stored.to_csv(index=False), signs), table)


def test_reported_columns_override_columns_for_that_file(tmp_path: Path) -> None:
    table = invented()
    study = LONG.replace(
        "[forecast]", '[data.columns]\ndate = "cob"\n[data.reported_columns]\ndate = "for_day"\n[forecast]'
    )
    files = {
        "pnl.csv": pnl_text(table).replace("date", "cob", 1),
        "reported.csv": reported_text(table).replace("date", "for_day", 1),
    }
    assert_holds(read(tmp_path, study, files), table)


def test_without_a_model_column_the_subject_names_the_forecasts(tmp_path: Path) -> None:
    text = invented().to_csv(index=False)
    study = '[review]\nsubject = "House HS"\n' + WIDE.format(data="")
    assert set(read(tmp_path, study, {"extract.csv": text}).reported["model"]) == {"House HS"}
    assert set(wide(tmp_path, text).reported["model"]) == {"reported"}


def test_as_of_dates_move_to_the_next_business_day_of_the_calendar(tmp_path: Path) -> None:
    days = ["2022-01-03", "2022-01-05", "2022-01-06"]  # 4 January is a holiday
    pnl = "date,desk,hypothetical\n" + "".join(f"{d},Wool,1\n" for d in days)
    reported = "date,desk,level,var\n" + "".join(
        f"{d},Wool,0.99,{v}\n" for d, v in zip(days, (10, 20, 30), strict=True)
    )
    calendar = "date\n" + "\n".join(days)
    study = LONG.replace("[forecast]", 'calendar = "calendar.csv"\nvar_date = "as-of"\n[forecast]')
    inputs = read(tmp_path, study, {"pnl.csv": pnl, "reported.csv": reported, "calendar.csv": calendar})
    moved = dict(zip(inputs.reported["date"].dt.strftime("%Y-%m-%d"), inputs.reported["var"], strict=True))
    assert moved == {"2022-01-05": 10, "2022-01-06": 20}
    (beyond,) = [r for r in inputs.remarks if r.rule == "reported-beyond"]
    assert (beyond.count, beyond.first) == (1, "2022-01-06")


def test_restated_values_are_kept_apart_by_the_day_they_became_known(tmp_path: Path) -> None:
    rows = [
        "2022-01-03,Wool,1,",
        "2022-01-04,Wool,2,2022-01-04",
        "2022-01-04,Wool,-5,2022-01-07",
        "2022-01-07,Wool,4,",
        "2022-01-03,Wool,9,2022-02-01",
    ]
    reported = "date,desk,level,var\n2022-01-04,Wool,0.99,3\n"
    pnl = "date,desk,hypothetical,known_on\n" + "\n".join(rows)
    inputs = read(tmp_path, LONG, {"pnl.csv": pnl, "reported.csv": reported})
    assert latest_known(inputs.pnl, inputs.as_of)["hypothetical"].tolist() == [1, -5, 4]
    assert first_known(inputs.pnl, inputs.as_of)["hypothetical"].tolist() == [1, 2, 4]
    rules = {r.rule: r for r in inputs.remarks}
    assert rules["known-after-cut-off"].count == 1
    assert "the largest change is 7 on 2022-01-04" in rules["restated"].text


def test_of_restated_forecasts_the_first_known_stands(tmp_path: Path) -> None:
    reported = "date,desk,level,var,known_on\n2022-01-04,Wool,0.99,8,2022-01-05\n2022-01-04,Wool,0.99,3,\n"
    inputs = read(tmp_path, LONG, {"pnl.csv": "date,desk,hypothetical\n2022-01-04,Wool,1\n", "reported.csv": reported})
    assert inputs.reported["var"].tolist() == [3]
    assert [r.count for r in inputs.remarks if r.rule == "reported-restated"] == [1]


def test_nothing_after_the_cut_off_is_kept(tmp_path: Path) -> None:
    days = business_days(60)
    study = f"[review]\nas_of = {days[49]}\n" + WIDE.format(data="")
    inputs = read(tmp_path, study, {"extract.csv": invented().to_csv(index=False)})
    assert inputs.pnl["date"].max() == inputs.reported["date"].max() == pd.Timestamp(days[49])
    assert inputs.calendar[-1] == np.datetime64(days[49])
    left = [(r.desk, r.count) for r in inputs.remarks if r.rule == "after-cut-off"]
    assert left == [("Lumber", 10), ("Lumber", 20), ("Wool", 10), ("Wool", 20)]  # P&L days, forecasts at two levels


def test_an_empty_pnl_cell_is_a_day_without_pnl(tmp_path: Path) -> None:
    text = "date,desk,hypothetical\n2022-01-03,Wool,\n2022-01-04,Wool,-0.0\n"
    inputs = read(tmp_path, LONG, {"pnl.csv": text, "reported.csv": "date,desk,level,var\n2022-01-04,Wool,.99,1e2\n"})
    assert np.isnan(inputs.pnl["hypothetical"].iloc[0])
    assert inputs.reported["var"].tolist() == [100]
    assert [r.count for r in inputs.remarks if r.rule == "empty-hypothetical"] == [1]


def test_side_tables_are_read_with_what_they_have(tmp_path: Path) -> None:
    table = invented()
    side = 'desks = "desks.csv"\nchanges = "changes.csv"\n[forecast]'
    files = {
        "pnl.csv": pnl_text(table),
        "reported.csv": reported_text(table),
        "desks.csv": "desk,parent,valid_from,currency\nWool,Textiles,2022-01-03,USD\nLumber,,,\n",
        "changes.csv": "date,desk,kind,note\n2022-02-01,Wool,positions,moved; see memo\n2030-01-01,Wool,model,later\n",
    }
    inputs = read(tmp_path, LONG.replace("[forecast]", side), files)
    assert inputs.desks.to_dict("list")["currency"] == ["EUR", "USD"]
    assert inputs.desks["valid_from"].isna().tolist() == [True, False]
    assert inputs.changes[["desk", "kind", "note"]].to_numpy().tolist() == [["Wool", "positions", "moved; see memo"]]
    rules = {r.rule for r in inputs.remarks}
    assert {"parent-unknown", "mixed-currencies", "after-cut-off"} <= rules


def test_without_side_tables_the_desks_come_from_the_data(tmp_path: Path) -> None:
    inputs = wide(tmp_path, invented().to_csv(index=False))
    assert inputs.desks["desk"].tolist() == ["Lumber", "Wool"]
    assert inputs.desks["currency"].tolist() == ["EUR", "EUR"]
    assert inputs.changes.empty
    assert list(inputs.changes.columns) == ["date", "desk", "kind", "note"]


def test_a_firm_that_the_desks_file_leaves_out_gets_its_row(tmp_path: Path) -> None:
    table = invented(desks=("Firm", "Wool"))
    study = '[review]\nfirm = "Firm"\n' + LONG.replace("[forecast]", 'desks = "desks.csv"\n[forecast]')
    files = {"pnl.csv": pnl_text(table), "reported.csv": reported_text(table), "desks.csv": "desk,parent\nWool,Firm\n"}
    assert read(tmp_path, study, files).desks["desk"].tolist() == ["Firm", "Wool"]
