from dataclasses import replace

import pytest

from backtest.judging.sufficiency import ES_NOTE
from backtest.reporting.prose import BOOTSTRAP
from backtest.reporting.view import summary_view
from tests.reference.invented_record import FIRM, SUBJECT, invented_record


@pytest.fixture(scope="module")
def record():
    return invented_record()


def changed(record, test, **columns):
    table = record.results.copy()
    rows = (table["test"] == test) & (table["desk"] == FIRM) & (table["model"] == SUBJECT)
    for name, value in columns.items():
        table.loc[rows, name] = value
    return replace(record, results=table)


def answers(record, name):
    firm = next(d for d in summary_view(record).desks if d.name == FIRM)
    return {r[-1] for t in firm.results for r in t.rows if r[2] == name}


@pytest.mark.parametrize(
    ("columns", "words"),
    [
        ({"exceptions": 9, "days": 250}, "no evidence (power 40 in 100)"),
        ({"exceptions": 1, "days": 250}, "no evidence (power against VaR too low 40 in 100)"),
        ({"could_see": None, "exceptions": 9}, "no evidence"),
        ({"could_see": 0.004, "exceptions": 9, "days": 250}, "no evidence (power fewer than 1 in 100)"),
    ],
)
def test_power_stands_beside_an_answer_wherever_it_is_known(record, columns, words):
    made = changed(record, "binomial", decision="not rejected", phrase="no evidence", **columns)
    assert answers(made, "Exact binomial") == {words}


def test_the_power_beside_evidence_of_too_high_a_var_is_said_to_be_against_too_low(record):
    made = changed(record, "binomial", phrase="evidence that VaR is too high")
    assert answers(made, "Exact binomial") == {"evidence that VaR is too high (power against VaR too low 40 in 100)"}


@pytest.mark.parametrize(
    ("kept", "words"),
    [
        (lambda f: f["level"] < 0, {"not tested: needs ES, of which none was given"}),
        (lambda f: f["level"] == 0.975, {
            "not tested: needs ES at 99%; it was given at 97.5% only",
            "not tested: needs ES on days judged; it was given on 500 other days only",
        }),
    ],
)  # fmt: skip
def test_what_lacks_es_says_which(record, kept, words):
    forecasts = record.forecasts.assign(es=record.forecasts["es"].where(kept(record.forecasts)))
    made = changed(
        replace(record, forecasts=forecasts),
        "mcneil-frey",
        phrase="not tested: needs es",
        p_value=None,
        decision="not tested",
    )
    assert answers(made, "McNeil and Frey, ES residuals") == words


def test_recorded_symbols_are_said_in_words(record):
    made = changed(record, "binomial", note="could_see: exact; pi11 - pi01 not defined; 1 exceptions, needs 11 days")
    note = next(d for d in summary_view(made).desks if d.name == FIRM).results[0].note
    assert note.startswith(
        "Exact binomial: power: exact; chance of an exception after one less that after none not defined; 1 exception, "
        "needs 11 days. "
    )


@pytest.mark.parametrize(
    ("score", "words"),
    [
        ("tick", "lower tick score: EUR −12.3 k [EUR −45.6 k to EUR 789], p = 0.16"),
        ("FZ0", "lower FZ0 score: −12,345 [−45,600 to 789] (FZ0, no unit), p = 0.16"),
    ],
)
def test_a_score_difference_carries_its_unit(record, score, words):
    table = record.results.copy()
    rows = table["test"] == "diebold-mariano"
    table.loc[rows, ["estimate", "low", "high"]] = [-12345.0, -45600.0, 789.0]
    table.loc[rows, "direction"] = f"lower {score} score"
    firm = next(d for d in summary_view(replace(record, results=table)).desks if d.name == FIRM)
    assert {r[-1] for t in firm.challengers for r in t.rows} == {words}


def test_a_tick_score_change_of_the_bridge_is_money(record):
    steps = record.bridge.assign(score_name="tick", score_change=-37539.0, low=-76842.0, high=1764.0)
    bridge = summary_view(replace(record, bridge=steps)).bridge
    assert bridge.rows[1][6] == "EUR −37.5 k [EUR −76.8 k to EUR 1.76 k]"
    assert bridge.note.startswith("Score: tick (in EUR), difference")
    assert summary_view(record).bridge.note.startswith("Score: FZ0 (no unit), difference")


def test_flagged_statuses_stand_in_the_chapter_on_models(record):
    manifest = record.manifest | {"fallbacks": {"forecasts": 2000, "fallbacks": 0, "by_status": {"no reaction": 25}}}
    models = summary_view(replace(record, manifest=manifest)).models
    assert (models[-1].label, models[-1].text) == (
        "Status: no reaction",
        "25 of 2,000 desk x day x model forecasts (1.2%), kept as made",
    )


def test_a_named_rule_that_was_not_applied_is_a_fact_of_the_first_page():
    record = invented_record(firm=False)
    study = record.manifest["study"]
    study = study | {"review": study["review"] | {"rules": "basel-mar32"}}
    facts = summary_view(replace(record, manifest=record.manifest | {"study": study})).facts
    assert [f.text for f in facts if f.label == "Rule basel-mar32"] == [
        "not applied, since no desk is named as the firm-wide row"
    ]


def test_the_label_of_the_bootstrap_is_the_one_judging_writes():
    assert BOOTSTRAP == ES_NOTE  # two rooms, which do not import each other
