import json
from dataclasses import fields, replace

import pandas as pd
import pytest

from backtest.errors import RecordError
from backtest.recording import run_folder
from backtest.recording.run_folder import TABLES, read_record, replace_folder, write_document, write_record
from backtest.records import RESULT_COLUMNS
from tests.reference.invented_record import FIRM, SUBJECT, invented_record, renamed

HOSTILE = {
    FIRM: "=cmd()|'/c calc'!A0",
    "NA": "'apostrophe",
    "New desk": '\u202eright to left, "q"\n2nd line',
    SUBJECT: "-1",
}


@pytest.fixture(scope="module")
def record():
    return invented_record()


def assert_same(found, wanted):
    for table in TABLES:
        left, right = getattr(found, table), getattr(wanted, table)
        texts = {c: "" for c in right if pd.api.types.is_string_dtype(right[c].dtype) and right[c].notna().any()}
        absent_as_empty = right.fillna(texts) if TABLES[table].endswith(".csv") else right
        pd.testing.assert_frame_equal(left, absent_as_empty, check_dtype=False)
    assert {k: v for k, v in found.manifest.items() if k != "files"} == wanted.manifest


def test_a_record_comes_back_as_it_went_out(record, tmp_path):
    assert_same(read_record(write_record(record, tmp_path / "run")), record)


def test_hostile_names_come_back_exactly(record, tmp_path):
    hostile = renamed(record, HOSTILE)
    assert set(hostile.results["desk"]) >= {HOSTILE[FIRM], HOSTILE["NA"]}
    assert_same(read_record(write_record(hostile, tmp_path / "run")), hostile)


def test_a_record_written_twice_is_the_same_record(record, tmp_path):
    once = read_record(write_record(record, tmp_path / "run"))
    again = read_record(write_record(once, tmp_path / "run"))
    assert again.manifest == once.manifest
    assert_same(again, replace(once, manifest={k: v for k, v in once.manifest.items() if k != "files"}))


def test_the_folder_holds_the_files_of_the_contract(record, tmp_path):
    folder = write_record(record, tmp_path / "run")
    assert {p.name for p in folder.iterdir()} == {"manifest.json", *TABLES.values()}
    assert set(TABLES) == {f.name for f in fields(record)} - {"manifest"}
    header = (folder / "results.csv").read_text(encoding="utf-8").splitlines()[0]
    assert header == ",".join(f'"{c}"' for c in RESULT_COLUMNS)


def test_parquet_keeps_names_as_given(record, tmp_path):
    folder = write_record(renamed(record, HOSTILE), tmp_path / "run")
    assert HOSTILE[FIRM] in set(pd.read_parquet(folder / "pnl.parquet")["desk"])
    assert f'"\'{HOSTILE[FIRM]}"' in (folder / "results.csv").read_text(encoding="utf-8")


def test_a_run_folder_is_never_overwritten(record, tmp_path):
    folders = [write_record(record, tmp_path / "run") for _ in range(3)]
    assert [f.name for f in folders] == ["run", "run-2", "run-3"]


def test_what_stands_in_the_way_is_left_alone(record, tmp_path):
    (tmp_path / "run").write_text("mine", encoding="utf-8")
    (tmp_path / "run-2").mkdir()
    assert write_record(record, tmp_path / "run").name == "run-3"
    assert (tmp_path / "run").read_text(encoding="utf-8") == "mine"
    assert not list((tmp_path / "run-2").iterdir())


def test_a_place_taken_while_we_wrote_is_not_overwritten(record, tmp_path, monkeypatch):
    wanted, free = tmp_path / "run", run_folder.os.path.lexists

    def taken_behind_our_back(path):
        found = free(path)
        if not found and path == wanted:
            wanted.mkdir()
            (wanted / "theirs").touch()
        return found

    monkeypatch.setattr(run_folder.os.path, "lexists", taken_behind_our_back)
    assert write_record(record, wanted).name == "run-2"
    assert [p.name for p in wanted.iterdir()] == ["theirs"]


@pytest.mark.parametrize("failing", ["write_csv", "manifest_text", "_flush", "_sha256"])
def test_a_failure_midway_leaves_nothing_behind(record, tmp_path, monkeypatch, failing):
    def fail(*_):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(run_folder, failing, fail)
    with pytest.raises(RecordError, match="cannot be written, found 'No space left on device'"):
        write_record(record, tmp_path / "run")
    assert not list(tmp_path.iterdir())


def test_an_interruption_leaves_nothing_behind(record, tmp_path, monkeypatch):
    def interrupt(*_):
        raise KeyboardInterrupt

    monkeypatch.setattr(run_folder, "write_csv", interrupt)
    with pytest.raises(KeyboardInterrupt):
        write_record(record, tmp_path / "run")
    assert not list(tmp_path.iterdir())


