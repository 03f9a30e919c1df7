"""The multiples that would have sufficed, as results: an effect size of its own, with no p-value beside it."""

from collections.abc import Sequence

import numpy as np
import pandas as pd

from backtest.judging.answers import ends
from backtest.judging.multiples import Multiple, sufficient_es_multiple, sufficient_multiple
from backtest.judging.samples import Days, Sample, Span, read_book
from backtest.records import Result

VAR_SOURCE = "quantile of loss/VaR with order-statistic limits (exact for independent days)"
ES_SOURCE = "empirical ES of loss/ES, interval from the simulated law of a GPD tail of shape 0.15"
ES_NOTE = (
    "interval assumes independent days; measured coverage of 95%: 94 to 98% for normal to t5 losses, 93 to 95% for t3"
)
"""Measured at 250 to 2,500 days, 97.5 and 99%: tests/judging/test_es_interval.py. A heavier tail makes it too short."""
_WRITTEN = {"var": "VaR", "es": "ES"}


def multiple_results(
    pnl: pd.DataFrame,
    forecasts: pd.DataFrame,
    *,
    spans: Sequence[Span],
    seed: int,
    calendar: Days | None = None,
    as_of: np.datetime64 | None = None,
) -> list[Result]:
    """Return the multiple of VaR, and of ES where known, that would have sufficed: for every sample one row each.

    Arguments as battery.judge_table. ``estimate, low, high`` are the multiple with its 95% interval; ``high`` is None
    where there is no upper limit at this length, and the note says so.
    """
    book = read_book(pnl, forecasts, calendar=calendar, as_of=as_of)
    return [row for desk in book.desks for sample in desk.samples(spans) if sample.days for row in _rows(sample, seed)]


def _rows(sample: Sample, seed: int) -> list[Result]:
    rows = [_row(sample, "var", sufficient_multiple(sample.losses, sample.var, sample.level), VAR_SOURCE)]
    known = sample.on(~np.isnan(sample.es))
    if known.days:
        found = sufficient_es_multiple(known.losses, known.es, sample.level, seed)
        rows.append(_row(known, "es", found, ES_SOURCE))
    return rows


def _row(sample: Sample, measure: str, multiple: Multiple, source: str) -> Result:
    first, last = ends(sample.dates)
    notes = multiple.notes
    if multiple.estimate is not None and multiple.high is None:
        notes = (*notes, "no upper limit at this length")
    if multiple.estimate is not None and measure == "es":
        notes = (*notes, ES_NOTE)
    return Result(
        desk=sample.desk, model=sample.model, against="", pnl_kind=sample.kind, level=sample.level, first=first,
        last=last, days=multiple.days, exceptions=sample.exceptions, question="by how much",
        test=f"sufficient-{measure}-multiple", statistic=None, p_value=None, law=None, estimate=multiple.estimate,
        low=multiple.low, high=multiple.high, direction=_direction(multiple, measure), could_see=None,
        decision="", decision_across_desks="", phrase="", note="; ".join(notes), source=source,
    )  # fmt: skip


def _direction(multiple: Multiple, measure: str) -> str:
    """Say what the interval says: short of the losses, more than they asked for (VaR alone), or neither."""
    if multiple.low is not None and multiple.low > 1.0:
        return f"{_WRITTEN[measure]} too low"
    if measure == "var" and multiple.high is not None and multiple.high < 1.0:
        return f"{_WRITTEN[measure]} too high"
    return ""
