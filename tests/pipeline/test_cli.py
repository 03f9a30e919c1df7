"""The commands: what they print and where, their exit codes, and what they leave on disk. All data invented."""

import shutil
import subprocess
import sys
from pathlib import Path

import pytest

import backtest
from backtest import pipeline
from backtest.errors import DataError, FitError, RecordError, StudyError, TailmarkError
from backtest.recording.run_folder import TABLES, read_record
from backtest.reporting.sentences import QUESTIONS, six_sentences
from tests.reference.invented_extract import invented
from tests.reference.invented_studies import REVIEWED, calendar, historical, losses, study_text, tailmark, write_study

SHORT = study_text(**REVIEWED).replace(
    '"historical", "ewma-normal", "filtered-historical", "conditional-evt"', "{models}"
)


def contents(folder: Path) -> dict[str, bytes]:
    """Return every file below a folder, hidden ones and empty folders included, with its bytes."""
    return {str(p.relative_to(folder)): p.read_bytes() if p.is_file() else b"folder" for p in folder.rglob("*")}


@pytest.fixture(scope="session")
def small(tables):
    """Return the tables of one desk over 300 days: too few for a bridge."""
    first = calendar()[500]
    return {name: t[(t["desk"] == "Lumber") & (t["date"] >= first)] for name, t in tables.items()}


@pytest.fixture
def quick(small, tmp_path) -> Path:
    """Return a study that runs in a moment: one desk, one model, no simulated law."""
    text = SHORT.replace("{models}", '"historical"').replace("House", "Lumber") + '\ntests = ["binomial"]\n'
    return write_study(tmp_path / "quick", small, text)


# run


def test_run_is_done_with_exit_code_0(reviewed):
    assert reviewed.said.code == 0


def test_run_ends_with_six_sentences_a_caution_and_the_path(reviewed):
    *sentences, caution, path = reviewed.said.out.splitlines()
    assert sentences == [f"{i}. {s}" for i, s in enumerate(six_sentences(reviewed.record), 1)]
    assert [s.split(" ", 1)[1].startswith(q) for s, q in zip(sentences, QUESTIONS, strict=True)] == [True] * 6
    assert "not approval or advice" in caution
    assert path == f"Summary: {reviewed.study.parent / 'study-run' / 'summary.html'}"
    assert (reviewed.folder / "summary.html").stat().st_size > 10_000


def test_every_sentence_answers_more_than_its_question(reviewed, alone):
    for ran in (reviewed, alone):
        for sentence, question in zip(six_sentences(ran.record), QUESTIONS, strict=True):
            assert len(sentence.removeprefix(question).split()) >= 8, sentence


def test_progress_goes_to_standard_error_with_tasks_done(reviewed):
    lines = reviewed.said.err.splitlines()
    assert "forecasting desk x filter: 9 of 9" in lines
    assert "bridge by desk: 3 of 3" in lines
    assert lines[-1] == "writing the summary"
    assert max(len(line) for line in lines) <= 100


def test_a_run_folder_is_never_overwritten(quick):
    first = tailmark("run", quick).out.splitlines()[-1]
    kept = contents(quick.parent / "study-run")
    second, third = (tailmark("run", quick).out.splitlines()[-1] for _ in range(2))
    assert [Path(line.removeprefix("Summary: ")).parent.name for line in (first, second, third)] == [
        "study-run", "study-run-2", "study-run-3",
    ]  # fmt: skip
    assert contents(quick.parent / "study-run") == kept


def test_out_is_the_run_folder_itself_and_its_parents_are_made(quick, tmp_path):
    said = tailmark("run", quick, "--out", tmp_path / "new" / "mine", "--workers", 2)
    assert said.out.splitlines()[-1] == f"Summary: {tmp_path / 'new' / 'mine' / 'summary.html'}"
    assert {p.name for p in (tmp_path / "new" / "mine").iterdir()} == {
        "manifest.json",
        "summary.html",
        *TABLES.values(),
    }


def test_more_fallbacks_than_allowed_exit_with_3_and_a_finished_run(tmp_path, tables):
    desk = tables["pnl.csv"].query("desk == 'Lumber' and known_on == date").iloc[:300]
    files = {"pnl.csv": desk[["date", "desk"]].assign(hypothetical=-4.5)}
    text = study_text(forecast="fallback_share = 0").replace('"historical", ', "")
    said = tailmark("run", write_study(tmp_path, files, text))
    assert said.code == 3
    assert said.err.splitlines()[-1] == "66.7% of forecasts fell back, more than fallback_share = 0."
    assert said.out.splitlines()[-1] == f"Summary: {tmp_path / 'study-run' / 'summary.html'}"
    counted = read_record(tmp_path / "study-run").manifest["fallbacks"]
    assert (counted["fallbacks"], counted["forecasts"]) == (100, 150)
    assert [(r["model"], r["share"]) for r in counted["by_model_and_desk"]] == [
        ("conditional-evt", 1.0), ("filtered-historical", 1.0),
    ]  # fmt: skip


