"""The study file itself: what is no path, no TOML, or of the wrong form is refused in plain words."""

from pathlib import Path

import pytest

from backtest.errors import StudyError
from backtest.study import read_study

SMALL = '[data]\npnl = "pnl.csv"\n'


def written(folder: Path, text: str | bytes, name: str = "study.toml") -> Path:
    path = folder / name
    path.write_bytes(text if isinstance(text, bytes) else text.encode())
    return path


@pytest.mark.parametrize("path", [None, 5, b"study.toml", "a\0b.toml", ["study.toml"]])
def test_what_is_no_path_is_refused(path):
    with pytest.raises(StudyError, match="no path of a study file"):
        read_study(path)


def test_a_byte_order_mark_is_no_part_of_the_study(tmp_path):
    assert read_study(written(tmp_path, b"\xef\xbb\xbf" + SMALL.encode())).data.pnl == "pnl.csv"


def test_a_study_that_is_not_there_is_answered_with_the_near_miss(tmp_path):
    written(tmp_path, SMALL, "market.toml")
    with pytest.raises(StudyError, match=r"Did you mean 'market\.toml'\?"):
        read_study(tmp_path / "markt.toml")
    with pytest.raises(StudyError, match="no TOML file in"):
        read_study(tmp_path / "nowhere" / "market.toml")


REFUSED = {
    "nested too deeply": ("x = " + "[" * 2000 + "]" * 2000, "nested too deeply"),
    "a number too long to be read": ("seed = " + "1" * 5000, "not valid TOML"),
    "bytes that are no UTF-8": (b"title = '\xff'", "not valid TOML"),
    "a file with a NUL": ('[data]\npnl = "a\\u0000b.csv"\n', "data.pnl: a path holds no NUL character"),
    "a value where a list belongs": (SMALL + "[forecast]\nlevels = 0.99\n", "forecast.levels: a list is needed"),
    "a value where a table belongs": ("data = 5\n", "data: a table is needed"),
    "a list where a table belongs": ("data = [5]\n", "data: a table is needed"),
    "a level twice": (SMALL + "[forecast]\nlevels = [0.99, 0.99]\n", "forecast.levels: a value stands twice"),
    "a span twice": (SMALL + "[review]\ndays = [250, 250]\n", "review.days: a value stands twice"),
}


@pytest.mark.parametrize("case", REFUSED)
def test_the_form_is_refused_in_one_line_of_plain_words(tmp_path, case):
    text, says = REFUSED[case]
    with pytest.raises(StudyError) as caught:
        read_study(written(tmp_path, text))
    line = str(caught.value)
    assert says in line
    assert not [word for word in ("tuple", "dictionary", "instance", "\n") if word in line]
