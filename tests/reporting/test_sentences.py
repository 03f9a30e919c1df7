import re
from dataclasses import replace

import pytest

from backtest.reporting.book import Book, Span
from backtest.reporting.drawn import scope_of
from backtest.reporting.facts import (
    Bridge,
    Count,
    Often,
    Person,
    Power,
    RuleCount,
    Scope,
    Size,
    Step,
    Sufficient,
    When,
)
from backtest.reporting.sentences import (
    NOTHING,
    about,
    by_how_much,
    how_often,
    needs_person,
    six_sentences,
    unseen,
    when_they_fell,
    why,
)
from tests.reference.invented_record import FIRM, SUBJECT, invented_record

SPAN = Span(0, "2025-01-02", "2025-12-31", 250)
SCOPE = Scope(FIRM, True, 3, SUBJECT, True, SPAN, 250, 0.99, 0.975, "hypothetical", "EUR", 0.05)
CHALLENGER = replace(SCOPE, model="historical", is_subject=False)


def count(name, exceptions, p, rejected, days=250):
    return Count(name, exceptions, days, p, rejected)


HOW_OFTEN = {
    "a firm in the amber zone": (
        Often(
            SCOPE,
            (count("hypothetical", 6, 0.0814, False), count("actual", 7, 0.0284, True)),
            RuleCount("basel-mar32", 7, "amber", 1.83, ""),
        ),
        "Firm: losses exceeded the 99% VaR of HS-250 on 6 of 250 days (2.4%) on hypothetical P&L and on 7 of 250 days "
        "(2.8%) on actual P&L; 2.5 were to be expected. The count does not reject the level (p = 0.081 on "
        "hypothetical; "
        "exact binomial). Evidence that the VaR is too low (p = 0.028 on actual; exact binomial). Rule basel-mar32: "
        "count 7, amber, multiplier 1.83.",
    ),
    "no exception, a rule that counts a missing day": (
        Often(SCOPE, (count("hypothetical", 0, 0.162, False),), RuleCount("basel-mar32", 1, "green", None, "")),
        "Firm: losses exceeded the 99% VaR of HS-250 on none of 250 days on hypothetical P&L; 2.5 were to be expected. "
        "The count does not reject the level (p = 0.16 on hypothetical; exact binomial). Rule basel-mar32: "
        "count 1 (days "
        "without P&L or VaR count as exceptions), green.",
    ),
    "so few that the VaR is too high": (
        Often(SCOPE, (count("hypothetical", 0, 0.0012, True, 1000),), None),
        "Firm: losses exceeded the 99% VaR of HS-250 on none of 1,000 days on hypothetical P&L; 10.0 were to be "
        "expected. So few are evidence that the VaR is too high (p = 0.0012 on hypothetical; exact binomial).",
    ),
    "a desk of 131 days": (
        Often(replace(SCOPE, desk="New desk", is_firm=False), (count("hypothetical", 2, 0.75, False, 131),), None),
        "New desk: losses exceeded the 99% VaR of HS-250 on 2 of 131 days (1.5%) on hypothetical P&L; 1.3 were to be "
        "expected. The count does not reject the level (p = 0.75 on hypothetical; exact binomial). Only 131 "
        "of 250 days "
        "have both a P&L and a forecast: no zone.",
    ),
    "a rule without a zone": (
        Often(
            SCOPE,
            (count("hypothetical", 1, 1.0, False, 131),),
            RuleCount("basel-mar32", 1, "", None, "not tested: 131 of 250 business days, no zone"),
        ),
        "Firm: losses exceeded the 99% VaR of HS-250 on 1 of 131 days (0.76%) on hypothetical P&L; 1.3 were to be "
        "expected. The count does not reject the level (p > 0.99 on hypothetical; exact binomial). Rule "
        "basel-mar32: not "
        "tested: 131 of 250 business days, no zone. Only 131 of 250 days have both a P&L and a forecast.",
    ),
    "no reported model": (
        Often(CHALLENGER, (count("historical", 5, 0.2, False), count("conditional-evt", 3, 0.8, False)), None),
        "Firm: no reported VaR was supplied. In 250 days on hypothetical P&L losses exceeded the "
        "challengers' 99% VaR on "
        "this many days: historical 5, conditional-evt 3; 2.5 were to be expected.",
    ),
    "no count asked for": (
        Often(SCOPE, (), None),
        "Not tested: no count of exceptions was asked for at 99%.",
    ),
}


