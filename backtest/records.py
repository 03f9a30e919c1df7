"""The few frozen records that pass between rooms, and the conventions behind every number, stated once.

Signs: P&L tables carry profit as positive; losses, VaR and ES are positive loss amounts in the unit of the P&L.
Level: the confidence, 0.99; the exception probability is 1 - level.
Exception: loss strictly greater than VaR. Dates: ``date`` is the target, the day whose P&L is forecast; ``origin``
is the last day whose P&L was used (of vectors: whose market move). Date columns are ``datetime64[us]`` without zone.
"""

from collections.abc import Mapping
from dataclasses import dataclass, field, fields

import numpy as np
import pandas as pd

DATE_DTYPE = "datetime64[us]"
PNL_KINDS = ("hypothetical", "actual")
"""The P&L kinds that VaR is judged against; risk-theoretical P&L serves attribution only."""
VECTORS = "vectors"
"""What models learn from where it is no P&L kind: each day's positions under past market moves."""

FORECAST_COLUMNS = (
    "date", "origin", "desk", "model", "level", "horizon", "var", "es", "var_low", "var_high", "es_low",
    "es_high", "mean", "sigma", "shape", "scale", "threshold", "pit_hypothetical", "pit_actual", "status",
)  # fmt: skip
FIT_COLUMNS = (
    "date", "desk", "filter", "window", "recalibrated_on", "intercept", "ar", "omega", "alpha", "gamma", "beta",
    "nu", "lambda", "other_parameters", "loglik", "second_mode_sigma", "status",
)  # fmt: skip
BRIDGE_COLUMNS = (
    "desk", "level", "pnl_kind", "step", "model", "window", "from", "to", "days", "exceptions", "average_var",
    "average_change", "score_name", "score", "score_change", "low", "high", "note",
)  # fmt: skip
CRITERIA_COLUMNS = (
    "desk", "criterion", "limit", "level", "pnl_kind", "from", "to", "days", "value", "low", "high", "answer", "note",
)  # fmt: skip
FOUR_CELLS_COLUMNS = (
    "desk", "level", "pnl_kind", "part", "name", "filter", "tail", "from", "to", "days", "exceptions", "average_var",
    "interval_days", "interval_width", "interval_percent", "interval_ratio", "score_name", "score", "gain", "low",
    "high", "statistic", "p_value", "share", "share_low", "share_high", "decision", "note",
)  # fmt: skip
SCOREBOARD_COLUMNS = (
    "desk", "model", "level", "pnl_kind", "from", "to", "days", "exceptions", "average_var", "average_change",
    "peak_to_trough", "longest_run", "tick", "fz0", "half_homogeneous", "note",
)  # fmt: skip
ESTIMATION_RISK_COLUMNS = (
    "desk", "model", "level", "pnl_kind", "from", "to", "days", "test", "statistic", "p_value", "usual_law",
    "p_refitted", "law", "replications", "count_mean", "count_sd", "binomial_mean", "binomial_sd", "seconds", "note",
)  # fmt: skip
REMARK_COLUMNS = ("rule", "source", "desk", "first", "last", "count", "text")

REPORTED_STATUS = "as reported"
"""Status of rows that the institution forecast; every other row of a forecasts table is ours."""
FOR_THE_BRIDGE, AGAIN = " (bridge)", " re-performed"
"""How the names end of models that a run makes itself, to explain the reported one."""
FALLBACK = "fallback"
"""A status part that begins with this word marks a forecast made by a stated fallback."""


@dataclass(frozen=True, slots=True)
class Source:
    """An input file as it was read: its role in the study, its name, the SHA-256 of its bytes, its data rows."""

    role: str
    name: str
    sha256: str
    rows: int


@dataclass(frozen=True, slots=True)
class Remark:
    """One observation on the data that never blocks: a rule's key, where it was seen, how often, in words.

    ``first`` and ``last`` are ISO dates or empty; ``desk`` is empty where the remark is about a whole file.
    """

    rule: str
    source: str
    desk: str
    first: str
    last: str
    count: int
    text: str


@dataclass(frozen=True)
class DeskVectors:
    """The P&L vectors of one desk: for each target day its positions, as known the evening before, under past moves.

    days: datetime64[D] (n), target days, ascending, each once; begins, ends (n): the vector of day i lies at
    ``begins[i]:ends[i]`` of scenarios (datetime64[D]: the past day whose market move it is, ascending) and pnl (profit
    positive).
    """

    days: np.ndarray
    begins: np.ndarray
    ends: np.ndarray
    scenarios: np.ndarray
    pnl: np.ndarray

    @property
    def counts(self) -> np.ndarray:
        """How many scenarios the vector of each day has (n)."""
        return np.asarray(self.ends - self.begins)

    def kept(self, rows: np.ndarray, days: np.ndarray | None = None) -> "DeskVectors":
        """Return the vectors of some days (bool[n]), under the new ``days`` (as many as are kept) where given."""
        of = self.days[rows] if days is None else days
        return DeskVectors(of, self.begins[rows], self.ends[rows], self.scenarios, self.pnl)


