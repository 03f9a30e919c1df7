"""The invented world of Larkmoor Bank: its calendar, its desks, one common volatility, and the P&L that follows.

On each day a class of days is drawn (quiet to violent); given the class everything is normal. Desk j earns
    drift_j + scale_j * sigma_t ** power_j * u_jt,
    u_jt = calm_j * (b_j x_t + sqrt(1 - b_j^2) sqrt(V_t) e_jt / S - h_j (V_t - 1)) - spike,
    x_t  = (sqrt(V_t) z_t - SKEW (V_t - 1)) / S,
with V_t the variance of the day's class (mean 1), z and e standard normal, S such that x has variance 1. The mixture
makes innovations heavy-tailed and, through SKEW, loss-heavy. sigma_t follows a GJR recursion on x, so that losses
raise it more than gains; two stress episodes raise the level it returns to.
"""

from dataclasses import dataclass

import numpy as np

FIRST = np.datetime64("2012-01-02")
"""Simulation begins here: the years before OPENING warm up the volatility and feed the bank's first scenarios."""
OPENING = np.datetime64("2015-01-01")
CUT_OFF = np.datetime64("2025-12-31")
LEGACY_CLOSED = np.datetime64("2019-07-01")
METALS_HALVED = np.datetime64("2025-07-01")
STRUCTURED_DAYS = 290
STRESS = (("2020-09-14", "2020-11-20"), ("2025-03-10", "2025-05-16"))

CLASS_SHARE = np.array([0.30, 0.34, 0.22, 0.10, 0.033, 0.007])
_VARIANCE = np.array([0.35, 0.70, 1.10, 2.00, 4.50, 10.0])
CLASS_VARIANCE = _VARIANCE / (CLASS_SHARE @ _VARIANCE)
SKEW = 0.25
UNIT = float(np.sqrt(1 + SKEW**2 * (CLASS_SHARE @ CLASS_VARIANCE**2 - 1)))
"""S above: the standard deviation of sqrt(V) z - SKEW (V - 1)."""

ALPHA, GAMMA, BETA = 0.01, 0.06, 0.92
STRESS_VARIANCE, OUTBREAK_VARIANCE = 10.0, 7.0
DRIFT = 0.03
SPIKE, SPIKE_SD = 4.0, 0.3


@dataclass(frozen=True)
class Desk:
    """One book: its first day, scale in EUR, share b in the common shock, reaction to volatility, own skewness h."""

    name: str
    start: str
    scale: float
    common: float
    power: float = 1.0
    skew: float = 0.0
    calm: float = 1.0
    spikes: float = 0.0


BOOKS = (
    Desk("Rates", "2018-01-02", 1_300_000, 0.55),
    Desk("Currencies", "2018-01-02", 800_000, 0.35, power=0.15),
    Desk("Equity options", "2018-07-02", 1_000_000, 0.80, skew=0.20),
    Desk("Credit", "2019-01-02", 900_000, 0.55),
    Desk("Power and gas", "2019-07-01", 550_000, 0.20, power=0.25, calm=0.6, spikes=0.042),
    Desk("Metals", "2019-01-02", 800_000, 0.40),
    Desk("Structured", "", 600_000, 0.65),
    Desk("Legacy books", "2012-01-02", 0.0, 0.75),
)
"""The seven desks, and the unlisted legacy books that carried the firm before them (not a desk of any file)."""
DESKS = tuple(book.name for book in BOOKS[:-1])
LEGACY_SCALE = (("2012-01-02", 4e6), ("2018-01-02", 2.6e6), ("2018-07-02", 1.9e6), ("2019-01-02", 0.8e6))


@dataclass(frozen=True)
class World:
    """What happened. Arrays run over days (first axis) and books; money in EUR, profit positive.

    ``scale`` is each book's position whether or not it is listed yet; ``listed`` says from when it counts.
    """

    days: np.ndarray
    sigma: np.ndarray
    common: np.ndarray
    scale: np.ndarray
    reach: np.ndarray
    listed: np.ndarray
    pnl: np.ndarray


