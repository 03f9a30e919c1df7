"""The scoreboard: what stands beside every score, for all models of a desk on the days they share."""

import numpy as np
import numpy.typing as npt
import pandas as pd

from backtest.judging.answers import ends
from backtest.judging.ranking import shared_days
from backtest.judging.samples import Days, Desk, Sample, read_book
from backtest.judging.scores import fz0, half_homogeneous, tick
from backtest.records import SCOREBOARD_COLUMNS

_NUMBERS = ("level", "average_var", "average_change", "peak_to_trough", "tick", "fz0", "half_homogeneous")
_COUNTS = ("days", "exceptions", "longest_run")


def scoreboard(
    pnl: pd.DataFrame, forecasts: pd.DataFrame, *, calendar: Days | None = None, as_of: np.datetime64 | None = None
) -> pd.DataFrame:
    """Return one row a desk x model x level x P&L kind, with the columns SCOREBOARD_COLUMNS.

    Tables as samples.read_book takes them. All models of a desk are measured on the days on which each of them has VaR
    and the P&L is known. ``average_var`` and ``average_change`` (mean absolute change of VaR from one shared day to the
    next) are in money; ``peak_to_trough`` is the largest VaR over the smallest; ``longest_run`` the largest number of
    exceptions on consecutive shared days. Scores are means, lower is better: ``tick`` in money, ``half_homogeneous`` in
    its root; only differences of ``fz0`` mean something, since the unit of the P&L shifts its level. What cannot be had
    is empty, with the reason in ``note``.
    """
    book = read_book(pnl, forecasts, calendar=calendar, as_of=as_of)
    rows = [row for desk in book.desks for row in _desk_rows(desk)]
    table = pd.DataFrame(rows, columns=list(SCOREBOARD_COLUMNS))
    return table.astype(dict.fromkeys(_COUNTS, "Int64") | dict.fromkeys(_NUMBERS, "float64"))


def _desk_rows(desk: Desk) -> list[dict[str, object]]:
    rows = {}
    for kind in desk.losses:
        for level in sorted({level for _, level in desk.forecasts}):
            all_models = [desk.sample(m, kind, level, "all") for m in desk.models if (m, level) in desk.forecasts]
            present = [s for s in all_models if s.days]
            shared = {s.model: s for s in shared_days(*present)} if present else {}
            for sample in all_models:
                rows[sample.model, level, kind] = _row(shared.get(sample.model, sample))
    return [rows[key] for key in sorted(rows, key=lambda key: (key[0], key[1], list(desk.losses).index(key[2])))]


def _row(sample: Sample) -> dict[str, object]:
    address: dict[str, object] = {
        "desk": sample.desk, "model": sample.model, "level": sample.level, "pnl_kind": sample.kind, "days": sample.days,
    }  # fmt: skip
    if not sample.days:
        return {**address, "note": "no day with VaR of every model and P&L"}
    first, last = ends(sample.dates)
    swing, why = peak_to_trough(sample.var)
    scores, unscored = _scores(sample)
    return {
        **address, "from": first, "to": last, "exceptions": sample.exceptions, "average_var": float(sample.var.mean()),
        "average_change": restlessness(sample.var), "peak_to_trough": swing,
        "longest_run": longest_run(sample.hits), **scores, "note": "; ".join(n for n in (why, unscored) if n),
    }  # fmt: skip


def _scores(sample: Sample) -> tuple[dict[str, float], str]:
    arrays = (sample.losses, sample.var, sample.es)
    scores = {"tick": float(tick(sample.losses, sample.var, sample.level).mean())}
    unknown = int(np.count_nonzero(np.isnan(sample.es)))
    if unknown:
        return scores, f"no ES on {unknown} of {sample.days} days: no joint score"
    wrong = int(np.count_nonzero(~((sample.es > 0.0) & (sample.es >= sample.var))))
    if wrong:
        return scores, f"ES not positive or below VaR on {wrong} of {sample.days} days: no joint score"
    joint = {"fz0": fz0, "half_homogeneous": half_homogeneous}
    return scores | {name: float(score(*arrays, sample.level).mean()) for name, score in joint.items()}, ""


def restlessness(var: npt.NDArray[np.float64]) -> float | None:
    """Return the mean absolute change of VaR float64[T] from one day to the next; None for a single day."""
    return float(np.abs(np.diff(var)).mean()) if len(var) > 1 else None


def peak_to_trough(var: npt.NDArray[np.float64]) -> tuple[float | None, str]:
    """Return the largest VaR over the smallest, or None with the reason where a VaR is not positive."""
    low = int(np.count_nonzero(var <= 0.0))
    if low:
        return None, f"VaR not positive on {low} of {len(var)} days: no peak-to-trough ratio"
    return float(var.max() / var.min()), ""


def longest_run(hits: npt.NDArray[np.bool_]) -> int:
    """Return the largest number of consecutive exceptions in hits bool[T]; 0 where there is none."""
    edges = np.diff(np.concatenate([[0], hits.astype(np.int8), [0]]))
    lengths = np.flatnonzero(edges < 0) - np.flatnonzero(edges > 0)
    return int(lengths.max(initial=0))
