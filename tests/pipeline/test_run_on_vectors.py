"""A run that learns from vectors: the record and the page say which past each desk's challengers learnt from."""

import pandas as pd
import pytest

from backtest.recording.run_folder import read_record
from backtest.records import Record
from tests.reference.datasets import garch_t, pnl_series
from tests.reference.invented_studies import tailmark, write_study
from tests.reference.invented_vectors import long_vectors

STUDY = """
[data]
pnl = "pnl.csv"
vectors = "vectors.csv"
[forecast]
window = 100
learn_from = "vectors"
models = ["historical", "ewma-normal"]
{forecast}
[judge]
simulations = 99
"""


@pytest.fixture(scope="module")
def files() -> dict[str, pd.DataFrame]:
    pnl = pnl_series((1000 * garch_t(400, 3)[0]).round(2))
    tables = [pnl.rename("hypothetical").rename_axis("date").reset_index().assign(desk=d) for d in ("Lumber", "Wool")]
    whole, short = (
        long_vectors(pnl, range(130, 400), 120, desk="Lumber"),
        long_vectors(pnl, range(120, 130), 90, desk="Lumber"),
    )
    return {"pnl.csv": pd.concat(tables), "vectors.csv": pd.concat([whole, short])}


@pytest.fixture(scope="module")
def ran(files, tmp_path_factory) -> tuple[Record, str]:
    study = write_study(tmp_path_factory.mktemp("vectors"), files, STUDY.format(forecast=""))
    said = tailmark("run", study)
    assert said.code == 0
    folder = study.parent / "study-run"
    return read_record(folder), (folder / "summary.html").read_text(encoding="utf-8")


def test_the_manifest_says_what_each_desk_learnt_from(ran):
    desks = ran[0].manifest["desks"]
    kept = {name: {k: desk[k] for k in ("learn_from", "vectors", "scenarios")} for name, desk in desks.items()}
    assert kept == {
        "Lumber": {"learn_from": "vectors", "vectors": 280, "scenarios": [90, 120]},
        "Wool": {"learn_from": "vectors", "vectors": 0, "scenarios": [0, 0]},
    }
    assert "vectors" in {s["role"] for s in ran[0].manifest["inputs"]}


def test_only_days_with_a_full_vector_are_forecast(ran, files):
    made = ran[0].forecasts
    assert set(made["desk"]) == {"Lumber"}
    days = files["pnl.csv"]["date"].unique()[130:400]
    assert made.loc[made["model"] == "historical", "date"].unique().tolist() == days.tolist()


def test_the_page_says_which_past_was_used(ran):
    assert "P&amp;L vectors: each day&#39;s positions under 90 to 120 past market moves, on 280 days" in ran[1]
    assert "P&amp;L vectors, of which this desk has none" in ran[1]


def test_the_page_of_a_run_on_pnl_says_so(files, tmp_path):
    study = write_study(
        tmp_path, files, STUDY.format(forecast="").replace('"vectors"\nmodels', '"hypothetical"\nmodels')
    )
    assert tailmark("run", study).code == 0
    assert "past hypothetical P&amp;L" in (study.parent / "study-run" / "summary.html").read_text(encoding="utf-8")


def test_recalibrating_less_than_daily_is_refused_before_any_data_are_read(tmp_path):
    text = STUDY.format(forecast="recalibrate_days = 5").replace('"ewma-normal"', '"conditional-evt"')
    said = tailmark("check", write_study(tmp_path, {}, text.replace("window = 100", "window = 500")))
    assert said.code == 2
    assert "'conditional-evt'" in said.err
    assert "Set recalibrate_days = 1" in said.err