def test_a_share_that_allows_the_fallbacks_exits_with_0(tmp_path, tables):
    desk = tables["pnl.csv"].query("desk == 'Lumber' and known_on == date").iloc[:300]
    files = {"pnl.csv": desk[["date", "desk"]].assign(hypothetical=-4.5)}
    assert tailmark("run", write_study(tmp_path, files, study_text(forecast="fallback_share = 1"))).code == 0


# refusals

NO_MODEL = SHORT.replace("{models}", '"historicl"')
REFUSED = {
    "an unknown model": (NO_MODEL, "historicl", "Did you mean 'historical'?"),
    "an unknown key": (study_text(**REVIEWED, judge="simulation = 99"), "judge.simulation", "'simulations'"),
    "a file that is not there": (study_text(data='reported = "other.csv"'), "other.csv", ""),
    "an unknown subject": (study_text(**REVIEWED | {"review": 'subject = "HS-25"'}), "HS-25", "'HS-250'"),
    "no TOML": ("title = ", "study.toml", ""),
}


@pytest.mark.parametrize("command", ["check", "run"])
@pytest.mark.parametrize("case", REFUSED)
def test_a_refusal_is_one_line_exit_code_2_and_leaves_nothing(small, tmp_path, command, case):
    text, *says = REFUSED[case]
    study = write_study(tmp_path, small, text)
    before = contents(tmp_path)
    said = tailmark(command, study)
    assert said.code == 2
    assert said.out == ""
    line = said.err.splitlines()[-1]
    assert line.startswith("tailmark: ")
    assert [part for part in says if part not in line] == []
    assert [x for x in said.err.splitlines()[:-1] if x != "reading"] == []
    assert contents(tmp_path) == before


def test_a_place_that_cannot_be_written_is_refused_before_the_work(quick):
    (quick.parent / "file").write_text("in the way", encoding="utf-8")
    before = contents(quick.parent)
    said = tailmark("run", quick, "--out", quick.parent / "file" / "deep" / "run")
    assert said.code == 2
    (line,) = said.err.splitlines()
    assert line.startswith(f"tailmark: {quick.parent / 'file' / 'deep' / 'run'}: the run folder cannot be written")
    assert "--out" in line
    assert contents(quick.parent) == before


@pytest.mark.parametrize("out", ["", " ", "a\0b"])
def test_an_empty_or_broken_out_is_refused(quick, out):
    before = contents(quick.parent)
    said = tailmark("run", quick, "--out", out)
    assert said.code == 2
    (line,) = said.err.splitlines()
    assert "no path of a run folder" in line
    assert contents(quick.parent) == before


def test_a_folder_that_exists_even_empty_is_left_alone_and_said_so(quick, tmp_path):
    (tmp_path / "mine").mkdir()
    said = tailmark("run", quick, "--out", tmp_path / "mine")
    where = f"{tmp_path / 'mine'} exists, so the run is in {tmp_path / 'mine-2'}: nothing is overwritten."
    assert said.err.splitlines()[-1] == where
    assert said.out.splitlines()[-1] == f"Summary: {tmp_path / 'mine-2' / 'summary.html'}"
    assert contents(tmp_path / "mine") == {}


def test_a_refusal_after_the_work_leaves_nothing_either(quick, monkeypatch):
    monkeypatch.setattr(pipeline, "check_place", Path)
    (quick.parent / "file").write_text("in the way", encoding="utf-8")
    before = contents(quick.parent)
    said = tailmark("run", quick, "--out", quick.parent / "file" / "run")
    assert said.code == 2
    assert said.err.splitlines()[-1].startswith("tailmark: ")
    assert str(quick.parent / "file" / "run") in said.err
    assert contents(quick.parent) == before


COMMANDS = {
    "draft": ("draft", "x.csv"),
    "check": ("check", "{study}"),
    "run": ("run", "{study}"),
    "render": ("report", "folder"),
    "show": ("show", "folder", "House", "2024-01-02"),
}


@pytest.mark.parametrize("error", [TailmarkError, StudyError, DataError, FitError, RecordError])
@pytest.mark.parametrize("verb", COMMANDS)
def test_every_error_a_user_can_act_on_is_one_line_from_every_command(quick, monkeypatch, verb, error):
    def refuse(*_: object, **__: object) -> None:
        raise error("too\nlong", rule="short", value="a\nb", place="here", remedy="Shorten it.")

    monkeypatch.setattr(pipeline, verb, refuse)
    said = tailmark(*(part.format(study=quick) for part in COMMANDS[verb]))
    assert (said.code, said.out) == (2, "")
    assert said.err == "tailmark: here: too long, found 'a\\nb' [rule: short]. Shorten it.\n"


