"""Criteria: each is met, not met, or cannot be judged, and the outcome follows from them alone."""

import pytest

from backtest.judging.criteria import MET, NOT_MET, OUTCOME, UNJUDGED, Criteria, criteria_table
from backtest.judging.phrases import EVIDENCE
from backtest.records import CRITERIA_COLUMNS
from tests.reference.results import result

HOUSE = Criteria(1.2, 1.2, "green", "no evidence", 250)


def multiple(low=0.9, **more):
    return result(test="sufficient-var-multiple", question="by how much", p_value=None, estimate=1.3, low=low, **more)


def when(decision="not rejected", evidence="clustered", p=0.5, **more):
    phrase = EVIDENCE[evidence] if decision == "rejected" else "no evidence"
    return result(test="dynamic-quantile", question="when", p_value=p, decision=decision, phrase=phrase, **more)


def zone(word="green", **more):
    return result(test="basel-zone", question="by rule", p_value=None, decision=word, phrase=f"{word} zone", **more)


def answers(*rows, criteria=HOUSE, **more):
    table = criteria_table(rows, criteria, subject="bank", **more)
    assert tuple(table.columns) == CRITERIA_COLUMNS
    return dict(zip(table["criterion"], table["answer"], strict=True)), table


def test_everything_met_gives_met():
    found, _ = answers(zone(), multiple(), when())
    assert found == {"exceptions_zone": MET, "var_multiple_at_most": MET, "clustering": MET, OUTCOME: MET}


@pytest.mark.parametrize(("low", "answer"), [(1.2, MET), (1.2001, NOT_MET), (None, UNJUDGED)])
def test_a_multiple_is_compared_by_the_lower_end_of_its_interval(low, answer):
    assert answers(multiple(low=low))[0]["var_multiple_at_most"] == answer


@pytest.mark.parametrize(
    ("word", "limit", "answer"),
    [("green", "green", MET), ("amber", "green", NOT_MET), ("amber", "amber", MET), ("red", "amber", NOT_MET),
     ("not tested", "red", UNJUDGED)],
)  # fmt: skip
def test_zones_are_ordered_from_green_to_red(word, limit, answer):
    criteria = Criteria(1.2, 1.2, limit, "no evidence", 250)
    assert answers(zone(word), criteria=criteria)[0]["exceptions_zone"] == answer


def test_only_evidence_that_exceptions_depend_on_the_past_fails_the_clustering_criterion():
    assert answers(when("rejected", "clustered", 0.01))[0]["clustering"] == NOT_MET
    assert answers(when("rejected", "with-var", 0.01))[0]["clustering"] == NOT_MET
    assert answers(when("rejected", "spread", 0.01))[0]["clustering"] == MET
    assert answers(when("not tested", p=None))[0]["clustering"] == UNJUDGED
    assert "clustering" not in answers(when(), criteria=Criteria(1.2, 1.2, "green", "any", 250))[0]


def test_too_few_days_cannot_be_judged_and_a_failure_outweighs_it():
    found, table = answers(multiple(days=249), zone("red"))
    assert found["var_multiple_at_most"] == UNJUDGED
    assert found[OUTCOME] == NOT_MET
    assert table.iloc[-1]["note"] == "exceptions_zone"
    assert answers(multiple(days=249), zone())[0][OUTCOME] == UNJUDGED


def test_criteria_are_asked_of_the_subject_and_the_main_span_alone():
    rows = [multiple(), multiple(low=5.0, days=500), multiple(low=5.0, model="other")]
    assert answers(*rows)[0][OUTCOME] == MET
    assert answers(*rows, place=1)[0][OUTCOME] == NOT_MET
    assert criteria_table(rows, HOUSE, subject=None).empty


def test_each_desk_has_its_own_outcome():
    table = criteria_table([multiple(), multiple(low=2.0, desk="B")], HOUSE, subject="bank")
    outcomes = table[table["criterion"] == OUTCOME].set_index("desk")["answer"]
    assert outcomes.to_dict() == {"A": MET, "B": NOT_MET}
