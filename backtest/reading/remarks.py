"""Remarks: what the data show that a reader should know; counted, never blocking, in an order of their own."""

from collections.abc import Iterable

import pandas as pd

from backtest.records import Remark


def per_desk(rule: str, source: str, rows: pd.DataFrame, text: str) -> list[Remark]:
    """Return one remark per desk of ``rows`` (``desk, date``): how many rows, the first and last date.

    ``text`` may hold {count}, {first} and {last}.
    """
    if rows.empty:
        return []
    seen = rows.groupby("desk", sort=True)["date"].agg(["size", "min", "max"])
    return [
        desk_remark(
            rule, source, str(desk), first, last, int(count), text.format(count=count, first=iso(first), last=iso(last))
        )
        for desk, count, first, last in seen.itertuples()
    ]


def desk_remark(rule: str, source: str, desk: str, first: object, last: object, count: int, text: str) -> Remark:
    """Return one remark; ``first`` and ``last`` are dates, kept as ISO days."""
    return Remark(rule, source, desk, iso(first), iso(last), count, text)


def iso(day: object) -> str:
    """Return a date as an ISO day."""
    return pd.Timestamp(day).date().isoformat()  # type: ignore[arg-type]


def in_order(remarks: Iterable[Remark]) -> tuple[Remark, ...]:
    """Return remarks by desk (the whole file first), rule and place, whatever order they were found in."""
    return tuple(sorted(remarks, key=lambda r: (r.desk, r.rule, r.source, r.first, r.text)))
