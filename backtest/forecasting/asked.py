"""What is asked for beside the one-day forecast: intervals, further horizons, and how finely both are simulated."""

from collections.abc import Sequence
from dataclasses import dataclass

from backtest.errors import StudyError, near_miss
from backtest.values import listed, whole

BANDS = ("delta", "bootstrap", "none")
LONGEST = 250
"""Longest horizon in days."""


@dataclass(frozen=True)
class Asked:
    """Intervals and horizons asked for.

    bands: how intervals of one-day forecasts are made; horizons: days, ascending, the first is 1; seed: of everything
    simulated; paths: simulated paths a day; bootstraps: rebuilt pasts a day; bootstrap_days: how many of the last
    target days of each desk have their interval by bootstrap, the others by the delta method.
    """

    bands: str = "delta"
    horizons: tuple[int, ...] = (1,)
    seed: int = 1
    paths: int = 10_000
    bootstraps: int = 199
    bootstrap_days: int = 20


def ask(bands: str = "delta", horizons: Sequence[int] = (1,), **numbers: int) -> Asked:
    """Check what is asked for; further ``numbers`` are fields of Asked. One-day forecasts are always made.

    Raises StudyError for intervals of an unknown kind, a horizon that is no whole number of days from 1 to 250, and
    too few paths or bootstraps to read a tail from.
    """
    if bands not in BANDS:
        raise StudyError("unknown bands", value=bands, place="forecast.bands", remedy=near_miss(bands, BANDS))
    place = "forecast.horizons"
    days = {whole(value, place, least=1, most=LONGEST) for value in listed(horizons, place, "[1, 10]")}
    fewest = {"seed": 0, "paths": 1000, "bootstraps": 99, "bootstrap_days": 1}
    checked = {
        name: whole(value, f"forecast.{name}", least=fewest[name], **({"most": None} if name == "seed" else {}))
        for name, value in numbers.items()
    }
    return Asked(bands, tuple(sorted({1, *days})), **checked)