def test_anything_else_is_a_bug_and_keeps_its_traceback(quick, monkeypatch):
    def fail(*_: object, **__: object) -> None:
        raise ZeroDivisionError("a bug")

    monkeypatch.setattr(pipeline, "check", fail)
    with pytest.raises(ZeroDivisionError, match="a bug"):
        tailmark("check", quick)


def test_a_wrong_command_line_exits_with_2(quick):
    for arguments in (["rnu"], ["run"], ["run", quick, "--workers", "0"], ["run", quick, "--wrkers", "2"]):
        said = tailmark(*arguments)
        assert (said.code, said.out) == (2, "")
        assert "Traceback" not in said.err


def test_the_installed_command_refuses_in_one_line_too(tmp_path):
    command = [sys.executable, "-m", "backtest.cli", "check", str(tmp_path / "none.toml")]
    said = subprocess.run(command, capture_output=True, text=True, check=False, cwd=Path(__file__).parents[2])
    assert (said.returncode, said.stdout) == (2, "")
    assert said.stderr.count("\n") == 1
    assert "none.toml" in said.stderr


# check


def test_check_lists_files_days_and_remarks_and_writes_nothing(quick):
    before = contents(quick.parent)
    said = tailmark("check", quick)
    assert (said.code, said.err) == (0, "")
    assert "pnl: pnl.csv, 301 rows, sha256 " in said.out
    assert "1 desk, 300 business days, 2022-12-05 to 2024-01-26 (cut-off)" in said.out.splitlines()
    assert "- restated (pnl.csv, Lumber, 2023-09-11; 1): " in said.out
    assert contents(quick.parent) == before


# draft


def european_extract() -> str:
    """Return a wide extract with semicolons, decimal commas and days first: 1,300 days of a desk, HS by its bank."""
    loss = invented(1550, ("Lumber",), seed=3)
    past = -loss["hpl"].to_numpy()
    rows = loss.iloc[250:].assign(date=[d.strftime("%d.%m.%Y") for d in loss["date"].iloc[250:]])
    for name, level in (("var_99", 0.99), ("var_975", 0.975)):
        rows[name] = [historical(past[t - 250 : t], level)[0] for t in range(250, 1550)]
    rows["es_975"] = [historical(past[t - 250 : t], 0.975)[1] for t in range(250, 1550)]
    return rows.to_csv(index=False, sep=";", decimal=",", float_format="%.2f")


@pytest.fixture(scope="module")
def drafted(tmp_path_factory):
    """Return the folder of a drafted study saved as it stands, and what ``draft`` said."""
    folder = tmp_path_factory.mktemp("drafted")
    (folder / "extract.csv").write_text(european_extract(), encoding="utf-8")
    said = tailmark("draft", folder / "extract.csv")
    (folder / "study.toml").write_text(said.out, encoding="utf-8")
    return folder, said


def test_draft_writes_a_study_to_standard_output_alone(drafted):
    folder, said = drafted
    assert (said.code, said.err) == (0, "")
    assert 'separator = ";"  # confirm' in said.out
    assert 'decimal = ","  # confirm' in said.out
    assert {p.name for p in folder.iterdir()} >= {"extract.csv", "study.toml"}


def test_a_draft_confirmed_as_it_stands_checks(drafted):
    folder, _ = drafted
    said = tailmark("check", folder / "study.toml")
    assert (said.code, said.err) == (0, "")
    assert any(line.startswith("1 desk, 1,300 business days") for line in said.out.splitlines())


def test_a_draft_confirmed_as_it_stands_runs(drafted):
    folder, _ = drafted
    said = tailmark("run", folder / "study.toml")
    assert said.code == 0
    record = read_record(folder / "study-run")
    made = record.forecasts.groupby("model")["date"].nunique()
    assert made.to_dict() == {
        "reported": 1300, "historical": 300, "filtered-historical": 300, "unconditional-evt": 300,
        "conditional-evt": 300,
    }  # fmt: skip
    assert record.results["decision"].isin(["rejected", "not rejected"]).any()


def test_draft_refuses_what_is_no_extract(tmp_path):
    (tmp_path / "empty.csv").write_text("", encoding="utf-8")
    said = tailmark("draft", tmp_path / "empty.csv")
    assert (said.code, said.out, said.err.count("\n")) == (2, "", 1)