def test_replacing_takes_the_place_of_an_older_run(record, tmp_path):
    folder = write_record(record, tmp_path / "demo")
    (folder / "summary.html").write_text("old", encoding="utf-8")
    changed = replace(record, manifest=record.manifest | {"run": "another"})
    assert replace_folder(changed, folder) == folder
    assert read_record(folder).manifest["run"] == "another"
    assert [p.name for p in tmp_path.iterdir()] == ["demo"]
    assert not (folder / "summary.html").exists()


def test_replacing_makes_the_folder_where_there_is_none(record, tmp_path):
    assert read_record(replace_folder(record, tmp_path / "reports" / "demo")).manifest["run"] == record.manifest["run"]


@pytest.mark.parametrize("manifest", [None, "{}", "not json", '{"program": "another"}'])
def test_replacing_refuses_a_folder_that_is_no_run(record, tmp_path, manifest):
    (tmp_path / "demo").mkdir()
    (tmp_path / "demo" / "thesis.txt").write_text("mine", encoding="utf-8")
    if manifest is not None:
        (tmp_path / "demo" / "manifest.json").write_text(manifest, encoding="utf-8")
    with pytest.raises(RecordError, match="only a run folder can be replaced"):
        replace_folder(record, tmp_path / "demo")
    assert (tmp_path / "demo" / "thesis.txt").read_text(encoding="utf-8") == "mine"


def test_a_failed_replacement_keeps_the_older_run(record, tmp_path, monkeypatch):
    folder = write_record(record, tmp_path / "demo")

    def fail(*_):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(run_folder, "_sha256", fail)
    with pytest.raises(RecordError):
        replace_folder(record, folder)
    monkeypatch.undo()
    assert read_record(folder).manifest["run"] == record.manifest["run"]
    assert [p.name for p in tmp_path.iterdir()] == ["demo"]


def test_a_document_is_added_and_replaced(record, tmp_path):
    folder = write_record(record, tmp_path / "run")
    write_document(folder, "summary.html", "one")
    path = write_document(folder, "summary.html", "two: –")
    assert path.read_text(encoding="utf-8") == "two: –"
    assert len(list(folder.iterdir())) == len(TABLES) + 2


@pytest.mark.parametrize("name", ["manifest.json", "results.csv", "../x.html", "a/b.html"])
def test_a_document_cannot_take_the_place_of_the_record_or_leave_the_folder(record, tmp_path, name):
    folder = write_record(record, tmp_path / "run")
    with pytest.raises(RecordError, match="plain file name of its own"):
        write_document(folder, name, "x")


def test_a_document_needs_a_run_folder(tmp_path):
    with pytest.raises(RecordError, match="this is no run folder"):
        write_document(tmp_path, "summary.html", "x")


@pytest.mark.parametrize("name", ["pnl.parquet", "results.csv", "paths.parquet"])
def test_a_missing_file_is_named_with_its_remedy(record, tmp_path, name):
    folder = write_record(record, tmp_path / "run")
    (folder / name).unlink()
    with pytest.raises(RecordError, match=rf"{name}: file cannot be read.*run the study again"):
        read_record(folder)


@pytest.mark.parametrize("name", ["forecasts.parquet", "bridge.csv"])
def test_a_changed_file_is_refused(record, tmp_path, name):
    folder = write_record(record, tmp_path / "run")
    (folder / name).write_bytes((folder / name).read_bytes()[:-1] + b"9")
    with pytest.raises(RecordError, match=rf"{name}: file is not the one that the run wrote"):
        read_record(folder)


def test_a_folder_without_manifest_is_refused(tmp_path):
    with pytest.raises(RecordError, match=r"manifest\.json: no manifest can be read.*folder that a run printed"):
        read_record(tmp_path)


def test_an_unknown_format_is_refused_with_its_number(record, tmp_path):
    folder = write_record(record, tmp_path / "run")
    manifest = json.loads((folder / "manifest.json").read_text(encoding="utf-8"))
    (folder / "manifest.json").write_text(json.dumps(manifest | {"format": 99}), encoding="utf-8")
    with pytest.raises(RecordError, match=r"unknown format number, found 99.*reads format 2"):
        read_record(folder)


@pytest.mark.parametrize("content", ["{", '{"program": "tailmark", "format": 2}', "[]"])
def test_a_garbled_manifest_is_refused(record, tmp_path, content):
    folder = write_record(record, tmp_path / "run")
    (folder / "manifest.json").write_text(content, encoding="utf-8")
    with pytest.raises(RecordError, match=r"manifest\.json: the manifest"):
        read_record(folder)
