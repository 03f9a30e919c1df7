"""Invented results for tests that read them."""

from dataclasses import replace

from backtest.records import Result

PLAIN = Result(
    desk="A", model="bank", against="", pnl_kind="hypothetical", level=0.99, first="2024-01-02", last="2024-12-31",
    days=250, exceptions=3, question="how often", test="binomial", statistic=3.0, p_value=0.5, law="exact",
    estimate=0.012, low=0.002, high=0.035, direction="", could_see=None, decision="not rejected",
    decision_across_desks="", phrase="no evidence", note="", source="invented",
)  # fmt: skip


def result(**changes: object) -> Result:
    """Return an invented result with some fields changed."""
    return replace(PLAIN, **changes)
