"""The bank's reported model HS-250: historical simulation from the hypothetical P&L as it was known each evening.

VaR is the ceil(nq)-th smallest of the last n losses; ES is the exact integral of that step function. n is 500 until
the model change, 250 from it on. Before a desk was listed the bank fed the model with the desk's positions under past
market moves, so that every desk has a forecast from its first day. Three things are wrong or odd, by design:
  - Currencies carries a conservative add-on that nobody removed;
  - Power and gas is granted a diversification credit twice since CREDIT_FROM, which cuts its VaR;
  - Metals' past losses are rescaled to today's positions (right, but challengers that learn from past P&L cannot).
Positions differ a little from those of the P&L: every forecast carries a factor within 2% of one.
"""

import numpy as np
from ledger import FIRM, NAMES, RESTATED_DESK, Ledger, Restatement

MODEL_CHANGE = np.datetime64("2024-07-01")
WINDOW_BEFORE, WINDOW_AFTER = 500, 250
ADD_ON_DESK, ADD_ON = "Currencies", 1.7
CREDIT_DESK, CREDIT, CREDIT_FROM = "Power and gas", 0.55, np.datetime64("2024-10-01")
POSITION_NOISE = 0.02
MEASURES = ("var_975_1d", "var_99_1d", "es_975_1d")


def quantile(losses: np.ndarray, level: float) -> np.ndarray:
    """Return the ceil(nq)-th smallest of each row of sorted losses."""
    return losses[..., _rank(losses.shape[-1], level) - 1]


def shortfall(losses: np.ndarray, level: float) -> np.ndarray:
    """Return the integral of the empirical quantile from ``level`` to 1, over 1 - level, for sorted losses."""
    n = losses.shape[-1]
    k = _rank(n, level)
    part = (k / n - level) * losses[..., k - 1] + losses[..., k:].sum(axis=-1) / n
    return part / (1 - level)


def _rank(n: int, level: float) -> int:
    return int(np.ceil(n * level - 1e-9))


def report(ledger: Ledger, restated: tuple[Restatement, ...], seed: int) -> np.ndarray:
    """Return the reported forecasts in cents, [days, NAMES, MEASURES]; zero before the first full window."""
    rng = np.random.default_rng([seed, 3])
    positions = 1 + POSITION_NOISE * rng.uniform(-1, 1, size=ledger.has_row.shape)
    factor = positions * _oddities(ledger.days)
    old = ledger.days < MODEL_CHANGE
    out = np.zeros((*ledger.has_row.shape, len(MEASURES)))
    for j, name in enumerate(NAMES):
        touched = restated if name in (FIRM, RESTATED_DESK) else ()
        for days, window in ((old, WINDOW_BEFORE), (~old, WINDOW_AFTER)):
            rows, pasts = _pasts(ledger, j, window, touched)
            keep = days[rows]
            losses = np.sort(pasts[keep], axis=1)
            values = [quantile(losses, 0.975), quantile(losses, 0.99), shortfall(losses, 0.975)]
            out[rows[keep], j] = np.column_stack(values) * factor[rows[keep], j, None]
    return np.round(out).astype(np.int64)


def _oddities(days: np.ndarray) -> np.ndarray:
    factor = np.ones((days.size, len(NAMES)))
    factor[:, NAMES.index(ADD_ON_DESK)] = ADD_ON
    factor[days >= CREDIT_FROM, NAMES.index(CREDIT_DESK)] = CREDIT
    return factor


def _pasts(ledger: Ledger, j: int, window: int, restated: tuple[Restatement, ...]) -> tuple[np.ndarray, np.ndarray]:
    """Return target rows and, for each, the last ``window`` known losses before it under the positions of the day."""
    loss = -ledger.kinds["hypothetical"][:, j].astype(float)
    listed = ledger.has_row[:, j]
    recorded = listed | (np.arange(loss.size) < np.argmax(listed))
    known = np.flatnonzero(recorded)
    rows = np.arange(window, loss.size)
    end = np.searchsorted(known, rows)
    rows, end = rows[end >= window], end[end >= window]
    member = known[end[:, None] - window + np.arange(window)]
    pasts = loss[member]
    for late in restated:
        blind = (member == late.day) & (rows <= late.known)[:, None]
        pasts = np.where(blind, pasts + late.amount, pasts)
    return rows, pasts * (ledger.scale[rows, j][:, None] / ledger.scale[member, j])
