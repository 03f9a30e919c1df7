"""What Larkmoor Bank's ledger holds: three kinds of P&L for the firm and its desks, with the flaws of a real one.

All money here is whole cents, so that the desks add up to the firm exactly. The flaws are planted, each once: a run
of unchanged values, a missing row, an intraday loss that only the actual P&L knows, two restated days.
"""

from dataclasses import dataclass

import numpy as np
from world import BOOKS, DESKS, World

FIRM = "Firm"
NAMES = (FIRM, *DESKS)
STALE_DESK, STALE_FROM, STALE_DAYS = "Structured", np.datetime64("2025-08-04"), 8
MISSING_DESK, MISSING_DAY = "Equity options", np.datetime64("2025-10-14")
INTRADAY_DESK, INTRADAY_DAY, INTRADAY_LOSS = "Rates", np.datetime64("2025-02-05"), 16_000_000
LOOSE_DESK = "Credit"
"""The desk whose risk engine sees the index but not the issuers: poor P&L attribution."""
RESTATED_DESK = "Rates"
CORRECTION_DAY, CORRECTION = np.datetime64("2025-09-16"), -85_000
BUSINESS_DAYS_UNTIL_KNOWN = 9
NOISE_ACTUAL, FEES, NOISE_ENGINE = 0.05, 0.004, 0.15


@dataclass(frozen=True)
class Restatement:
    """A loss booked late: on ``day`` (row number) ``amount`` cents of P&L were still missing, until ``known``."""

    day: int
    known: int
    amount: int


@dataclass(frozen=True)
class Ledger:
    """P&L in cents, [days, NAMES], as known at the cut-off; ``has_row`` is False where nothing was recorded."""

    days: np.ndarray
    kinds: dict[str, np.ndarray]
    has_row: np.ndarray
    scale: np.ndarray


def book(world: World, seed: int) -> Ledger:
    """Return the ledger of a world: hypothetical, actual and risk-theoretical P&L."""
    rng = np.random.default_rng([seed, 2])
    noise = rng.standard_normal((3, *world.pnl.shape))
    day = {key: int(np.searchsorted(world.days, value)) for key, value in _planted().items()}
    hypothetical = world.pnl.copy()
    stale = slice(day["stale"], day["stale"] + STALE_DAYS)
    hypothetical[stale, DESKS.index(STALE_DESK)] = hypothetical[day["stale"], DESKS.index(STALE_DESK)]
    actual = hypothetical + NOISE_ACTUAL * world.reach * noise[0] - FEES * world.scale
    actual[stale, DESKS.index(STALE_DESK)] = hypothetical[stale, DESKS.index(STALE_DESK)]
    actual[day["intraday"], DESKS.index(INTRADAY_DESK)] -= INTRADAY_LOSS
    engine = hypothetical + NOISE_ENGINE * world.reach * noise[1]
    j = DESKS.index(LOOSE_DESK)
    index_part = BOOKS[j].common * world.common + 0.3 * noise[2, :, j]
    engine[:, j] = world.reach[:, j] * index_part
    kinds = {"hypothetical": hypothetical, "actual": actual, "risk_theoretical": engine}
    has_row = np.column_stack([np.ones(world.days.size, dtype=bool), world.listed[:, :-1]])
    has_row[day["missing"], NAMES.index(MISSING_DESK)] = False
    scale = np.column_stack([np.ones(world.days.size), world.scale[:, :-1]])
    return Ledger(world.days, {k: _with_firm(v, world.listed) for k, v in kinds.items()}, has_row, scale)


def _planted() -> dict[str, np.datetime64]:
    return {"stale": STALE_FROM, "missing": MISSING_DAY, "intraday": INTRADAY_DAY}


def _with_firm(pnl: np.ndarray, listed: np.ndarray) -> np.ndarray:
    cents = np.round(pnl * 100).astype(np.int64)
    firm = np.where(listed, cents, 0).sum(axis=1)
    return np.column_stack([firm, cents[:, :-1]])


def restatements(ledger: Ledger, firm_var: np.ndarray, last: slice) -> tuple[Restatement, ...]:
    """Return the two restated days of the desk and of the firm.

    The first hid an exception: of the firm's exceptions in ``last`` it is the one least beyond its VaR (``firm_var``,
    cents), and 7% of VaR more than the excess was booked late. The second is a small correction of an ordinary day.
    None where the seed gave the firm no exception to hide: such a seed tells another story.
    """
    loss = -ledger.kinds["hypothetical"][:, 0]
    candidates = np.flatnonzero(loss[last] > firm_var[last]) + last.start
    if candidates.size == 0:
        return ()
    day = int(candidates[np.argmin(loss[candidates] / firm_var[candidates])])
    late = -int(loss[day] - 0.93 * firm_var[day])
    other = int(np.searchsorted(ledger.days, CORRECTION_DAY))
    wait = BUSINESS_DAYS_UNTIL_KNOWN
    return Restatement(day, day + wait, late), Restatement(other, other + wait, CORRECTION * 100)
