"""The terms of a review: hashed whole, compared key by key, the cut-off aside."""

from backtest.recording.terms import changed_terms, hashed_terms

TERMS = {"tests": ("binomial", "kupiec"), "criteria": {"minimum_days": 250}, "as_of": "2025-12-31", "rules": None}


def test_the_hash_is_that_of_the_values_whatever_their_order():
    kept = hashed_terms(TERMS)
    assert kept["values"]["tests"] == ["binomial", "kupiec"]
    assert kept == hashed_terms(dict(reversed(TERMS.items())))
    assert kept["sha256"] != hashed_terms(TERMS | {"rules": "basel-mar32"})["sha256"]


def test_a_change_is_said_key_by_key_and_the_cut_off_is_none():
    now = TERMS | {"criteria": {"minimum_days": 100}, "rules": "basel-mar32", "as_of": "2026-12-31"}
    assert changed_terms(now, hashed_terms(TERMS)["values"]) == [
        'criteria: {"minimum_days": 250} before, {"minimum_days": 100} now',
        "rules: none before, basel-mar32 now",
    ]
    assert changed_terms(TERMS | {"as_of": "2026-12-31"}, hashed_terms(TERMS)["values"]) == []
