"""What the values say: the sign of VaR and P&L, the date VaR stands on, the firm's row. Evidence, to be confirmed."""

from dataclasses import dataclass

import numpy as np
import pandas as pd

from backtest.reading.business_days import days_of_data
from backtest.reading.desks import desks_of_data
from backtest.reading.draft_layout import Finding
from backtest.reading.draft_names import plain
from backtest.reading.shift import MARGIN, lag_correlations, likely_shift, on_calendar
from backtest.reading.totals import not_adding_up
from backtest.records import latest_known

FIRM_WORDS = ("firm", "total", "bank", "group", "all", "firmwide", "firm_wide", "bank_wide", "overall", "top", "gesamt")


@dataclass(frozen=True)
class Evidence:
    """The tables as the draft maps them, one row a date x desk (x model x level), to be looked at."""

    pnl: pd.DataFrame
    reported: pd.DataFrame


def look(pnl: pd.DataFrame, reported: pd.DataFrame) -> Evidence:
    """Reduce the tables to the values known last."""
    return Evidence(latest_known(pnl, pnl["known_on"].max().to_datetime64()), reported)


def pnl_sign(evidence: Evidence, loss_names: bool) -> Finding:
    """Return the sign of P&L: by its name; the exceptions under either sign are counted for the reader."""
    counted = ""
    if len(evidence.reported):
        both = evidence.reported.merge(evidence.pnl, on=["desk", "date"])
        below, above = (int((sign * both["hypothetical"] > both["var"]).sum()) for sign in (-1.0, 1.0))
        counted = f"; beyond VaR in {len(both)} rows: {below} if profit is positive, {above} if loss is"
    if loss_names:
        return Finding("loss-positive", "the column's name speaks of losses" + counted)
    return Finding("profit-positive", "nothing in the name says otherwise, values alone cannot tell" + counted)


def var_date(evidence: Evidence) -> Finding:
    """Return the meaning of VaR's date by how it moves with P&L (see shift), desk by desk."""
    calendar = days_of_data(evidence.pnl, evidence.reported)
    votes = {0: 0, 1: 0, 2: 0}
    found: list[list[float]] = []
    for desk, rows in evidence.reported.groupby("desk", sort=True):
        series = next(iter(rows.groupby(["model", "level"], sort=True)))[1]
        pnl = on_calendar(evidence.pnl[evidence.pnl["desk"] == desk], "hypothetical", calendar)
        correlations, days = lag_correlations(pnl, on_calendar(series, "var", calendar))
        peak = likely_shift(correlations, days)
        others = max(correlations[0], correlations[2])
        if peak is None and days and correlations[1] - others > MARGIN * np.sqrt(2 / days):
            peak = 1
        if peak is not None:
            votes[peak] += 1
            found.append(correlations)
    return _date_meaning(votes, found, evidence.reported["desk"].nunique())


def _date_meaning(votes: dict[int, int], found: list[list[float]], desks: int) -> Finding:
    if not found:
        return Finding(
            "target", "VaR does not visibly react to P&L, so its date cannot be told: target or as-of?", False
        )
    middle = np.median(np.array(found), axis=0)
    why = (
        f"VaR moves most with the P&L of the same day on {votes[0]}, of the day before on {votes[1]}, of two days "
        f"before on {votes[2]} of {desks} desks (rank correlations {middle[0]:.2f}, {middle[1]:.2f}, {middle[2]:.2f})"
    )
    if votes[2] >= max(votes[0], votes[1]):
        return Finding("target", why + ": as if it stood a day late, which no setting mends", False)
    return Finding("as-of" if votes[0] > votes[1] else "target", why)


def firm_row(evidence: Evidence, currency: str) -> Finding | None:
    """Return the desk that looks like the whole firm: by name, or because the others add up to it."""
    desks = sorted(evidence.pnl["desk"].unique())
    if len(desks) < 2:
        return None
    spread = evidence.pnl.groupby("desk", sort=True)["hypothetical"].std().fillna(0.0)
    named = [desk for desk in desks if plain(desk) in FIRM_WORDS]
    candidate = str((named or [spread.idxmax()])[0])
    table = desks_of_data(evidence.pnl, evidence.reported, currency)
    adds_up = len(desks) > 2 and not not_adding_up(evidence.pnl, table, candidate, "")
    if named:
        how = "add up" if adds_up else "were not seen to add up"
        return Finding(candidate, f"by its name; the other {len(desks) - 1} desks {how} to it")
    if adds_up:
        return Finding(candidate, f"the other {len(desks) - 1} desks add up to it")
    return Finding(candidate, "no desk is named like the firm and none is the sum of the others", False)
