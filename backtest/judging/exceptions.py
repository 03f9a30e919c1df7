"""The exceptions of the reported model: one row a date x desk, levels and P&L kinds as columns."""

import numpy as np
import numpy.typing as npt
import pandas as pd

from backtest.judging.samples import Book, Desk, read_book
from backtest.records import DATE_DTYPE

Column = npt.NDArray[np.generic]


def exceptions_table(
    pnl: pd.DataFrame, forecasts: pd.DataFrame, subject: str | None, *, as_of: np.datetime64 | None = None
) -> pd.DataFrame:
    """Return every date x desk on which the subject's VaR was exceeded, at any level, by any P&L kind.

    Columns: ``date, desk, model``; the P&L by kind (profit positive); for each level ``var_0.99, es_0.99``; for each
    kind and level ``exception_hypothetical_0.99`` (bool), ``excess_...`` (loss - VaR in money, only where exceeded)
    and ``ratio_...`` (loss/VaR, only where exceeded and VaR is positive). Sorted by date, desk. Without a subject, or
    where it has no exception, the table has no rows.
    """
    ours = forecasts[forecasts["model"] == subject]
    if subject is None or ours.empty:
        return pd.DataFrame(columns=["date", "desk", "model"])
    book = read_book(pnl, ours, as_of=as_of)
    tables = [_desk_table(desk, subject, book) for desk in book.desks]
    table = pd.concat(tables, ignore_index=True)
    flags = [str(c) for c in table if str(c).startswith("exception_")]
    table[flags] = table[flags].fillna(False).astype(bool)
    return table[table[flags].any(axis=1)].sort_values(["date", "desk"]).reset_index(drop=True)


def _desk_table(desk: Desk, subject: str, book: Book) -> pd.DataFrame:
    keep = desk.dates <= book.as_of
    dates = desk.dates[keep]
    losses = {kind: values[keep] for kind, values in desk.losses.items()}
    columns: dict[str, Column] = {kind: -values for kind, values in losses.items()}
    for level in desk.levels(subject):
        days, measures = desk.forecasts[(subject, level)]
        frame = pd.DataFrame(measures, index=days).reindex(dates)
        var = frame["var"].to_numpy()
        columns |= {f"var_{level:g}": var, f"es_{level:g}": frame["es"].to_numpy()}
        for kind, loss in losses.items():
            columns |= _of_kind(loss, var, f"{kind}_{level:g}")
    return pd.DataFrame({"date": dates.astype(DATE_DTYPE), "desk": desk.name, "model": subject, **columns})


def _of_kind(loss: npt.NDArray[np.float64], var: npt.NDArray[np.float64], name: str) -> dict[str, Column]:
    beyond = loss > var
    ratio = np.divide(loss, var, out=np.full(len(loss), np.nan), where=beyond & (var > 0.0))
    return {f"exception_{name}": beyond, f"excess_{name}": np.where(beyond, loss - var, np.nan), f"ratio_{name}": ratio}