def business_days() -> np.ndarray:
    """Return Monday to Friday less the bank's invented holidays, from FIRST to CUT_OFF."""
    days = np.arange(FIRST, CUT_OFF + 1)
    year = days.astype("datetime64[Y]")
    in_year = (days - year.astype("datetime64[D]")).astype(int) + 1
    month = days.astype("datetime64[M]")
    in_month = (days - month.astype("datetime64[D]")).astype(int) + 1
    month_number = month.astype(int) % 12 + 1
    weekday = (days.astype(int) + 3) % 7
    founders_day = (month_number == 5) & (weekday == 0) & (in_month <= 7)
    harvest_day = (month_number == 8) & (weekday == 0) & (in_month > 24)
    christmas = (month_number == 12) & ((in_month == 25) | (in_month == 26))
    return days[(weekday < 5) & (in_year > 1) & ~founders_day & ~harvest_day & ~christmas]


def stressed(days: np.ndarray) -> np.ndarray:
    """Say which days lie in one of the two stress episodes."""
    spans = [(np.datetime64(a), np.datetime64(b)) for a, b in STRESS]
    return np.any([(days >= a) & (days <= b) for a, b in spans], axis=0)


def volatility(days: np.ndarray, common: np.ndarray) -> np.ndarray:
    """Return sigma_t, known the evening before: a GJR recursion on the common shock (unit level outside stress)."""
    level = np.where(stressed(days), STRESS_VARIANCE, 1.0)
    outbreak = np.isin(days, [np.datetime64(first) for first, _ in STRESS])
    rest = 1 - ALPHA - GAMMA / 2 - BETA
    variance = np.ones(days.size)
    for t in range(1, days.size):
        square = variance[t - 1] * common[t - 1] ** 2
        loss = common[t - 1] < 0
        variance[t] = level[t] * rest + (ALPHA + GAMMA * loss) * square + BETA * variance[t - 1]
        if outbreak[t]:
            variance[t] = max(variance[t], OUTBREAK_VARIANCE)
    return np.sqrt(variance)


def simulate(seed: int) -> World:
    """Return the world of one seed."""
    rng = np.random.default_rng([seed, 1])
    days = business_days()
    V = CLASS_VARIANCE[rng.choice(CLASS_SHARE.size, size=days.size, p=CLASS_SHARE)]
    common = (np.sqrt(V) * rng.standard_normal(days.size) - SKEW * (V - 1)) / UNIT
    sigma = volatility(days, common)
    scale, listed = _positions(days)
    reach = scale * sigma[:, None] ** np.array([book.power for book in BOOKS])
    own = rng.standard_normal((days.size, len(BOOKS)))
    spike = rng.random((days.size, len(BOOKS))) < np.array([book.spikes for book in BOOKS])
    size = SPIKE + SPIKE_SD * rng.standard_normal((days.size, len(BOOKS)))
    shocks = [_shock(book, V, common, own[:, j], spike[:, j] * size[:, j]) for j, book in enumerate(BOOKS)]
    pnl = DRIFT * scale + reach * np.column_stack(shocks)
    return World(days, sigma, common, scale, reach, listed, pnl)


def _shock(book: Desk, V: np.ndarray, common: np.ndarray, own: np.ndarray, spike: np.ndarray) -> np.ndarray:
    b = book.common
    ordinary = b * common + np.sqrt((1 - b**2) * V) * own / UNIT - book.skew * (V - 1)
    return book.calm * ordinary - spike + book.spikes * SPIKE


def _positions(days: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    scale = np.tile([book.scale for book in BOOKS], (days.size, 1))
    scale[days >= METALS_HALVED, DESKS.index("Metals")] /= 2
    for start, size in LEGACY_SCALE:
        scale[days >= np.datetime64(start), -1] = size
    starts = [np.datetime64(book.start) if book.start else days[-STRUCTURED_DAYS] for book in BOOKS]
    listed = days[:, None] >= np.array(starts)
    listed[days >= LEGACY_CLOSED, -1] = False
    return scale, listed
