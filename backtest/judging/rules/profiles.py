"""What a rule profile holds, and how its name is resolved."""

from dataclasses import dataclass

from backtest.errors import StudyError, near_miss


@dataclass(frozen=True, slots=True)
class Cited:
    """A number of a rule with the paragraph it stands in."""

    value: float
    paragraph: str


@dataclass(frozen=True, slots=True)
class ZoneStart:
    """A zone and the smallest count of exceptions that belongs to it."""

    name: str
    start: int


@dataclass(frozen=True, slots=True)
class Profile:
    """A dated rule for the firm-wide count of exceptions.

    ``multipliers`` by count, the last one for every larger count; ``zones`` in ascending order of start.
    """

    name: str
    text: str
    date: str
    days: Cited
    level: Cited
    counting: str
    missing: str
    zones: tuple[ZoneStart, ...]
    zones_paragraph: str
    multipliers: tuple[Cited, ...]

    def zone(self, count: int) -> str:
        """Return the zone of a count of exceptions."""
        return [zone.name for zone in self.zones if zone.start <= count][-1]

    def multiplier(self, count: int) -> Cited:
        """Return the multiplier of a count of exceptions."""
        return self.multipliers[min(count, len(self.multipliers) - 1)]


def profile_named(name: str, known: tuple[Profile, ...]) -> Profile:
    """Return the profile of that name; raises StudyError with the near miss."""
    for profile in known:
        if profile.name == name:
            return profile
    raise StudyError(
        "unknown rule profile", value=name, place="review.rules", remedy=near_miss(name, [p.name for p in known])
    )
