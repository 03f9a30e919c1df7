from dataclasses import replace

import pytest

from backtest.reporting.book import Span
from backtest.reporting.facts import Bridge, DeskCounts, Person, Scope, Step
from backtest.reporting.open_points import needs_person
from backtest.reporting.steps import why
from tests.reference.invented_record import FIRM, SUBJECT

SPAN = Span(0, "2025-01-02", "2025-12-31", 250)
SCOPE = Scope(FIRM, True, 3, SUBJECT, True, SPAN, 250, 0.99, 0.975, "hypothetical", "EUR", 0.05)
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
        "longer window 21 at EUR 3.99 m; plus filter 19 at EUR 3.18 m; plus tail 20 at EUR 3.07 m. Step by step, "
        "by the FZ0 score, better beyond chance: plus filter; worse beyond chance: plus tail; cannot be "
        "told from no change: longer window. From day to day the last step's VaR moves 12 times as much as the first's."
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


def test_where_no_step_can_be_told_from_no_change_this_is_said_once():
    steps = (STEPS[0], STEPS[1], replace(STEPS[1], name="plus filter"))
    assert "Step by step, by the FZ0 score, no step can be told from no change." in why(replace(BRIDGE, steps=steps))


def test_another_level_of_the_bridge_speaks_only_where_it_is_beyond_chance():
    same = replace(BRIDGE, level=0.975)
    assert (
        " At 97.5%, by the FZ0 score, better beyond chance: plus filter; worse beyond chance: plus tail. From"
        in why(BRIDGE, [same])
    )
    unclear = replace(same, steps=STEPS[:2])
    assert why(BRIDGE, [unclear]) == why(BRIDGE)


def test_what_needs_a_person():
    facts = Person(
        SCOPE, 2000, 6, 3, 17, "2025-01-02", ("New desk",), (("New desk", 131),), (("no reaction", 1200),),
        DeskCounts(0.99, ("A", "B", "C", "D", "E", "F"), ("B",), 12, 0.6),
    )  # fmt: skip
    assert needs_person(facts) == (
        "6 of 2,000 desk x day x model forecasts fell back on a stated substitute; kept but flagged: no reaction "
        "1,200; 3 data remarks to read; 17 desk-days with an exception (any level or P&L kind) since 2025-01-02 to "
        "explain; the 99% count is rejected on 6 of 12 desks (A, B (VaR too high), C, D, E and 1 more), where chance "
        "alone gives at most 0.6; without any challenger: New desk; judged on less than was asked for: New desk (131 "
        "of 250 days). The opinion is a person's to give."
    )


def test_what_needs_a_person_where_nothing_is_open():
    facts = Person(SCOPE, 1, 0, 1, 0, "2025-01-02", (), (), (), DeskCounts(0.99, (), (), 2, 0.1))
    assert needs_person(facts) == (
        "None of 1 desk x day x model forecast fell back on a stated substitute; 1 data remark to read; no desk-days "
        "with an exception (any level or P&L kind) since 2025-01-02 to explain; the 99% count is rejected on none of 2 "
        "desks, where chance alone gives at most 0.1. The opinion is a person's to give."
    )
