from dataclasses import replace

import pytest

from backtest.judging.battery import TESTS as BATTERY
from backtest.judging.sufficiency import ES_NOTE
from backtest.reporting.effects import TESTS, estimate
from backtest.reporting.prose import prose
from backtest.reporting.sentences import six_sentences
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


def test_what_judging_says_of_the_es_interval_stands_in_the_sentence_and_below_the_table(record):
    made = changed(record, "sufficient-es-multiple", note=ES_NOTE)
    words = ES_NOTE.removeprefix("interval ")
    assert f"The ES interval is 95% ({words})." in six_sentences(made)[2]
    firm = next(d for d in summary_view(made).desks if d.name == FIRM)
    assert f"sufficient multiple of ES: {ES_NOTE}." in firm.results[0].note


def test_every_test_of_the_battery_has_a_name_and_a_unit():
    assert set(BATTERY) <= set(TESTS)
    assert len({name for name, _ in TESTS.values()}) == len(TESTS)
    assert all(name != key for key, (name, _) in TESTS.items())


@pytest.mark.parametrize(
    ("test", "value", "low", "high", "words"),
    [
        ("first-exception", 0.0625, 0.0016, 0.218, "6.2% [0.16% to 21.8%]"),
        ("dynamic-quantile", 14.4, 0.96, 44.0, "14.4 points [1.0 to 44.0]"),
        ("es-zones", 1.25, 1.02, 2.05, "1.25 times [1.02 to 2.05]"),
        ("berkowitz-tail", 1.25, 0.98, None, "1.25 times [at least 0.98; no upper limit at this length]"),
        ("berkowitz", 1.19, 1.096, 1.307, "deviation 1.19 [1.10 to 1.31]"),
        ("e-process", 6.2161, None, None, "6.22 times the start"),
        ("e-process", 1e300, None, None, "over a million times the start"),
        ("multinomial-nass", None, None, None, "–"),
    ],
)
def test_an_estimate_carries_its_unit(test, value, low, high, words):
    row = {"test": test, "estimate": value, "low": low, "high": high, "direction": "", "note": ""}
    assert estimate(row, "EUR") == words


@pytest.mark.parametrize(
    ("note", "words"),
    [
        ("needs historical, conditional-evt at 0.975", "needs historical, conditional-evt at 97.5%"),
        ("p 0.02 at shape 0, 0.002 at shape 0.3", "p 0.02 at shape 0, 0.002 at shape 0.3"),
        ("power at 250 days against: sigma understated by 20%", "power at 250 days against sigma understated by 20%"),
        ("needs pit on 10 days below VaR, has 3", "needs a PIT on 10 days below VaR, has 3"),
        ("of the exceptions only (L - ES)/sigma enters", "of the exceptions only the loss less ES, over sigma, enters"),
    ],
)
def test_what_judging_writes_reads_as_words(note, words):
    assert prose(note) == words


def test_a_note_is_not_cut_inside_its_brackets(record):
    note = "zone green: red from 6 (95% and 99.99%; informational, not a rule); joint test"
    table = record.results.copy()
    rows = (table["test"] == "binomial") & (table["level"] == 0.99)
    table.loc[rows, "note"] = note
    firm = next(d for d in summary_view(replace(record, results=table)).desks if d.name == FIRM)
    assert f"at 99%: {note}." in firm.results[0].note


def test_what_several_tests_say_is_said_once(record):
    table = record.results.copy()
    table.loc[table["test"].isin(["binomial", "mcneil-frey"]) & (table["desk"] == FIRM), "note"] = "alike; in both"
    firm = next(d for d in summary_view(replace(record, results=table)).desks if d.name == FIRM)
    assert firm.results[0].note == "Exact binomial; McNeil and Frey, ES residuals: alike; in both."


def test_the_power_beside_a_tail_too_heavy_is_said_to_be_against_one_too_thin(record):
    made = changed(record, "binomial", phrase="evidence that the tail is too heavy")
    assert answers(made, "Exact binomial") == {
        "evidence that the tail is too heavy (power against a tail too thin 40 in 100)"
    }
