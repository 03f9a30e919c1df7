"""Tables that cannot mean what the study says are refused with place, value and remedy; nothing is half-read."""

from pathlib import Path

import pytest

from backtest.errors import DataError, StudyError
from backtest.reading.inputs import read_inputs
from tests.reference.broken_inputs import (
    ALONE,
    DESKS,
    ES_LOW,
    FILES,
    NEGATIVE,
    SMALL,
    STUDY,
    Broken,
    assert_refused,
    pnl_with,
    reported_with,
)
from tests.reference.invented_extract import business_days, invented, reported_text, written_study

CASES = [
    Broken(
        "a named column absent",
        DataError,
        ("pnl.csv", "'hypotetical'", "Did you mean 'hypothetical'?"),
        columns='hypothetical = "hypotetical"',
    ),
    Broken(
        "a named optional column absent",
        DataError,
        ("pnl.csv", "'apl'", "data.columns.actual"),
        columns='actual = "apl"',
    ),
    Broken(
        "two keys on one column",
        StudyError,
        ("pnl.csv", "'hypothetical'", "once"),
        columns='hypothetical = "hypothetical"\nactual = "hypothetical"',
    ),
    Broken(
        "no level column",
        DataError,
        ("reported.csv", "'level'", "var = ["),
        {"reported.csv": FILES["reported.csv"].replace("level", "lvl")},
    ),
    Broken(
        "a wide column absent",
        DataError,
        ("reported.csv", "'var_99'", "data.columns.var"),
        columns='var = [{ column = "var_99", level = 0.99 }]',
    ),
    Broken(
        "ES at a level without VaR",
        StudyError,
        ("data.columns", "0.975", "level by level"),
        columns='var = [{ column = "var", level = 0.99 }]\nes = [{ column = "es", level = 0.975 }]',
    ),
    Broken(
        "a level like 99",
        DataError,
        ("reported.csv, line 3, column 'level'", "'99'", "Write 0.99"),
        reported_with(3, f"{business_days(2)[1]},Lumber,House HS,99,2000,"),
    ),
    Broken(
        "a level like 0.01",
        DataError,
        ("reported.csv, line 3", "'0.01'", "Write 0.99"),
        reported_with(3, f"{business_days(2)[1]},Lumber,House HS,0.01,2000,"),
    ),
    Broken(
        "the same day twice",
        DataError,
        ("pnl.csv, line 4", "2022-01-04 x 'Lumber'", "first in line 3", "known_on"),
        pnl_with(4, "2022-01-04,Lumber,5"),
    ),
    Broken(
        "the same forecast twice",
        DataError,
        ("reported.csv, line 4", "first in line 3", "Remove"),
        reported_with(4, "2022-01-04,Lumber,House HS,0.99,2000,"),
    ),
    Broken(
        "known twice on one day",
        DataError,
        ("pnl.csv, line 3", "stands once per known_on", "Remove"),
        {"pnl.csv": "date,desk,hypothetical,known_on\n" + 2 * "2022-01-03,Lumber,1,2022-01-05\n"},
    ),
    Broken(
        "known before its date",
        DataError,
        ("pnl.csv, line 3, column 'known_on'", "'2022-01-03'", "Correct"),
        {"pnl.csv": "date,desk,hypothetical,known_on\n2022-01-03,Lumber,1,\n2022-01-04,Lumber,2,2022-01-03\n"},
    ),
    Broken(
        "negative VaR",
        DataError,
        ("reported.csv", "120 of 240 rows (50.0%)", "data.var_sign"),
        {"reported.csv": reported_text(NEGATIVE)},
    ),
    Broken(
        "VaR declared negative",
        DataError,
        ("reported.csv", "240 of 240 rows (100.0%)", "data.var_sign"),
        data='var_sign = "negative"',
    ),
    Broken(
        "ES below VaR",
        DataError,
        ("reported.csv", "120 of 120 rows (100.0%)", "data.columns.es"),
        {"reported.csv": reported_text(ES_LOW)},
    ),
    Broken(
        "a PIT above 1",
        DataError,
        ("reported.csv, line 2, column 'pit'", "'1.5'", "Check"),
        {"reported.csv": "date,desk,level,var,pit\n2022-01-03,Lumber,0.99,1,1.5\n"},
    ),
    Broken(
        "no VaR at all",
        DataError,
        ("reported.csv", "no row carries a VaR", "data.columns.var"),
        {"reported.csv": "date,desk,level,var\n2022-01-03,Lumber,0.99,\n"},
    ),
    Broken(
        "an unknown flag",
        DataError,
        ("pnl.csv, line 3, column 'flag'", "'fileld'", "Did you mean 'filled'?"),
        {"pnl.csv": "date,desk,hypothetical,flag\n2022-01-03,Lumber,1,\n2022-01-04,Lumber,1,fileld\n"},
    ),
    Broken(
        "two currencies",
        DataError,
        ("pnl.csv, line 3", "'USD'", "Convert"),
        {"pnl.csv": "date,desk,hypothetical,currency\n2022-01-03,Lumber,1,EUR\n2022-01-04,Lumber,1,USD\n"},
    ),
    Broken(
        "a desk the desks file lacks",
        DataError,
        ("pnl.csv, line 62", "'Wool'", "Did you mean 'Woll'?"),
        {"desks.csv": "desk\nLumber\nWoll\n"},
        data='desks = "desks.csv"',
    ),
    Broken(
        "a desk listed twice",
        DataError,
        ("desks.csv, line 4", "'Wool'", "Keep one"),
        {"desks.csv": DESKS + "Wool,\n"},
        data='desks = "desks.csv"',
    ),
    Broken(
        "a desk above itself",
        DataError,
        ("desks.csv, line 2", "'Wool'", "parents"),
        {"desks.csv": DESKS.replace("Lumber,\n", "Lumber,Wool\n")},
        data='desks = "desks.csv"',
    ),
    Broken(
        "a desk that ends before it begins",
        DataError,
        ("desks.csv, line 3, column 'valid_to'", "'2021-01-01'", "Correct"),
        {"desks.csv": "desk,valid_from,valid_to\nLumber,,\nWool,2022-01-01,2021-01-01\n"},
        data='desks = "desks.csv"',
    ),
    Broken(
        "an unknown kind of change",
        DataError,
        ("changes.csv, line 2, column 'kind'", "'modell'", "Did you mean 'model'?"),
        {"changes.csv": "date,desk,kind\n2022-01-04,Wool,modell\n"},
        data='changes = "changes.csv"',
    ),
    Broken(
        "a change of an unknown desk",
        DataError,
        ("changes.csv, line 2", "'Wol'", "Did you mean 'Wool'?"),
        {"changes.csv": "date,desk,kind\n2022-01-04,Wol,model\n"},
        data='changes = "changes.csv"',
    ),
    Broken(
        "a short calendar",
        DataError,
        ("calendar.csv", "2022-01-03 to 2022-01-04", "Extend"),
        {"calendar.csv": "date\n2022-01-03\n2022-01-04\n"},
        data='calendar = "calendar.csv"',
    ),
    Broken(
        "an unknown subject",
        StudyError,
        ("study.toml, review.subject", "'House HL'", "Did you mean 'House HS'?"),
        review='subject = "House HL"',
    ),
    Broken(
        "an unknown firm",
        StudyError,
        ("study.toml, review.firm", "'Lumbr'", "Did you mean 'Lumber'?"),
        study=STUDY.replace('"Lumber"', '"Lumbr"'),
    ),
    Broken("a cut-off before all P&L", StudyError, ("review.as_of", "2021-12-31", "Move"), review="as_of = 2021-12-31"),
    Broken(
        "a subject and no reported file",
        StudyError,
        ("data.reported", "'House HS'", "Set data.reported"),
        review='subject = "House HS"',
        study=STUDY.replace('reported = "reported.csv"', ""),
    ),
    Broken(
        "nothing to forecast or judge",
        DataError,
        ("pnl.csv", "window of 1000", "'Lumber'", "Shorten"),
        {"pnl.csv": SMALL},
        study=ALONE,
    ),
    Broken(
        "nothing to learn from",
        DataError,
        ("pnl.csv", "'actual'", "forecast.learn_from"),
        study=STUDY + 'learn_from = "actual"\n',
    ),
]