@pytest.mark.parametrize("case", HOW_OFTEN)
def test_how_often(case):
    facts, text = HOW_OFTEN[case]
    assert how_often(facts) == text


REJECTED = When(SCOPE, 13, 250, 10, 49, "2025-03-03", "2025-05-08", 0.0496, True, "")
WHEN = {
    "clustered": (
        REJECTED,
        "10 of the 13 losses beyond the 97.5% VaR of HS-250 (hypothetical P&L, 250 days) fell within 49 business days, "
        "2025-03-03 to 2025-05-08; evenly spread they would take about 192. Independence from one day to the next is "
        "rejected (Christoffersen, p = 0.0496).",
    ),
    "few": (
        replace(REJECTED, exceptions=1, p=0.7, rejected=False),
        "1 loss exceeded the 97.5% VaR of HS-250 (hypothetical P&L, 250 days): too few to speak of clusters. "
        "Independence "
        "from one day to the next is not rejected, which does not show it (Christoffersen, p = 0.70).",
    ),
    "none": (
        replace(REJECTED, exceptions=0, inside=0, p=None, note="not tested: 0 exceptions, needs 1"),
        "No loss exceeded the 97.5% VaR of HS-250 (hypothetical P&L, 250 days), so nothing can be said about when they "
        "fall. Independence: not tested: 0 exceptions, needs 1.",
    ),
}


@pytest.mark.parametrize("case", WHEN)
def test_when(case):
    facts, text = WHEN[case]
    assert when_they_fell(facts) == text


SHORT = Sufficient("VaR", 1.55, 1.03, 3.08, 2.1e6, "")
HOW_MUCH = {
    "short": (
        Size(SCOPE, SHORT, None),
        "The 97.5% VaR would have had to be 1.55 times as large (1.03 to 3.08), on average EUR 3.26 m "
        "instead of EUR 2.10 "
        "m, EUR 1.16 m more. Intervals are 95%, if days were independent.",
    ),
    "too large, with ES of an open interval": (
        Size(
            SCOPE,
            replace(SHORT, estimate=0.8, low=0.6, high=0.95),
            Sufficient("ES", 1.1, 0.7, None, None, "no upper limit at this length"),
        ),
        "The 97.5% VaR would have sufficed at 0.80 times its size (0.60 to 0.95), on average EUR 1.68 m instead of EUR "
        "2.10 m, EUR 420 k less. The 97.5% ES would have had to be 1.10 times as large (at least 0.70; no "
        "upper limit at "
        "this length); the interval holds 1, the size reported. Intervals are 95%, if days were independent.",
    ),
    "not tested": (
        Size(SCOPE, Sufficient("VaR", None, None, None, None, "not tested: no day with VaR above 0"), None),
        "The multiple of the 97.5% VaR that would have sufficed: not tested: no day with VaR above 0.",
    ),
}


@pytest.mark.parametrize("case", HOW_MUCH)
def test_by_how_much(case):
    facts, text = HOW_MUCH[case]
    assert by_how_much(facts) == text


STEPS = (
    Step("reported", "HS-250", 250, 28, 3.21e6, 2e4, "FZ0", None, None, None, ""),
    Step("longer window", "historical", 1000, 21, 3.99e6, 1e4, "FZ0", -0.02, -0.08, 0.04, ""),
    Step("plus filter", "filtered-historical", 1000, 19, 3.18e6, 2.4e5, "FZ0", -0.2, -0.3, -0.1, ""),
    Step("plus tail", "conditional-evt", 1000, 20, 3.07e6, 2.4e5, "FZ0", 0.1, 0.02, 0.18, ""),
)
BRIDGE = Bridge(FIRM, 0.99, "hypothetical", "2018-01-02", "2025-12-31", 1860, "EUR", STEPS, "")


