"""The words of an answer, in one place: what evidence there is, what there is not, and p-values as text.

"Not rejected" never reads "valid" and "not tested" never reads "passed"; passing belongs to dated rules alone.
"""

EVIDENCE = {
    "var-low": "evidence that VaR is too low",
    "var-high": "evidence that VaR is too high",
    "clustered": "evidence that exceptions are too clustered",
    "spread": "evidence that exceptions are too evenly spread",
    "with-var": "evidence that exceptions depend on the size of VaR",
    "es-low": "evidence that ES is too low",
    "es-high": "evidence that ES is too high",
    "risk-low": "evidence that VaR or ES is too low",
    "risk-high": "evidence that VaR or ES is too high",
    "tail-thin": "evidence that the tail is too thin",
    "tail-heavy": "evidence that the tail is too heavy",
    "shape": "evidence that the distribution is not as forecast",
    "better": "evidence that this model forecasts better",
    "worse": "evidence that this model forecasts worse",
    "unequal": "evidence that the two models do not forecast equally well",
    "not-best": "evidence that this model is not among the best",
}
"""What a rejection says. ``risk-...`` belongs to tests of VaR and ES together, which cannot tell the two apart."""

NO_EVIDENCE = "no evidence"
SEEN = "no evidence, and this test would have seen it"
UNSEEN = "no evidence, but this test could hardly have seen it"
WOULD_HAVE_SEEN = 0.8
"""Power from which a test counts as one that would have seen the alternative."""


def decision(p_value: float | None, significance: float) -> str:
    """Return "rejected" where p is at or below the significance, "not rejected" above it, "not tested" without a p."""
    if p_value is None:
        return "not tested"
    return "rejected" if p_value <= significance else "not rejected"


def phrase(p_value: float | None, significance: float, evidence: str, could_see: float | None, missing: str) -> str:
    """Return the answer in words; ``evidence`` is a key of EVIDENCE, ``missing`` what the test needs and lacks."""
    if p_value is None:
        return f"not tested: {missing}"
    if p_value <= significance:
        return EVIDENCE[evidence]
    if could_see is None:
        return NO_EVIDENCE
    return SEEN if could_see >= WOULD_HAVE_SEEN else UNSEEN


def p_text(p_value: float) -> str:
    """Return a p-value as text whose rounding never moves it across 0.01, 0.05 or 0.1, nor to 0 or 1.

    Below a mark stays below it: 0.04999 reads 0.04999, and 0.00001 reads "below 0.0001".
    """
    if p_value < 1e-4:
        return "below 0.0001"
    if p_value > 0.999:
        return "1" if p_value == 1.0 else "above 0.999"
    for digits in range(3, 17):
        text = f"{p_value:.{digits}g}"
        if all(_side(float(text), mark) == _side(p_value, mark) for mark in (0.01, 0.05, 0.1)):
            break
    return text


def _side(p_value: float, mark: float) -> int:
    return (p_value > mark) - (p_value < mark)


def in_hundred(power: float) -> str:
    """Return a probability as "in 38 of 100 such reviews", never rounded to none or all."""
    if power < 0.005:
        return "in fewer than 1 of 100 such reviews"
    if power >= 0.995:
        return "in more than 99 of 100 such reviews"
    return f"in {power * 100:.0f} of 100 such reviews"