def test_the_unbroken_study_is_read(tmp_path: Path) -> None:
    inputs = read_inputs(written_study(tmp_path, STUDY.format(review="", data="", columns=""), FILES))
    assert (len(inputs.pnl), len(inputs.reported)) == (120, 240)


@pytest.mark.parametrize("case", CASES, ids=lambda case: case.name.replace(" ", "-"))
def test_broken_meaning_is_refused_with_place_value_and_remedy(tmp_path: Path, case: Broken) -> None:
    assert_refused(tmp_path, case)


@pytest.mark.parametrize(("bad", "refused"), [(3, False), (4, True)])
def test_five_percent_of_bad_rows_is_the_limit(tmp_path: Path, bad: int, refused: bool) -> None:
    table = invented(60, ("Lumber",))
    table.loc[: bad - 1, "var_99"] *= -1
    text = table[["date", "desk", "var_99"]].assign(level=0.99).rename(columns={"var_99": "var"}).to_csv(index=False)
    study = written_study(tmp_path, STUDY.format(review="", data="", columns=""), {**FILES, "reported.csv": text})
    if refused:
        with pytest.raises(DataError, match=r"4 of 60 rows \(6.7%\)"):
            read_inputs(study)
        return
    (remark,) = [r for r in read_inputs(study).remarks if r.rule == "var-negative"]
    days = business_days(3)
    assert (remark.desk, remark.count, remark.first, remark.last) == ("Lumber", 3, str(days[0]), str(days[2]))
