"""Answers in words."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from backtest.judging.phrases import EVIDENCE, SEEN, UNSEEN, decision, in_hundred, p_text, phrase


def test_phrases_from_p_and_power():
    assert phrase(0.01, 0.05, "var-low", 0.9, "") == "evidence that VaR is too low"
    assert phrase(0.2, 0.05, "var-low", 0.8, "") == SEEN
    assert phrase(0.2, 0.05, "var-low", 0.79, "") == UNSEEN
    assert phrase(0.2, 0.05, "var-low", None, "") == "no evidence"
    assert phrase(None, 0.05, "var-low", None, "0 exceptions, needs 1") == "not tested: 0 exceptions, needs 1"


def test_decisions():
    assert [decision(p, 0.05) for p in (0.05, 0.0501, None)] == ["rejected", "not rejected", "not tested"]


def test_no_phrase_says_valid_or_passed():
    assert not any(word in text for text in (*EVIDENCE.values(), SEEN, UNSEEN) for word in ("valid", "pass"))


@given(st.floats(0.0, 1.0))
def test_rounding_never_moves_a_p_value_across_a_mark_nor_to_zero(p_value):
    text = p_text(p_value)
    if text.startswith(("below", "above")):
        return
    assert float(text) > 0
    assert all(np.sign(float(text) - mark) == np.sign(p_value - mark) for mark in (0.01, 0.05, 0.1))
    assert float(text) == pytest.approx(p_value, rel=6e-3)


@pytest.mark.parametrize(
    ("p_value", "text"),
    [(0.0496, "0.0496"), (0.049996, "0.049996"), (0.00001, "below 0.0001"), (0.9999, "above 0.999"), (1.0, "1")],
)
def test_p_values_as_text(p_value, text):
    assert p_text(p_value) == text


def test_power_in_hundred_reviews():
    assert in_hundred(0.384) == "in 38 of 100 such reviews"
    assert in_hundred(0.001) == "in fewer than 1 of 100 such reviews"
    assert in_hundred(0.999) == "in more than 99 of 100 such reviews"
