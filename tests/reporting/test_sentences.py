import re
from dataclasses import replace

import pytest

from backtest.judging import phrases
from backtest.reporting.book import Book, Span
from backtest.reporting.drawn import scope_of
from backtest.reporting.facts import (
    Count,
    Hardly,
    Often,
    Power,
    Rejection,
    RuleCount,
    Scope,
    Size,
    Sufficient,
    When,
)
from backtest.reporting.sentences import (
    NOTHING,
    about,
    by_how_much,
    how_often,
    six_sentences,
    when_they_fell,
)
from backtest.reporting.unseen import UNSEEN, hardly, unseen
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
        "exact binomial, two-sided). Evidence that the VaR is too low (p = 0.028 on actual; exact binomial, "
        "two-sided). Rule basel-mar32: count 7, amber, multiplier 1.83.",
    ),
    "no exception, a rule that counts a missing day": (
        Often(SCOPE, (count("hypothetical", 0, 0.162, False),), RuleCount("basel-mar32", 1, "green", None, "")),
        "Firm: losses exceeded the 99% VaR of HS-250 on none of 250 days on hypothetical P&L; 2.5 were to be expected. "
        "The count does not reject the level (p = 0.16 on hypothetical; exact binomial, two-sided). Rule basel-mar32: "
        "count 1 (days "
        "without P&L or VaR count as exceptions), green.",
    ),
    "so few that the VaR is too high": (
        Often(SCOPE, (count("hypothetical", 0, 0.0012, True, 1000),), None),
        "Firm: losses exceeded the 99% VaR of HS-250 on none of 1,000 days on hypothetical P&L; 10.0 were to be "
        "expected. So few are evidence that the VaR is too high (p = 0.0012 on hypothetical; exact binomial, "
        "two-sided).",
    ),
    "a desk of 131 days": (
        Often(replace(SCOPE, desk="New desk", is_firm=False), (count("hypothetical", 2, 0.75, False, 131),), None),
        "New desk, of 3 desks the one whose count is furthest above its expectation: losses exceeded "
        "the 99% VaR of HS-250 on 2 of 131 days (1.5%) on hypothetical P&L; 1.3 were to be "
        "expected. The count does not reject the level (p = 0.75 on hypothetical; exact binomial, two-sided). "
        "Only 131 "
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
        "expected. The count does not reject the level (p > 0.99 on hypothetical; exact binomial, two-sided). Rule "
        "basel-mar32: not "
        "tested: 131 of 250 business days, no zone. Only 131 of 250 days have both a P&L and a forecast.",
    ),
    "no reported model": (
        Often(CHALLENGER, (count("historical", 5, 0.2, False), count("conditional-evt", 3, 0.8, False)), None),
        "Firm: no reported VaR was supplied. In 250 days on hypothetical P&L losses exceeded the "
        "challengers' 99% VaR on "
        "this many days: historical 5, conditional-evt 3; 2.5 were to be expected.",
    ),
    "one day, a further level that rejects, a rule that was not applied": (
        Often(
            replace(SCOPE, wanted_days=None),
            (count("hypothetical", 0, 1.0, False, 1),),
            RuleCount("basel-mar32", None, "", None, "not applied, since no desk is named as the firm-wide row"),
            (
                Rejection("binomial", 0.975, "hypothetical", 0.025, "evidence that VaR is too low"),
                Rejection("kupiec", 0.975, "actual", 0.0496, "evidence that VaR is too low"),
            ),
        ),
        "Firm: losses exceeded the 99% VaR of HS-250 on none of 1 day on hypothetical P&L; 0.01 were to be expected. "
        "The count does not reject the level (p > 0.99 on hypothetical; exact binomial, two-sided). Evidence that VaR "
        "is too low (Exact binomial: 97.5% hypothetical p = 0.025; Kupiec, share of failures: 97.5% actual p = "
        "0.0496). Rule basel-mar32: not applied, since no desk is named as the firm-wide row.",
    ),
    "a zone without multiplier": (
        Often(
            SCOPE,
            (count("hypothetical", 6, 0.0814, False),),
            RuleCount("basel-mar32", 6, "amber", None, "count on hypothetical only; the rule takes the larger"),
        ),
        "Firm: losses exceeded the 99% VaR of HS-250 on 6 of 250 days (2.4%) on hypothetical P&L; 2.5 were to be "
        "expected. The count does not reject the level (p = 0.081 on hypothetical; exact binomial, two-sided). Rule "
        "basel-mar32: count 6, amber, no multiplier (count on hypothetical only; the rule takes the larger).",
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


REJECTED = When(SCOPE, 13, 250, 10, 49, 9 * 250 / 13 + 1, "2025-03-03", "2025-05-08", 0.0496, True, "")
WHEN = {
    "clustered": (
        REJECTED,
        "10 of the 13 losses beyond the 97.5% VaR of HS-250 (hypothetical P&L, 250 days) fell within 49 business days, "
        "2025-03-03 to 2025-05-08; evenly spaced they would take about 174, by chance alone less. Independence from "
        "one day to the next is rejected (Christoffersen, p = 0.0496).",
    ),
    "hardly closer than evenly spaced, further rejections": (
        replace(
            REJECTED,
            width=140,
            p=0.07,
            rejected=False,
            more=(
                Rejection(
                    "christoffersen-independence", 0.99, "actual", 0.02, "evidence that exceptions are clustered"
                ),
                Rejection("christoffersen-coverage", 0.975, "hypothetical", 0.03, "evidence that VaR is too low"),
            ),
        ),
        "10 of the 13 losses beyond the 97.5% VaR of HS-250 (hypothetical P&L, 250 days) fell within 140 business "
        "days, 2025-03-03 to 2025-05-08: not bunched. Independence from one day to the next is not rejected, which "
        "does not show it (Christoffersen, p = 0.070). Evidence that exceptions are clustered (Christoffersen, "
        "independence: 99% actual p = 0.020). Together with the count: evidence that VaR is too low (Christoffersen, "
        "coverage: 97.5% hypothetical p = 0.030).",
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


def test_a_joint_test_that_speaks_of_the_rate_is_said_together_with_the_count():
    rate = Rejection("dynamic-quantile", 0.975, "hypothetical", 0.01, "evidence that VaR is too low")
    clustered = replace(rate, phrase="evidence that exceptions are too clustered")
    said = when_they_fell(replace(REJECTED, more=(rate, clustered)))
    assert said.endswith(
        "Evidence that exceptions are too clustered (Dynamic quantile: 97.5% hypothetical p = 0.010). Together with "
        "the count: evidence that VaR is too low (Dynamic quantile: 97.5% hypothetical p = 0.010)."
    )


SHORT = Sufficient("VaR", 1.55, 1.03, 3.08, 2.1e6, 250, "")
HOW_MUCH = {
    "short": (
        Size(SCOPE, SHORT, None),
        "The 97.5% VaR of HS-250 (hypothetical P&L, 250 days) would have had to be 1.55 times as large (1.03 to "
        "3.08), on average EUR 3.26 m instead of EUR 2.10 m, EUR 1.16 m more. The VaR interval is 95%, if days were "
        "independent.",
    ),
    "open, and holding the size reported": (
        Size(SCOPE, replace(SHORT, low=0.9, high=None, average=None), None),
        "The 97.5% VaR of HS-250 (hypothetical P&L, 250 days) would have had to be 1.55 times as large (at least "
        "0.90; no upper limit at this length); the interval holds 1, the size reported. The VaR interval is 95%, if "
        "days were independent.",
    ),
    "too large, with ES of an open interval": (
        Size(
            SCOPE,
            replace(SHORT, estimate=0.8, low=0.6, high=0.95),
            Sufficient("ES", 1.1, 0.7, 1.6, None, 249, "interval assumes independent days; coverage 94 to 98%"),
            (Rejection("acerbi-szekely-2", 0.975, "actual", 0.012, "evidence that VaR or ES is too low"),),
        ),
        "The 97.5% VaR of HS-250 (hypothetical P&L, 250 days) would have sufficed at 0.80 times its size (0.60 to "
        "0.95), on average EUR 1.68 m instead of EUR 2.10 m, EUR 420 k less. The 97.5% ES (249 days) would have had to "
        "be 1.10 times as large (0.70 to 1.60). The VaR interval is 95%, if days were independent. The ES interval is "
        "95% (assumes independent days; coverage 94 to 98%). Evidence that VaR or ES is too low "
        "(Acerbi and Szekely, statistic 2: 97.5% actual p = 0.012).",
    ),
    "not tested": (
        Size(SCOPE, Sufficient("VaR", None, None, None, None, 0, "not tested: no day with VaR above 0"), None),
        "The multiple of the 97.5% VaR that would have sufficed: not tested: no day with VaR above 0.",
    ),
}


@pytest.mark.parametrize("case", HOW_MUCH)
def test_by_how_much(case):
    facts, text = HOW_MUCH[case]
    assert by_how_much(facts) == text


def test_what_the_review_could_not_see():
    assert unseen(Power(0.99, 0.01, 0.02, 250, 0.3779), True) == (
        "A 99% VaR whose true coverage is 98% is caught in 38 of 100 reviews of 250 days (one-sided exact "
        "binomial at 5%, "
        "days independent; the two-sided p of sentence 1 sees less). "
        "The ten-day stressed ES used for capital was not tested."
    )
    assert "sentence 1" not in unseen(Power(0.99, 0.01, 0.02, 250, 0.3779), False)
    assert unseen(None, True) == (
        "The power of the count was not computed. The ten-day stressed ES used for capital was not tested."
    )


def test_tests_that_could_hardly_have_seen_it_are_counted_and_named_with_their_power():
    two = Hardly(SUBJECT, 4, (("christoffersen-independence", 0.035, 0.08), ("binomial", 0.27, 0.27)))
    assert unseen(None, True, two) == (
        "The power of the count was not computed. 4 results without evidence on HS-250, of tests that could hardly "
        "have seen it (power below 80 in 100): Christoffersen, independence (4 to 8 in 100); Exact binomial (27 in "
        "100). The ten-day stressed ES used for capital was not tested."
    )
    many = replace(two, tests=tuple((f"test-{i}", 0.1, 0.2) for i in range(5)))
    assert "test-2 (10 to 20 in 100); and 2 more tests." in unseen(None, True, many)


def test_only_results_of_the_main_span_that_could_hardly_see_count():
    record = invented_record()
    table = record.results.copy()
    one = (table["test"] == "binomial") & (table["desk"] == FIRM) & (table["model"] == SUBJECT)
    table.loc[one, ["phrase", "decision", "p_value", "could_see"]] = [UNSEEN, "not rejected", 0.3, 0.4]
    other_desk = (table["test"] == "binomial") & (table["desk"] == "NA")
    table.loc[other_desk, ["phrase", "decision", "p_value", "could_see"]] = [UNSEEN, "not rejected", 0.3, 0.1]
    book = Book(replace(record, results=table))
    assert hardly(book, scope_of(book)) == Hardly(SUBJECT, 4, (("binomial", 0.4, 0.4),))
    assert hardly(Book(record), scope_of(Book(record))) is None


def test_the_phrase_of_little_power_is_the_one_judging_writes():
    assert UNSEEN == phrases.UNSEEN


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
