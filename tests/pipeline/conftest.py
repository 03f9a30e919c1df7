"""One run of the invented study, shared by the tests of the pipeline and the command line."""

from dataclasses import dataclass
from pathlib import Path

import pytest

from backtest.recording.run_folder import read_record
from backtest.records import Record
from tests.reference.invented_studies import (
    REVIEWED,
    Said,
    pnl_table,
    reported_table,
    study_text,
    tailmark,
    write_study,
)


@dataclass(frozen=True)
class Ran:
    """A study, what its run printed, the run folder and its record."""

    study: Path
    said: Said
    folder: Path
    record: Record


def run_by_command(study: Path, *options: object) -> Ran:
    """Run a study by the command line and read its record."""
    said = tailmark("run", study, *options)
    folder = Path(said.out.splitlines()[-1].removeprefix("Summary: ")).parent
    return Ran(study, said, folder, read_record(folder))


@pytest.fixture(scope="session")
def tables():
    return {"pnl.csv": pnl_table(), "reported.csv": reported_table()}


@pytest.fixture(scope="session")
def reviewed(tables, tmp_path_factory) -> Ran:
    """Return the run of the study with a reported model, a firm and a short desk."""
    study = write_study(tmp_path_factory.mktemp("reviewed"), tables, study_text(**REVIEWED))
    return run_by_command(study, "--workers", 1)


@pytest.fixture(scope="session")
def alone(tables, tmp_path_factory) -> Ran:
    """Return the run of a study that supplies one desk's hypothetical P&L and nothing else."""
    pnl = tables["pnl.csv"]
    one = pnl[(pnl["desk"] == "Lumber") & (pnl["known_on"] == pnl["date"])]
    files = {"pnl.csv": one[["date", "desk", "hypothetical"]]}
    study = write_study(tmp_path_factory.mktemp("alone"), files, study_text(forecast="fallback_share = 0.05"))
    return run_by_command(study)
