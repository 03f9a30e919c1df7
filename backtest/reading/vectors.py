"""P&L vectors: each day's positions under past market moves (``date, desk, scenario, pnl``), one a desk and day.

``date`` is the target day or, where the study says ``var_date = "as-of"``, the day the positions stood, for the next
business day: the same declaration as for VaR. A scenario is the past day whose market move it is. It must have happened
by the evening before the target: before ``date``, or on it where ``date`` is the day the positions stood.
"""

from collections.abc import Callable, Iterable, Sequence
from itertools import pairwise

import numpy as np

from backtest.errors import DataError, near_miss
from backtest.reading.cells import coded_names, dates, numbers, refuse_first
from backtest.reading.columns import refuse_missing
from backtest.reading.tables import Table
from backtest.records import DeskVectors
from backtest.study_form import Data

VECTOR_COLUMNS = ("date", "desk", "scenario", "pnl")


def read_vectors(table: Table, data: Data, desks: Iterable[str]) -> dict[str, DeskVectors]:
    """Return the vectors of a file by desk, days as written (not yet shifted), profit positive.

    Raises DataError (see cells) and for an unknown desk, an empty P&L, a scenario that had not happened, the same
    date x desk x scenario twice.
    """
    for column in VECTOR_COLUMNS:
        if column not in table.columns:
            refuse_missing(table, "the vectors file's column", column)
    names, codes = coded_names(table, "desk")
    refuse_strangers(table, "desk", names, codes, desks, "a vector names a desk of the data")
    days, scenarios = (dates(table, column).astype("datetime64[D]") for column in ("date", "scenario"))
    pnl = filled_numbers(table, "pnl")
    pnl = pnl if data.pnl_sign == "profit-positive" else 0.0 - pnl
    return by_desk(names, codes, days, scenarios, pnl, table.place, as_of_dated=data.var_date == "as-of")


def refuse_strangers(
    table: Table, column: str, names: Sequence[str], codes: np.ndarray, known: Iterable[str], rule: str
) -> None:
    """Refuse the first row whose name (``names[codes]``) is not among ``known``."""
    known = set(known)
    strange = np.array([name not in known for name in names], dtype=bool)
    if strange.any():
        row = int(strange[codes].argmax())
        name = names[codes[row]]
        remedy = near_miss(name, known) + " Correct the name, or supply it."
        raise DataError(f"an unknown {column}", rule=rule, value=name, place=table.place(row, column), remedy=remedy)


def filled_numbers(table: Table, column: str) -> np.ndarray:
    """Return a column of numbers (see cells) in which no cell may be empty."""
    values = numbers(table, column)
    rule = f"every row has its {column}"
    remedy = "Supply the value, or take the row out."
    refuse_first(table, np.isnan(values), column, "the cell is empty", rule=rule, remedy=remedy)
    return values


def by_desk(
    names: Sequence[str],
    codes: np.ndarray,
    days: np.ndarray,
    scenarios: np.ndarray,
    pnl: np.ndarray,
    place: Callable[[int, str], str],
    *,
    as_of_dated: bool,
) -> dict[str, DeskVectors]:
    """Cut long rows (one a desk x day x scenario, in any order) into vectors by desk.

    ``place`` says where a row stands. Raises DataError for a scenario that had not happened, and a row that stands
    twice; of several the first in the order handed over is named.
    """
    _refuse_look_ahead(days, scenarios, place, as_of_dated)
    order = np.lexsort((scenarios, days, codes))
    codes, days, scenarios, pnl = codes[order], days[order], scenarios[order], pnl[order]
    new_desk = np.concatenate([[True], codes[1:] != codes[:-1]])
    new_day = new_desk | np.concatenate([[True], days[1:] != days[:-1]])
    again = ~new_day & np.concatenate([[False], scenarios[1:] == scenarios[:-1]])
    _refuse_twice(names, codes, days, scenarios, order, again, place)
    found = {}
    for begin, end in pairwise([*np.flatnonzero(new_desk).tolist(), len(codes)]):
        begins = np.flatnonzero(new_day[begin:end])
        ends = np.append(begins[1:], end - begin)
        mine = slice(begin, end)
        found[names[codes[begin]]] = DeskVectors(days[mine][begins], begins, ends, scenarios[mine], pnl[mine])
    return dict(sorted(found.items()))


def _refuse_look_ahead(
    days: np.ndarray, scenarios: np.ndarray, place: Callable[[int, str], str], as_of_dated: bool
) -> None:
    wrong = scenarios > days if as_of_dated else scenarios >= days
    if wrong.any():
        row = int(wrong.argmax())
        meaning = "the day the positions stood" if as_of_dated else "the target day"
        raise DataError(
            f"the scenario had not happened when the vector of {days[row]} was due",
            rule=f"a scenario lies {'not after' if as_of_dated else 'before'} the date, which is {meaning}",
            value=str(scenarios[row]),
            place=place(row, "scenario"),
            remedy="Take the row out, or correct data.var_date (target | as-of).",
        )


def _refuse_twice(
    names: Sequence[str],
    codes: np.ndarray,
    days: np.ndarray,
    scenarios: np.ndarray,
    order: np.ndarray,
    again: np.ndarray,
    place: Callable[[int, str], str],
) -> None:
    """Refuse the first row, in the order handed over, that says again what a row before it says."""
    if again.any():
        at = np.flatnonzero(again)[np.argmin(order[again])]
        raise DataError(
            "the same date, desk and scenario stand twice",
            rule="a vector has one P&L a scenario",
            value=f"{days[at]}, {names[codes[at]]}, {scenarios[at]}",
            place=place(int(order[at]), "scenario"),
            remedy="Keep one of the rows.",
        )
