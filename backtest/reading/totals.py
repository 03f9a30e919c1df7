"""Remark on desk P&L that does not add up to the firm's."""

import numpy as np
import pandas as pd

from backtest.reading.desks import lives
from backtest.reading.remarks import desk_remark
from backtest.records import PNL_KINDS, Remark

TOLERANCE = 1e-6
"""Of the median absolute firm P&L; to it comes half a unit of the last decimal written, once per desk and the firm."""


def not_adding_up(latest: pd.DataFrame, desks: pd.DataFrame, firm: str | None, source: str) -> list[Remark]:
    """Compare the sum of the top-level desks with the firm's row, per P&L kind, in one remark a kind.

    Only days count on which every desk alive has a value; a desk lives from valid_from to valid_to or, where not
    given, from its first to its last day. A desk whose parent is another desk with P&L is contained in it.
    """
    if firm is None:
        return []
    parts = top_level(desks, set(latest["desk"].unique()), firm)
    currencies = set(desks.loc[desks["desk"].isin([*parts, firm]), "currency"])
    if not parts or len(currencies) > 1:
        reason = "the desks have more than one currency" if parts else "there is no desk below the firm"
        text = f"whether the desks add up to the firm was not checked: {reason}"
        return [Remark("totals-not-checked", source, firm, "", "", 1, text)]
    remarks = []
    for kind in PNL_KINDS:
        if kind in latest:
            wide = latest.set_index(["date", "desk"])[kind].unstack()  # noqa: PD010 - reshaping, nothing is aggregated
            remarks += _compare(wide, parts, desks, firm, kind, source)
    return remarks


def top_level(desks: pd.DataFrame, with_pnl: set[str], firm: str) -> list[str]:
    """Return the desks to be added: those with P&L, other than the firm, contained in no other desk with P&L."""
    parent = dict(zip(desks["desk"], desks["parent"], strict=True))
    return [desk for desk in sorted(with_pnl - {firm}) if not _contained(desk, parent, with_pnl - {firm})]


def _contained(desk: str, parent: dict[str, str], with_pnl: set[str]) -> bool:
    up = parent.get(desk, "")
    while up:
        if up in with_pnl:
            return True
        up = parent.get(up, "")
    return False


def _compare(
    wide: pd.DataFrame, parts: list[str], desks: pd.DataFrame, firm: str, kind: str, source: str
) -> list[Remark]:
    values, total = wide[parts], wide[firm]
    alive = _alive(values, desks)
    complete = (values.notna() | ~alive).all(axis=1) & alive.any(axis=1) & total.notna()
    gap = (values.fillna(0.0).where(alive, 0.0).sum(axis=1) - total)[complete].abs()
    if gap.empty:
        text = f"whether the desks add up to the firm's {kind} P&L was not checked: no day has all values"
        return [Remark("totals-not-checked", source, firm, "", "", 1, text)]
    allowed = TOLERANCE * float(total[complete].abs().median()) + (len(parts) + 1) * _half_unit(wide[[*parts, firm]])
    off = gap[gap > allowed]
    if off.empty:
        return []
    text = (
        f"the {kind} P&L of {len(parts)} desks does not add up to the firm's on {len(off)} of {len(gap)} days with all "
        f"values; the largest gap is {off.max():,.6g} on {off.idxmax():%Y-%m-%d}"
    )
    return [desk_remark(f"not-adding-up-{kind}", source, firm, off.index.min(), off.index.max(), len(off), text)]


def _alive(values: pd.DataFrame, desks: pd.DataFrame) -> pd.DataFrame:
    life = lives(desks)
    alive = pd.DataFrame(False, index=values.index, columns=values.columns)
    for desk in values.columns:
        first, last = life[str(desk)]
        days = values.index[values[desk].notna()]
        if len(days):
            alive[desk] = (values.index >= (first or days[0])) & (values.index <= (last or days[-1]))
    return alive


def _half_unit(values: pd.DataFrame) -> float:
    """Return half a unit of the last decimal in which all values are written; 0 where they are not rounded."""
    numbers = values.to_numpy()
    numbers = numbers[np.isfinite(numbers)]
    for decimals in range(-6, 7):
        scaled = numbers * 10.0**decimals
        if np.all(np.abs(scaled - np.round(scaled)) <= 1e-12 * np.abs(scaled)):
            return 0.5 * 10.0**-decimals
    return 0.0
