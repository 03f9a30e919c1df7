import datetime as dt
import json
import platform
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from backtest.errors import RecordError
from backtest.recording.manifest import (
    FORMAT,
    count_fallbacks,
    is_fallback,
    make_manifest,
    manifest_text,
    plain,
    run_id,
)
from backtest.records import REPORTED_STATUS, Source

NINE = dt.datetime(2026, 1, 5, 9, 0, tzinfo=dt.timezone(dt.timedelta(hours=1)))
STUDY = {"title": "Invented", "seed": 7, "review": {"days": (250, "all")}}


def forecasts():
    rows = [
        ("2025-01-02", "Rates", "HS", 0.99, REPORTED_STATUS),
        ("2025-01-02", "Rates", "evt", 0.975, "ok"),
        ("2025-01-02", "Rates", "evt", 0.99, "ok"),
        ("2025-01-03", "Rates", "evt", 0.975, "second mode; fallback: ewma"),
        ("2025-01-03", "Rates", "evt", 0.99, "second mode; fallback: ewma"),
        ("2025-01-03", "NA", "evt", 0.99, "ok"),
    ]
    return pd.DataFrame(rows, columns=["date", "desk", "model", "level", "status"])


def made(**changes):
    arguments = {
        "study": STUDY,
        "sources": [Source("pnl", "pnl.csv", "ab" * 32, 12)],
        "seeds": {"study": 7},
        "forecasts": forecasts(),
        "started": NINE,
        "finished": NINE + dt.timedelta(seconds=30),
        "extra": {"as_of": np.datetime64("2025-12-31"), "models": [{"name": "evt"}]},
    }
    return make_manifest(**arguments | changes)


def test_the_manifest_says_what_went_in_and_with_what():
    manifest = made()
    assert manifest["format"] == FORMAT
    assert manifest["inputs"] == [{"role": "pnl", "name": "pnl.csv", "sha256": "ab" * 32, "rows": 12}]
    assert manifest["study"] == {"title": "Invented", "seed": 7, "review": {"days": [250, "all"]}}
    assert manifest["versions"]["python"] == platform.python_version()
    assert set(manifest["versions"]) == {"python", "numpy", "scipy", "pandas", "numba"}
    assert manifest["versions"]["numpy"] == np.__version__
    assert manifest["as_of"] == "2025-12-31"


def test_times_are_utc():
    manifest = made()
    assert (manifest["started"], manifest["finished"]) == ("2026-01-05T08:00:00Z", "2026-01-05T08:00:30Z")


def test_a_time_without_zone_is_refused():
    with pytest.raises(RecordError, match="no time zone"):
        made(started=dt.datetime(2026, 1, 5, 9, 0))


def test_a_key_given_twice_is_refused():
    with pytest.raises(RecordError, match=r"given twice, found 'run'"):
        made(extra={"run": "x"})


def test_fallbacks_are_counted_a_desk_model_and_day_not_a_level():
    counted = count_fallbacks(forecasts())
    assert (counted["forecasts"], counted["fallbacks"]) == (3, 1)
    assert counted["by_status"] == {"ok": 2, "second mode; fallback: ewma": 1}
    share = {"model": "evt", "desk": "Rates", "forecasts": 2, "fallbacks": 1, "share": 0.5}
    assert counted["by_model_and_desk"] == [share]


def test_without_challengers_nothing_fell_back():
    own = forecasts()
    counted = count_fallbacks(own[own["status"] == REPORTED_STATUS])
    assert (counted["forecasts"], counted["fallbacks"], counted["by_status"]) == (0, 0, {})


def test_a_status_is_a_fallback_where_one_of_its_parts_begins_so():
    statuses = pd.Series(["ok", "fallback", "fallback: ewma", "ok; fallback: zs", "no fallback needed"])
    assert list(is_fallback(statuses)) == [False, True, True, True, False]


def test_the_run_id_depends_on_inputs_and_settings_only():
    later = made(started=NINE + dt.timedelta(days=1), finished=NINE + dt.timedelta(days=1))
    assert made()["run"] == later["run"]
    assert len(made()["run"]) == 12
    assert made(study=STUDY | {"seed": 8})["run"] != made()["run"]
    assert made(sources=[Source("pnl", "pnl.csv", "cd" * 32, 12)])["run"] != made()["run"]
    assert run_id([], {}) != run_id([], {"a": 1})


def test_the_text_is_sorted_json_with_a_newline_and_no_nan():
    text = manifest_text({"b": np.float64("nan"), "a": np.int64(3)})
    assert text == '{\n "a": 3,\n "b": null\n}\n'
    assert list(json.loads(manifest_text(made()))) == sorted(made())


def test_no_path_of_this_machine_is_inside():
    text = manifest_text(made())
    assert str(Path.cwd()) not in text
    assert str(Path.home()) not in text
    assert platform.node() not in text


def test_plain_makes_every_value_json_ready():
    value = plain({"day": np.datetime64("2025-12-31T00:00"), "date": dt.date(2025, 1, 2), "t": (1, np.bool_(True))})
    assert value == {"day": "2025-12-31", "date": "2025-01-02", "t": [1, True]}
