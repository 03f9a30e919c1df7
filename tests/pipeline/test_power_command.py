"""``tailmark power``: what it prints, how it refuses, and that the table travels with the package."""

import tomllib
from importlib.resources import files
from pathlib import Path

import pytest

from backtest.judging.power_lines import power_lines
from backtest.judging.power_table import FILE
from tests.reference.invented_studies import tailmark

ROOT = Path(__file__).parents[2]


def test_power_prints_the_lines_of_its_length_and_level():
    said = tailmark("power", "--days", 500, "--level", 0.975)
    assert (said.code, said.err) == (0, "")
    assert said.out.splitlines() == power_lines(500, 0.975)
    assert "Simulated power at 97.5%, 500 days." in said.out


def test_without_options_it_is_a_year_at_99_percent():
    assert tailmark("power").out == tailmark("power", "--days", 250, "--level", 0.99).out


def test_one_test_is_told_in_words():
    out = tailmark("power", "--days", 250, "--level", 0.99, "--test", "binomial").out
    assert out.startswith("binomial (how often)\n")
    assert "sigma understated by 20%: rejects in " in out
    assert " of 100 such reviews (could_see)" in out


@pytest.mark.parametrize(
    ("options", "says"),
    [
        (("--test", "kupeic"), "--test: unknown test, found 'kupeic'. Did you mean 'kupiec'?"),
        (("--level", "99"), "--level: the value cannot be used, found 99.0"),
        (("--days", "0"), "--days: the value cannot be used, found 0"),
    ],
)
def test_what_cannot_be_asked_is_one_line_and_exit_code_2(options, says):
    said = tailmark("power", *options)
    assert (said.code, said.out, said.err.count("\n")) == (2, "", 1)
    assert says in said.err


def test_the_table_is_declared_as_package_data():
    declared = tomllib.loads((ROOT / "pyproject.toml").read_text())["tool"]["setuptools"]["package-data"]["backtest"]
    patterns = [p for p in declared if FILE.is_file() and Path(str(FILE)).match(p)]
    assert patterns == ["judging/power.csv"]
    assert files("backtest.judging").joinpath("power.csv").read_text().startswith("test,level,days,alternative,")