def test_why_names_every_step_its_gain_and_its_price():
    assert why(BRIDGE) == (
        "Over 1,860 shared days at 99% (18.6 exceptions expected): reported 28 exceptions at an average VaR "
        "of EUR 3.21 m; "
        "longer window 21 at EUR 3.99 m; plus filter 19 at EUR 3.18 m; plus tail 20 at EUR 3.07 m. Step by step, score "
        "better beyond chance: plus filter; score worse beyond chance: plus tail; cannot be told from no "
        "change: longer "
        "window. From day to day the last step's VaR moves 12 times as much as the first's."
    )


@pytest.mark.parametrize(
    ("bridge", "text"),
    [
        (None, "The bridge was not built: none was asked for."),
        (
            replace(BRIDGE, level=None, steps=(), note="not tested: history"),
            "The bridge was not built: not tested: history.",
        ),
    ],
)
def test_a_bridge_that_was_not_built_says_why(bridge, text):
    assert why(bridge) == text


def test_a_step_without_numbers_is_named_with_its_reason():
    lacking = replace(STEPS[1], exceptions=None, note="not tested: history")
    text = why(replace(BRIDGE, steps=(STEPS[0], lacking)))
    assert text.endswith("at an average VaR of EUR 3.21 m. Not in it: longer window not tested: history.")


def test_what_the_review_could_not_see():
    assert unseen(Power(0.99, 0.01, 0.02, 250, 0.3779)) == (
        "A 99% VaR whose true coverage is 98% is caught in 38 of 100 reviews of 250 days (one-sided exact "
        "binomial at 5%, "
        "days independent). The ten-day stressed ES used for capital was not tested."
    )
    assert unseen(None) == (
        "The power of the count was not computed. The ten-day stressed ES used for capital was not tested."
    )


def test_what_needs_a_person():
    facts = Person(SCOPE, 2000, 6, 3, 17, "2025-01-02", ("New desk",), (("New desk", 131),))
    assert needs_person(facts) == (
        "6 of 2,000 forecasts fell back on a stated substitute; 3 data remarks to read; 17 desk-days with an exception "
        "since 2025-01-02 to explain; without any challenger: New desk; judged on less than was asked for: "
        "New desk (131 "
        "of 250 days). The opinion is a person's to give; none is given here."
    )


def test_what_needs_a_person_where_nothing_is_open():
    facts = Person(SCOPE, 2000, 0, 0, 0, "2025-01-02", (), ())
    assert needs_person(facts) == (
        "None of 2,000 forecasts fell back on a stated substitute; no data remarks to read; no desk-days "
        "with an exception "
        "since 2025-01-02 to explain. The opinion is a person's to give; none is given here."
    )


def test_without_a_firm_the_page_says_which_desk_it_speaks_of_and_why():
    scope = scope_of(Book(invented_record(firm=False)))
    assert (scope.desk, scope.is_firm) == ("New desk", False)
    assert about(scope) == (
        "New desk, of 3 desks the one whose count is furthest above its expectation; no firm row was judged; "
        "the reported "
        "model HS-250"
    )
    assert about(SCOPE) == "Firm, the whole firm; the reported model HS-250"


VARIANTS = ({}, {"subject": False}, {"firm": False}, {"exceptions": False}, {"bridge": False})


@pytest.mark.parametrize("switches", VARIANTS, ids=str)
def test_six_sentences_begin_with_their_questions_and_claim_no_validity(switches):
    lines = six_sentences(invented_record(**switches))
    assert [line.split("?")[0] for line in lines] == [
        "How often",
        "When",
        "By how much",
        "Why",
        "What could this review not see",
        "What needs a person",
    ]
    words = set(re.findall(r"[a-z]+", " ".join(lines).lower()))
    assert not words & {"valid", "validated", "passed", "passes", "correct", "accepted", "adequate", "nan", "none's"}
    assert not any("p = 0.000" in line or "\n" in line for line in lines)


def test_a_record_without_results_says_that_nothing_was_tested():
    record = invented_record()
    lines = six_sentences(replace(record, results=record.results.iloc[:0]))
    assert lines[0] == f"How often? {NOTHING}"
    assert "38 of 100" in lines[4]
