"""From the P&L of many desks to what each hands to the engine."""

import numpy as np
import pandas as pd

from backtest.forecasting.engine import DeskHistory
from backtest.records import PNL_KINDS, latest_known


def desk_histories(
    pnl: pd.DataFrame,
    calendar: np.ndarray,
    as_of: np.datetime64,
    learn_from: str,
    desks: pd.DataFrame | None = None,
) -> list[DeskHistory]:
    """Return each desk's history, in order of names.

    ``pnl``: as records.Inputs.pnl; ``learn_from``: the column that models learn from. A desk's business days run from
    its first P&L to its ``valid_to`` in ``desks``, else to ``as_of``: a day without P&L keeps its forecast.
    """
    latest = latest_known(pnl, as_of)
    known = pnl[pnl["known_on"] <= as_of].assign(loss=lambda t: -t[learn_from])
    ends = {} if desks is None else dict(zip(desks["desk"], desks["valid_to"], strict=True))
    histories = []
    for desk, rows in known.groupby("desk", sort=True):
        mine = latest[latest["desk"] == desk]
        index = mine["date"].to_numpy().astype("datetime64[D]")
        realised = {k: pd.Series(-mine[k].to_numpy(), index=index) for k in PNL_KINDS if k in mine}
        end = ends.get(desk)
        last = as_of if end is None or pd.isna(end) else min(as_of, np.datetime64(end, "D"))
        days = calendar[(calendar >= rows["date"].min().to_datetime64()) & (calendar <= last)]
        histories.append(DeskHistory(str(desk), rows[["date", "known_on", "loss"]], days, realised))
    return histories
