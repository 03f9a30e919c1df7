"""What each test could have seen, looked up in the table ``power.csv`` that ``write_power.py`` wrote."""

import csv
from functools import lru_cache
from importlib.resources import files
from typing import NamedTuple

from backtest.judging.alternatives import ALTERNATIVES

COLUMNS = ("test", "level", "days", "alternative", "rejected", "reviews", "simulations")
SIGNIFICANCE = 0.05
LEVELS = (0.975, 0.99)
LENGTHS = (125, 250, 500, 750, 1000, 1500, 2500)
AGAINST = {"how often": "sigma-20", "how deep": "sigma-20", "when": "no-reaction", "what shape": "thin-tail"}
"""The alternative that ``could_see`` is about, by question; the other questions have none."""
FILE = files("backtest.judging") / "power.csv"

Cell = tuple[str, float, int, str]


class Seen(NamedTuple):
    """How many simulated reviews a test rejected, of how many, with how many simulations for each p."""

    rejected: int
    reviews: int
    simulations: int

    @property
    def share(self) -> float:
        """Power: rejected reviews over all, those without a p-value included."""
        return self.rejected / self.reviews


@lru_cache(maxsize=1)
def power_table() -> dict[Cell, Seen]:
    """Return the shipped table by (test, level, days, alternative); read once."""
    rows = csv.DictReader(FILE.read_text(encoding="utf-8").splitlines())
    return {
        (r["test"], float(r["level"]), int(r["days"]), r["alternative"]): Seen(
            int(r["rejected"]), int(r["reviews"]), int(r["simulations"])
        )
        for r in rows
    }


def length_used(days: int) -> int | None:
    """Return the largest length of the table not above ``days``; None below the shortest."""
    return max((length for length in LENGTHS if length <= days), default=None)


def level_used(level: float) -> float | None:
    """Return the level of the table that equals ``level`` but for rounding; None where there is none."""
    return next((known for known in LEVELS if abs(known - level) < 1e-9), None)


def could_see(
    test: str, question: str, level: float, days: int, significance: float, default_variant: bool = True
) -> tuple[float | None, str]:
    """Return the power of a test against its question's alternative, and a note that names it.

    None, with the reason in the note, where the table has no such level, length, significance, test or variant; None
    without a note for questions that have no alternative.
    """
    if question not in AGAINST:
        return None, ""
    if not default_variant:
        return None, "power not simulated for this variant"
    if abs(significance - SIGNIFICANCE) > 1e-12:
        return None, f"power not simulated at significance {significance:g}"
    known, length = level_used(level), length_used(days)
    if known is None:
        return None, "power not simulated at this level"
    if length is None:
        return None, f"power not simulated below {LENGTHS[0]} days"
    seen = power_table().get((test, known, length, AGAINST[question]))
    if seen is None:
        return None, "power not simulated for this test"
    return seen.share, f"power at {length} days against: {ALTERNATIVES[AGAINST[question]].words}"
