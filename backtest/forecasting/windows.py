"""The only index arithmetic: which past stands before which day.

Target days are business days; the past of a target is the last W losses known the evening before it. A restated value
enters only once known, so a desk's history has epochs, each with its own series. "Before" is written here and nowhere
else, and no model is handed anything later.

Where each day's positions under past moves are known (P&L vectors), the past of a target is the last W scenarios before
it; everything below a Plan is the same for both.
"""

from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np
import pandas as pd

from backtest.records import DeskVectors

BLOCK_DAYS = 256
"""Weekday numbers per block: the unit of warm starts and recalibration."""
BATCH_BLOCKS = 4
"""Blocks worked on at once: the unit of memory."""


def weekday_numbers(days: np.ndarray) -> np.ndarray:
    """Return the Monday-to-Friday number since 1970 of each day (datetime64[D]), whatever the calendar."""
    return np.busday_count(np.datetime64("1970-01-01"), days).astype(np.int64)


@dataclass(frozen=True)
class Epoch:
    """A stretch of target days with the same knowledge of restated values: the known days and their losses."""

    days: np.ndarray
    losses: np.ndarray


@dataclass(frozen=True)
class ReportedVar:
    """The VaR an institution reported for one desk.

    levels (L), ascending; days: target days, datetime64[D] (n), ascending; var (L, n) in money, NaN where not reported.
    """

    levels: np.ndarray
    days: np.ndarray
    var: np.ndarray

    def on(self, days: np.ndarray) -> np.ndarray:
        """Return the VaR (L, m) reported for ``days`` (datetime64[D], m), NaN where there is none."""
        if not len(self.days):
            return np.full((len(self.levels), len(days)), np.nan)
        at = np.minimum(np.searchsorted(self.days, days), len(self.days) - 1)
        return np.where(self.days[at] == days, self.var[:, at], np.nan)


NO_REPORT = ReportedVar(np.empty(0), np.empty(0, "datetime64[D]"), np.empty((0, 0)))
"""Of a desk for which nothing is reported."""


@dataclass(frozen=True)
class Scaling:
    """What takes the ratios of a plan back to money.

    var (n): reported for the target day; level (n) of that VaR and of those behind the past; complete (n): whether
    this level was reported for every day of the past for which any was.
    """

    var: np.ndarray
    level: np.ndarray
    complete: np.ndarray


