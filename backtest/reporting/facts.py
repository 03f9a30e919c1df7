"""What the six sentences say, as facts, before any of it becomes text."""

from dataclasses import dataclass

from backtest.reporting.book import Span

ZONES = ("green", "amber", "yellow", "red")
"""Words of dated rules for their zones."""


@dataclass(frozen=True)
class Scope:
    """What the first page is about: a desk, a model, a span, the level of counts and the level of sizes."""

    desk: str
    is_firm: bool
    desks: int
    model: str
    is_subject: bool
    span: Span
    wanted_days: int | None
    count_level: float
    size_level: float
    kind: str
    currency: str
    significance: float


@dataclass(frozen=True)
class Count:
    """Exceptions counted on one P&L kind, with the exact binomial p-value where there is one."""

    name: str
    exceptions: int
    days: int
    p: float | None
    rejected: bool


@dataclass(frozen=True)
class Rejection:
    """A test that rejects over the main span, at a level and on a P&L kind, with its answer in words."""

    test: str
    level: float
    kind: str
    p: float
    phrase: str


@dataclass(frozen=True)
class RuleCount:
    """What a dated rule says: its count, zone and multiplier; ``note`` why there is no zone or no multiplier."""

    name: str
    count: int | None
    zone: str
    multiplier: float | None
    note: str


@dataclass(frozen=True)
class Often:
    """How often: counts of the model by P&L kind; of the challengers where there is no reported model."""

    scope: Scope
    counts: tuple[Count, ...]
    rule: RuleCount | None
    more: tuple[Rejection, ...] = ()


@dataclass(frozen=True)
class When:
    """When: how close together most exceptions fall, what the independence test says, what else rejects.

    ``even`` is how many days evenly spaced exceptions would take for as many as fell within ``width``.
    """

    scope: Scope
    exceptions: int
    days: int
    inside: int
    width: int
    even: float
    first: str
    last: str
    p: float | None
    rejected: bool
    note: str
    more: tuple[Rejection, ...] = ()


@dataclass(frozen=True)
class Sufficient:
    """The multiple of a measure that would have sufficed on ``days`` days, and the measure's average in money."""

    measure: str
    estimate: float | None
    low: float | None
    high: float | None
    average: float | None
    days: int
    note: str


@dataclass(frozen=True)
class Size:
    """By how much: the sufficient multiples of VaR and, where known, of ES; what rejects on the depth of losses."""

    scope: Scope
    var: Sufficient
    es: Sufficient | None
    more: tuple[Rejection, ...] = ()


@dataclass(frozen=True)
class Step:
    """One step of the bridge; amounts in money, ``score_change`` against the step before (below 0: better)."""

    name: str
    model: str
    window: int | None
    exceptions: int | None
    average_var: float | None
    average_change: float | None
    score_name: str
    score_change: float | None
    low: float | None
    high: float | None
    note: str


@dataclass(frozen=True)
class Bridge:
    """The bridge of one desk at one level: every step over the same shared days; without steps ``note`` says why."""

    desk: str
    level: float | None
    kind: str
    first: str
    last: str
    days: int
    currency: str
    steps: tuple[Step, ...]
    note: str


@dataclass(frozen=True)
class Gain:
    """How much the mean score falls (above 0: better), and its share in percent of what filter and tail gain."""

    gain: float
    low: float | None
    high: float | None
    share: float | None
    share_low: float | None
    share_high: float | None
    decision: str


@dataclass(frozen=True)
class Parts:
    """What the filter, the tail and both gain over neither, at one level over shared days; ``decided``: with a p."""

    level: float
    days: int
    score_name: str
    currency: str
    filter: Gain
    tail: Gain
    both: Gain
    decided: bool


@dataclass(frozen=True)
class Power:
    """The power of the one-sided exact binomial test at the length of this review."""

    level: float
    nominal_rate: float
    true_rate: float
    days: int
    power: float


@dataclass(frozen=True)
class Hardly:
    """Results without evidence whose test could hardly have seen it: how many; each test's lowest and highest power."""

    model: str
    results: int
    tests: tuple[tuple[str, float, float], ...]


@dataclass(frozen=True)
class DeskCounts:
    """Desks whose count is rejected at ``level``, of ``desks`` with a p-value; how many chance gives at most.

    ``holm`` and ``step_up``: desks whose rejection survives being picked out of all, strictly and less so.
    """

    level: float
    rejected: tuple[str, ...]
    too_high: tuple[str, ...]
    desks: int
    by_chance: float
    holm: tuple[str, ...] = ()
    step_up: tuple[str, ...] = ()


@dataclass(frozen=True)
class Person:
    """What needs a person; ``flagged`` are statuses of forecasts kept as made, with how many, most first."""

    scope: Scope
    forecasts: int
    fallbacks: int
    remarks: int
    exceptions: int
    since: str
    unforecast: tuple[str, ...]
    short: tuple[tuple[str, int], ...]
    flagged: tuple[tuple[str, int], ...] = ()
    counts: DeskCounts | None = None
