"""Vectors of linear books: factor returns (``date, factor, return``) x exposures (``date, desk, factor, amount``).

The P&L of a scenario is the sum over factors of amount x the factor's return on that past day, profit positive.
``date`` of exposures is read as that of vectors (see vectors.py). The scenarios of a day are the dates of the factors
file before it, from the first on which every factor held that day has a return; a gap after that is refused.
"""

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np

from backtest.errors import DataError
from backtest.reading.cells import coded_names, dates
from backtest.reading.columns import refuse_missing
from backtest.reading.tables import Table
from backtest.reading.vectors import filled_numbers, refuse_strangers
from backtest.records import DeskVectors

FACTOR_COLUMNS = ("date", "factor", "return")
EXPOSURE_COLUMNS = ("date", "desk", "factor", "amount")


@dataclass(frozen=True)
class Factors:
    """Returns of factors: names (F), days datetime64[D] (S, ascending), returns (S, F), NaN where there is none."""

    names: list[str]
    days: np.ndarray
    returns: np.ndarray


@dataclass(frozen=True)
class _Held:
    """The exposures of one desk: days (n, ascending), amounts (n, F), and the row of the file each amount stands in."""

    desk: str
    days: np.ndarray
    amounts: np.ndarray
    rows: np.ndarray


def read_factors(table: Table) -> Factors:
    """Return the factor returns of a file; refuses an empty return and a date x factor that stands twice."""
    _need(table, FACTOR_COLUMNS, "factors")
    written, codes = coded_names(table, "factor")
    names = sorted(written)
    codes = _places(written, names)[codes]
    days = dates(table, "date").astype("datetime64[D]")
    values = filled_numbers(table, "return")
    _refuse_twice(table, [codes, days], "factor", "a factor has one return a day")
    every, at = np.unique(days, return_inverse=True)
    returns = np.full((len(every), len(names)), np.nan)
    returns[at, codes] = values
    return Factors(names, every, returns)


def build_vectors(table: Table, factors: Factors, desks: Iterable[str], *, as_of_dated: bool) -> dict[str, DeskVectors]:
    """Return the vectors of an exposures file by desk, days as written (not yet shifted).

    Raises DataError for an unknown desk or factor, an empty amount, a date x desk x factor that stands twice, and a
    factor held that day without a return on one of the scenarios. An amount of zero needs no return.
    """
    found = {}
    for held in _exposures(table, factors, desks):
        first, last = _scenarios(factors, held, as_of_dated)
        _refuse_gaps(table, factors, held, first, last)
        pnl = _products(held.amounts, factors.returns)
        picked = np.concatenate([np.arange(a, b) for a, b in zip(first, last, strict=True)])
        lengths = last - first
        ends = np.cumsum(lengths)
        values = pnl[np.repeat(np.arange(len(held.days)), lengths), picked]
        found[held.desk] = DeskVectors(held.days, ends - lengths, ends, factors.days[picked], values)
    return dict(sorted(found.items()))


def _need(table: Table, columns: tuple[str, ...], role: str) -> None:
    for column in columns:
        if column not in table.columns:
            refuse_missing(table, f"the {role} file's column", column)


def _refuse_twice(table: Table, keys: list[np.ndarray], column: str, rule: str) -> None:
    order = np.lexsort(keys)
    same = np.logical_and.reduce([key[order][1:] == key[order][:-1] for key in keys])
    if same.any():
        row = int(order[1:][same].min())
        value = table.columns[column][row].as_py()
        place, remedy = table.place(row, column), "Keep one of the rows."
        raise DataError("the same row stands twice", rule=rule, value=value, place=place, remedy=remedy)


def _exposures(table: Table, factors: Factors, desks: Iterable[str]) -> list[_Held]:
    _need(table, EXPOSURE_COLUMNS, "exposures")
    desk_names, desk = coded_names(table, "desk")
    refuse_strangers(table, "desk", desk_names, desk, desks, "an exposure names a desk of the data")
    factor_names, factor = coded_names(table, "factor")
    refuse_strangers(table, "factor", factor_names, factor, factors.names, "an exposure names a factor with returns")
    days = dates(table, "date").astype("datetime64[D]")
    amounts = filled_numbers(table, "amount")
    _refuse_twice(table, [factor, days, desk], "factor", "a desk has one amount a day and factor")
    place = _places(factor_names, factors.names)[factor]
    found = []
    for code, name in enumerate(desk_names):
        mine = np.flatnonzero(desk == code)
        own, at = np.unique(days[mine], return_inverse=True)
        wide, rows = np.zeros((len(own), len(factors.names))), np.zeros((len(own), len(factors.names)), dtype=np.int64)
        wide[at, place[mine]], rows[at, place[mine]] = amounts[mine], mine
        found.append(_Held(name, own, wide, rows))
    return found


def _places(names: list[str], among: list[str]) -> np.ndarray:
    at = {name: i for i, name in enumerate(among)}
    return np.array([at[name] for name in names], dtype=np.int64)


def _scenarios(factors: Factors, held: _Held, as_of_dated: bool) -> tuple[np.ndarray, np.ndarray]:
    """Return, for each day, the first scenario and the place after the last, as places among the factors' days."""
    begun = np.argmax(~np.isnan(factors.returns), axis=0)
    first = np.where(held.amounts != 0, begun, 0).max(axis=1)
    last = np.searchsorted(factors.days, held.days, side="right" if as_of_dated else "left")
    return np.minimum(first, last), last


def _refuse_gaps(table: Table, factors: Factors, held: _Held, first: np.ndarray, last: np.ndarray) -> None:
    missing = np.isnan(factors.returns)
    for f in np.flatnonzero(missing.any(axis=0) & (held.amounts != 0).any(axis=0)):
        gaps = np.concatenate([[0], np.cumsum(missing[:, f])])
        wrong = (held.amounts[:, f] != 0) & (gaps[last] > gaps[first])
        if wrong.any():
            i = int(wrong.argmax())
            at = int(np.argmax(missing[first[i] : last[i], f])) + first[i]
            raise DataError(
                f"the factor {factors.names[f]!r} has no return on {factors.days[at]}, a scenario of {held.days[i]}",
                rule="from its first day on, a factor held has a return on every date of the factors file",
                value=factors.names[f],
                place=table.place(int(held.rows[i, f]), "factor"),
                remedy="Supply the return in data.factors (0 where the factor did not move).",
            )


def _products(amounts: np.ndarray, returns: np.ndarray) -> np.ndarray:
    """Return amounts (n, F) x returns (S, F), summed over factors, (n, S).

    Factor by factor and not as one matrix product: the last digit of a day's vector then does not depend on which other
    days the file holds.
    """
    total = np.zeros((len(amounts), len(returns)))
    for f in np.flatnonzero((amounts != 0).any(axis=0)):
        moves = np.where(np.isnan(returns[:, f]), 0.0, returns[:, f])
        total += amounts[:, f, None] * moves
    return total