NO_VECTORS = DeskVectors(
    np.empty(0, "datetime64[D]"), np.empty(0, np.int64), np.empty(0, np.int64), np.empty(0, "datetime64[D]"),
    np.empty(0, np.float64),
)  # fmt: skip
"""The vectors of a desk that has none."""


@dataclass(frozen=True)
class Inputs:
    """What reading hands over: checked tables, in the conventions above.

    pnl: ``date, desk, hypothetical`` and, where supplied, ``actual, risk_theoretical, risk_theoretical_aligned,
    currency, flag``; always ``known_on`` (the day a value became known; its own date unless restated). Sorted by
    desk, date, known_on; a date x desk has several rows only where restated. NaN means "no P&L that day".
    reported: ``date, desk, model, level, var, es, sigma, pit`` (NaN where not supplied), sorted by desk, model, level,
    date; ``date`` is the target day. desks: ``desk, parent, valid_from, valid_to, scope, currency, kind``. changes:
    ``date, desk, kind, note``. calendar: datetime64[D], the business days from the first P&L to ``as_of``. vectors: by
    desk, of business days up to ``as_of``, every scenario before its day; empty where none are supplied.
    """

    pnl: pd.DataFrame
    reported: pd.DataFrame
    desks: pd.DataFrame
    changes: pd.DataFrame
    calendar: np.ndarray
    as_of: np.datetime64
    remarks: tuple[Remark, ...]
    sources: tuple[Source, ...]
    vectors: Mapping[str, DeskVectors] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class Result:
    """One answer of one test, for one desk, model, P&L kind, level and span.

    ``estimate, low, high`` are the effect size with its 95% interval and ``direction`` what it says in words; what
    does not apply is None, with the reason in ``note``. ``law`` names how the p-value was found: exact, permutation,
    simulated, asymptotic; None where there is no p-value. ``phrase`` is the answer in words. ``first`` and ``last``
    (columns "from" and "to") are ISO dates.
    """

    desk: str
    model: str
    against: str
    pnl_kind: str
    level: float
    first: str
    last: str
    days: int
    exceptions: int | None
    question: str
    test: str
    statistic: float | None
    p_value: float | None
    law: str | None
    estimate: float | None
    low: float | None
    high: float | None
    direction: str
    could_see: float | None
    decision: str
    decision_across_desks: str
    phrase: str
    note: str
    source: str


RESULT_COLUMNS = tuple({"first": "from", "last": "to"}.get(f.name, f.name) for f in fields(Result))


@dataclass(frozen=True)
class Record:
    """Everything a run keeps, and all that reporting reads. Tables as in the run folder, see CONTRACT in README.

    ``manifest`` is a JSON-ready mapping; ``pnl`` the P&L as known at the cut-off (and ``first_known`` values);
    ``paths`` figure data in long form: ``desk, model, figure, series, x, y, low, high``.
    """

    manifest: dict[str, object]
    pnl: pd.DataFrame
    forecasts: pd.DataFrame
    fits: pd.DataFrame
    results: pd.DataFrame
    criteria: pd.DataFrame
    exceptions: pd.DataFrame
    bridge: pd.DataFrame
    four_cells: pd.DataFrame
    scoreboard: pd.DataFrame
    estimation_risk: pd.DataFrame
    paths: pd.DataFrame
    remarks: pd.DataFrame


def latest_known(pnl: pd.DataFrame, as_of: np.datetime64) -> pd.DataFrame:
    """Return one row per date x desk, the value known last at ``as_of``; rows not known by then are left out."""
    known = pnl[(pnl["known_on"] <= as_of) & (pnl["date"] <= as_of)]
    return known.drop_duplicates(["desk", "date"], keep="last").reset_index(drop=True)


def first_known(pnl: pd.DataFrame, as_of: np.datetime64) -> pd.DataFrame:
    """Return one row per date x desk: the value as it was first known, for days up to ``as_of``."""
    known = pnl[pnl["date"] <= as_of]
    return known.drop_duplicates(["desk", "date"], keep="first").reset_index(drop=True)


def results_table(results: list[Result]) -> pd.DataFrame:
    """Return results as a table with the columns of ``results.csv``, one row a result, in the order given."""
    rows = [tuple(getattr(r, f.name) for f in fields(Result)) for r in results]
    return pd.DataFrame(rows, columns=list(RESULT_COLUMNS))
