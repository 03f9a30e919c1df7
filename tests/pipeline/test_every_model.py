"""The study of every filter with every tail: it names them all, and a short version of it runs from end to end."""

import tomllib
from collections import Counter
from pathlib import Path
from typing import NamedTuple

import numpy as np
import pandas as pd
import pytest

from backtest.forecasting.filters import FILTERS
from backtest.forecasting.models import INNOVATIONS, LIBRARY, resolve_all
from backtest.forecasting.processes import PROCESSES
from backtest.forecasting.tails import TAILS
from backtest.recording.run_folder import read_record
from backtest.records import FALLBACK, Record
from tests.reference.invented_studies import Said, tailmark
from tests.studies.make_sp500 import MODEL, write

STUDY = Path(__file__).parents[1] / "studies" / "every-model.toml"
WINDOW, DAYS = 1000, 60


def named() -> list[dict]:
    return tomllib.loads(STUDY.read_text(encoding="utf-8"))["forecast"]["model"]


def test_the_study_names_every_filter_with_every_tail_once():
    found = Counter((m["filter"], m.get("innovations", ""), m["tail"]) for m in named())
    plain = [(kind, "") for kind in FILTERS if kind not in ("garch", "gjr", LIBRARY)]
    fitted = [(kind, law) for kind in ("garch", "gjr") for law in INNOVATIONS]
    library = [(f"{LIBRARY}:{process}", "") for process in PROCESSES]
    assert found == Counter((*pair, tail) for pair in plain + fitted + library for tail in TAILS)


def test_every_model_of_the_study_resolves_under_a_name_of_its_own():
    models = resolve_all(named(), levels=(0.975, 0.99), window=WINDOW)
    assert len({(m.filter, m.tail) for m in models}) == len(models) == len(named())


class Ran(NamedTuple):
    said: Said
    record: Record
    page: str


@pytest.fixture(scope="module")
def ran(tmp_path_factory) -> Ran:
    """Return the study as it stands, run on the last days of the series alone: 60 forecast days, not 4,030."""
    folder = tmp_path_factory.mktemp("every-model")
    (folder / STUDY.name).write_bytes(STUDY.read_bytes())
    write(folder, WINDOW + DAYS)
    said = tailmark("run", folder / STUDY.name, "--out", folder / "run")
    page = (folder / "run" / "summary.html").read_text(encoding="utf-8")
    return Ran(said, read_record(folder / "run"), page)


def challenged(record: Record) -> pd.DataFrame:
    """Return the forecasts of the study's own models: a run adds those of the bridge to them."""
    return record.forecasts[record.forecasts["model"].isin([m["name"] for m in named()])]


@pytest.mark.slow
def test_the_run_ends_well(ran):
    assert ran.said.code == 0, ran.said.err


@pytest.mark.slow
def test_every_model_has_a_forecast_on_every_judged_day(ran):
    days = ran.record.pnl["date"].to_numpy()[WINDOW:]
    assert len(days) == DAYS
    rows = challenged(ran.record)
    assert set(rows["model"]) == {m["name"] for m in named()}
    for (model, level), own in rows.groupby(["model", "level"]):
        np.testing.assert_array_equal(own["date"].to_numpy(), days, err_msg=f"{model} at {level:g}")


@pytest.mark.slow
def test_var_and_es_are_numbers_and_es_is_never_below_var(ran):
    rows = challenged(ran.record)
    assert np.isfinite(rows[["var", "es"]].to_numpy()).all()
    assert (rows["es"] >= rows["var"] * (1 - 1e-12)).all()  # one day bears the whole tail: equal but for rounding


@pytest.mark.slow
def test_statuses_are_counted_in_the_record_and_shown_in_the_page(ran):
    ours = ran.record.forecasts[ran.record.forecasts["model"] != MODEL]
    one = ours.drop_duplicates(["model", "date"])
    counted = ran.record.manifest["fallbacks"]
    assert counted["forecasts"] == len(one)
    assert counted["by_status"] == one["status"].value_counts().to_dict()
    assert counted["fallbacks"] == one["status"].str.contains(FALLBACK).sum()
    parts = Counter(part for status in one["status"] for part in status.split("; "))
    flagged = {part: n for part, n in parts.items() if part != "ok" and not part.startswith(FALLBACK)}
    assert flagged  # the last days of 2018 hold some
    text = " ".join(ran.page.split())
    assert [part for part, n in flagged.items() if f"{part} {n:,}" not in text] == []


@pytest.mark.slow
def test_the_page_names_every_model(ran):
    assert [m["name"] for m in named() if m["name"] not in ran.page] == []