# report and show


def test_report_renders_the_same_page_again_from_the_record(reviewed, tmp_path):
    folder = tmp_path / "copy"
    shutil.copytree(reviewed.folder, folder)
    page = (folder / "summary.html").read_bytes()
    (folder / "summary.html").unlink()
    before = contents(folder)
    said = tailmark("report", folder)
    assert (said.code, said.err, said.out) == (0, "", f"Summary: {folder / 'summary.html'}\n")
    assert (folder / "summary.html").read_bytes() == page
    assert contents(folder) == before | {"summary.html": page}


@pytest.mark.parametrize(
    ("arguments", "says"),
    [
        (("report", "{folder}/none"), "no manifest"),
        (("show", "{folder}", "Lumbr", "2024-01-02"), "Did you mean 'Lumber'?"),
        (("show", "{folder}", "Wool", "2021-01-04"), "2023-08-14"),
        (("show", "{folder}", "Wool", "second of May"), "Write it as 2025-12-31"),
    ],
)
def test_what_no_record_holds_is_refused_in_one_line(reviewed, arguments, says):
    said = tailmark(*(part.format(folder=reviewed.folder) for part in arguments))
    assert (said.code, said.out, said.err.count("\n")) == (2, "", 1)
    assert says in said.err


def test_show_answers_what_was_recorded(reviewed):
    day = calendar()[-1]
    lines = tailmark("show", reviewed.folder, "Lumber", day.date()).out.splitlines()
    rows = reviewed.record.forecasts
    rows = rows[(rows["desk"] == "Lumber") & (rows["date"] == day)]
    assert len(rows) == 16  # reported, four models and the three steps of the bridge, each at two levels
    for row in rows.itertuples():
        level = f"{100 * row.level:g}%"
        line = next(x for i, x in enumerate(lines) if level in x.split() and said_of(lines, i) == row.model)
        assert f"{row.var:,.0f}" in line
    assert f"{abs(losses()['Lumber'][-1]):,.0f}" in lines[1]


def said_of(lines: list[str], place: int) -> str:
    """Return the model a line of the table is about: its first cell, or the line before where that is too long."""
    first = lines[place][:20].strip()
    return first or lines[place - 1].strip()


def test_show_fits_100_columns_on_every_day(reviewed):
    for desk, days in reviewed.record.pnl.groupby("desk")["date"]:
        for day in days.iloc[::199]:
            lines = tailmark("show", reviewed.folder, desk, day.date()).out.splitlines()
            assert max(len(line) for line in lines) <= 100


def test_show_says_both_values_of_a_restated_day(reviewed):
    out = tailmark("show", reviewed.folder, "Lumber", calendar()[700].date()).out
    known = -losses()["Lumber"][950]
    assert f"{abs(known):,.0f}" in out
    assert f"{abs(known - 60_000):,.0f}" in out


# demo


def test_the_demo_outside_a_checkout_says_so_with_exit_code_2(tmp_path):
    shutil.copytree(Path(backtest.__file__).parent, tmp_path / "backtest", ignore=shutil.ignore_patterns("__pycache__"))
    command = [sys.executable, "-m", "backtest.cli", "demo"]
    said = subprocess.run(command, capture_output=True, text=True, check=False, cwd=tmp_path)
    assert (said.returncode, said.stdout) == (2, "")
    assert said.stderr.count("\n") == 1
    assert "needs a checkout" in said.stderr
    assert not (tmp_path / "reports").exists()


@pytest.fixture
def checkout(quick, monkeypatch) -> Path:
    """Pretend that the quick study is the demo of a checkout."""
    root = quick.parent.parent
    quick.parent.rename(root / "data_demo")
    monkeypatch.setattr(pipeline, "__file__", str(root / "backtest" / "pipeline.py"))
    return root


def test_the_demo_replaces_its_own_folder(checkout):
    assert tailmark("demo").code == 0
    (checkout / "reports" / "demo" / "old.html").write_text("from the run before", encoding="utf-8")
    said = tailmark("demo")
    assert said.out.splitlines()[-1] == f"Summary: {checkout / 'reports' / 'demo' / 'summary.html'}"
    assert [p.name for p in (checkout / "reports").iterdir()] == ["demo"]
    assert not (checkout / "reports" / "demo" / "old.html").exists()


def test_the_demo_replaces_no_folder_that_is_not_its_own(checkout):
    (checkout / "reports" / "demo").mkdir(parents=True)
    (checkout / "reports" / "demo" / "mine.txt").write_text("kept", encoding="utf-8")
    assert tailmark("demo").code == 2
    assert contents(checkout / "reports") == {"demo": b"folder", "demo/mine.txt": b"kept"}