@dataclass(frozen=True)
class Plan:
    """The target days of one desk and where the past of each lies.

    targets, origins: datetime64[D] (n), an origin being the last day whose P&L or market move is used; places: weekday
    numbers (n); epoch: index into ``epochs`` (n); ends: position after the last loss of the past in that epoch's series
    (n); window: W; scaling: of a plan whose pasts are ratios, else None.
    """

    targets: np.ndarray
    origins: np.ndarray
    places: np.ndarray
    epoch: np.ndarray
    ends: np.ndarray
    epochs: tuple[Epoch, ...]
    window: int
    scaling: Scaling | None = None

    def pasts(self, rows: slice) -> np.ndarray:
        """Return the pasts of the target rows, losses (n, W), contiguous: kernels are compiled for one layout."""
        ends, epoch = self.ends[rows], self.epoch[rows]
        if len(ends) and np.all(epoch == epoch[0]) and np.all(np.diff(ends) == 1):
            losses = self.epochs[epoch[0]].losses[ends[0] - self.window : ends[-1]]
            return np.ascontiguousarray(np.lib.stride_tricks.sliding_window_view(losses, self.window))
        picked = [self.epochs[e].losses[end - self.window : end] for e, end in zip(epoch, ends, strict=True)]
        return np.array(picked).reshape(len(ends), self.window)

    @property
    def firsts(self) -> np.ndarray:
        """The first day of each target's past, datetime64[D] (n)."""
        days = [self.epochs[e].days[end - self.window] for e, end in zip(self.epoch, self.ends, strict=True)]
        return np.array(days, dtype="datetime64[D]")

    def blocks(self) -> list[slice]:
        """Return the rows of each block, in order: a block is a fixed stretch of weekday numbers."""
        edges = np.flatnonzero(np.diff(self.places // BLOCK_DAYS)) + 1
        bounds = [0, *edges.tolist(), len(self.places)]
        return [slice(a, b) for a, b in pairwise(bounds) if b > a]

    def batches(self) -> list[slice]:
        """Return the rows handed to a filter at once: a few blocks, so that lanes have runs enough to share."""
        blocks = self.blocks()
        few = [blocks[i : i + BATCH_BLOCKS] for i in range(0, len(blocks), BATCH_BLOCKS)]
        return [slice(some[0].start, some[-1].stop) for some in few]

    def refits(self, rows: slice, every: int) -> np.ndarray:
        """Tell which rows recalibrate: the first of a block, and each whose place // every differs from the last's."""
        places = self.places[rows]
        turn, block = places // every, places // BLOCK_DAYS
        again = (turn[1:] != turn[:-1]) | (block[1:] != block[:-1])
        return np.concatenate([[True], again]) if len(turn) else np.zeros(0, dtype=bool)


def plan(known: pd.DataFrame, calendar: np.ndarray, window: int) -> Plan:
    """Pair each target day of one desk with the past known the evening before it.

    ``known``: ``date, known_on, loss`` of one desk, several rows a date where restated, NaN where there is no P&L;
    ``calendar``: business days (datetime64[D], ascending), the last of which is the last target.
    """
    known = known.dropna(subset=["loss"]).sort_values(["date", "known_on"], kind="stable")
    dates = known["date"].to_numpy().astype("datetime64[D]")
    learnt = known["known_on"].to_numpy().astype("datetime64[D]")
    losses = known["loss"].to_numpy(dtype=np.float64)
    late = learnt > dates
    changes = np.unique(learnt[late])
    # A value learnt on day k serves targets after k: targets <= changes[0] are epoch 0, and so on.
    number = np.searchsorted(changes, calendar, side="left")
    epochs, parts = [], []
    for e in np.unique(number):
        limit = changes[e - 1] if e else None
        epochs.append(_epoch(dates, learnt, losses, late, limit))
        targets = calendar[number == e]
        ends = np.searchsorted(epochs[-1].days, targets, side="left")
        enough = ends >= window
        parts.append((targets[enough], ends[enough], np.full(enough.sum(), len(epochs) - 1)))
    targets, ends, epoch = (np.concatenate([p[i] for p in parts]) if parts else calendar[:0] for i in range(3))
    ends, epoch = ends.astype(np.int64), epoch.astype(np.int64)
    origins = np.array([epochs[e].days[end - 1] for e, end in zip(epoch, ends, strict=True)], dtype="datetime64[D]")
    return Plan(targets, origins, weekday_numbers(targets), epoch, ends, tuple(epochs), window)


def plan_vectors(vectors: DeskVectors, calendar: np.ndarray, window: int) -> Plan:
    """Pair each target day of one desk that has a vector with its last ``window`` scenarios before it, as losses.

    Targets are the days of ``calendar`` whose vector has that many. The origin is the last scenario used: the last day
    whose market move is in the past. Nothing else differs from a plan on P&L: fits may start from the day before, since
    runs and blocks lie on the same fixed grid, and positions that change from day to day only make that start worse.
    """
    rows = np.flatnonzero(np.isin(vectors.days, calendar))
    targets = vectors.days[rows]
    before = [
        np.searchsorted(vectors.scenarios[vectors.begins[i] : vectors.ends[i]], target, side="left")
        for i, target in zip(rows, targets, strict=True)
    ]
    counts = np.array(before, dtype=np.int64)
    enough = counts >= window
    targets, ends = targets[enough], (vectors.begins[rows] + counts)[enough]
    whole = Epoch(vectors.scenarios, -vectors.pnl)
    none = np.zeros(len(targets), dtype=np.int64)
    return Plan(targets, vectors.scenarios[ends - 1], weekday_numbers(targets), none, ends, (whole,), window)


def plan_scaled(known: pd.DataFrame, calendar: np.ndarray, reported: ReportedVar, window: int) -> Plan:
    """Pair each target day of one desk with the past ratios loss / VaR reported for that day, known the evening before.

    ``known`` and ``calendar`` as in ``plan``. Days without a VaR, or with one of zero or less, are in no past and are
    no target. The level is the lowest that was reported for every day of the past for which any was; where none was,
    the lowest that can be used. The VaR of the target day is known the evening before it: it is a forecast.
    """
    days = known["date"].to_numpy().astype("datetime64[D]")
    loss, var, ahead = known["loss"].to_numpy(dtype=np.float64), reported.on(days), reported.on(calendar)
    somewhere = ~np.isnan(var).all(axis=0)
    plans = []
    for level, then, now in zip(reported.levels, var, ahead, strict=True):
        usable = then > 0.0
        ratio = np.where(usable, loss, np.nan) / np.where(usable, then, 1.0)
        targets = calendar[now > 0.0]
        mine = plan(known.assign(loss=ratio), targets, window)
        wide = plan(known.assign(loss=np.where(somewhere & np.isnan(then), loss, ratio)), targets, window)
        complete = mine.firsts == wide.firsts[np.isin(wide.targets, mine.targets)]
        ours = now[np.searchsorted(calendar, mine.targets)]
        plans.append(replace(mine, scaling=Scaling(ours, np.full(len(ours), level), complete)))
    return _lowest(plans) if plans else plan(known.iloc[:0], calendar[:0], window)


def _lowest(plans: list[Plan]) -> Plan:
    """Return one plan of plans by level, ascending: for each target that of the lowest complete level, else lowest."""
    scalings = [p.scaling for p in plans if p.scaling is not None]
    sizes = [len(p.targets) for p in plans]
    number = np.repeat(np.arange(len(plans)), sizes)
    targets, complete = np.concatenate([p.targets for p in plans]), np.concatenate([s.complete for s in scalings])
    order = np.lexsort((number, ~complete, targets))
    first = np.concatenate([[True], np.diff(targets[order]) > np.timedelta64(0, "D")])[: len(order)]
    keep = order[first]
    shift = np.repeat(np.cumsum([0, *(len(p.epochs) for p in plans[:-1])]), sizes)
    origins, places, ends = (
        np.concatenate([getattr(p, f) for p in plans])[keep] for f in ("origins", "places", "ends")
    )
    epoch = (np.concatenate([p.epoch for p in plans]) + shift)[keep]
    var, level = (np.concatenate([getattr(s, f) for s in scalings])[keep] for f in ("var", "level"))
    epochs = tuple(epoch for p in plans for epoch in p.epochs)
    scaling = Scaling(var, level, complete[keep])
    return Plan(targets[keep], origins, places, epoch, ends, epochs, plans[0].window, scaling)


def _epoch(
    dates: np.ndarray, learnt: np.ndarray, losses: np.ndarray, late: np.ndarray, limit: np.datetime64 | None
) -> Epoch:
    """Return the series in which every late value learnt by ``limit`` has taken the place of what it restates."""
    seen = ~late if limit is None else ~late | (learnt <= limit)
    days, kept = dates[seen], losses[seen]
    last = np.ones(len(days), dtype=bool)
    last[:-1] = days[1:] != days[:-1]
    return Epoch(days[last], kept[last])
