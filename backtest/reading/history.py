"""Is there enough history: which desks reach the window, and what is said of those that do not."""

from collections.abc import Mapping

import numpy as np
import pandas as pd

from backtest.errors import DataError
from backtest.reading.remarks import desk_remark
from backtest.records import PNL_KINDS, VECTORS, DeskVectors, Remark, latest_known
from backtest.study_form import Study

YEAR = 250
"""Days of one regulatory year (MAR32.4: 12 months, 250 days): below it no zone is given."""


def windows_needed(study: Study) -> list[int]:
    """Return the windows of the models that the study runs, shortest first."""
    named = {study.forecast.window} if study.forecast.models else set()
    return sorted(named | {model.window or study.forecast.window for model in study.forecast.model})


def refuse_nothing_to_do(
    study: Study,
    pnl: pd.DataFrame,
    reported: pd.DataFrame,
    calendar: np.ndarray,
    vectors: Mapping[str, DeskVectors] | None = None,
) -> None:
    """Refuse data in which no desk reaches the shortest window and no reported forecast can be judged."""
    kind = study.forecast.learn_from
    if kind == VECTORS:
        _refuse_short_vectors(study, vectors or {}, len(reported))
        return
    if kind not in pnl:
        remedy = f"Supply the column (data.columns.{kind}), or change forecast.learn_from."
        rule = f"forecast.learn_from = {kind!r} needs that P&L"
        raise DataError("a column is missing", rule=rule, value=kind, place=study.data.pnl, remedy=remedy)
    windows, known = windows_needed(study), known_before_last(pnl, kind, calendar)
    if len(reported) or (windows and known.max() >= windows[0]):
        return
    place = study.data.pnl
    if not windows:
        remedy = "Supply data.reported, or name models in forecast.models."
        raise DataError("there is nothing to forecast and nothing reported to judge", place=place, remedy=remedy)
    raise DataError(
        f"no desk reaches the window of {windows[0]} days and nothing reported is there to judge",
        rule="a target day needs a full window of known losses before it",
        value=f"{int(known.max())} days before the last, desk {known.idxmax()!r}",
        place=place,
        remedy="Shorten forecast.window, supply more history, or supply data.reported.",
    )


def _refuse_short_vectors(study: Study, vectors: Mapping[str, DeskVectors], reported: int) -> None:
    windows, longest = windows_needed(study), max((v.counts.max(initial=0) for v in vectors.values()), default=0)
    if not reported and not (windows and longest >= windows[0]):
        raise DataError(
            "no P&L vector reaches the shortest window and nothing reported is there to judge",
            rule="a target day needs a vector of as many scenarios as the window",
            value=f"{longest} scenarios, windows {', '.join(map(str, windows)) or 'none'}",
            place=study.data.vectors or study.data.exposures or "data.vectors",
            remedy="Shorten forecast.window, supply longer vectors, or supply data.reported.",
        )


def known_before_last(pnl: pd.DataFrame, kind: str, calendar: np.ndarray) -> pd.Series:
    """Return per desk how many known losses lie before the last business day: what its last target can learn from."""
    rows = latest_known(pnl, calendar[-1])
    known = rows[kind].notna() & (rows["date"] < calendar[-1])
    counts: pd.Series = known.groupby(rows["desk"], sort=True).sum()
    return counts


def rules_not_applied(study: Study) -> list[Remark]:
    """Remark that a rule profile is named and nothing it could be applied to: it asks for the subject and the firm."""
    review = study.review
    missing = [f"review.{key}" for key in ("subject", "firm") if getattr(review, key) is None]
    if review.rules is None or not missing:
        return []
    text = f"the rules {review.rules!r} are not applied: {' and '.join(missing)} not named (model and row of the firm)"
    return [Remark("rules-not-applied", study.path.name, "", "", "", 1, text)]


def short_histories(study: Study, pnl: pd.DataFrame, reported: pd.DataFrame, calendar: np.ndarray) -> list[Remark]:
    """Remark, per desk, on each window not reached and on less than a year of days, as "n of 250"."""
    learn_from, judged = study.forecast.learn_from, set(reported["desk"].unique())
    kind = PNL_KINDS[0] if learn_from == VECTORS else learn_from
    windows = [] if learn_from == VECTORS else windows_needed(study)  # vectors are remarked on in vector_days.py
    reach = known_before_last(pnl, kind, calendar)
    rows = latest_known(pnl, calendar[-1])
    days = rows[rows[kind].notna()].groupby("desk", sort=True)["date"].agg(["min", "max", "size"])
    remarks = []
    for desk, first, last, count in days.itertuples():
        also = "; its reported forecasts are judged from day one all the same" if desk in judged else ""
        texts = [
            ("short-history", int(reach[desk]), f"{reach[desk]} of {window} days before its last: no forecast of ours")
            for window in windows
            if reach[desk] < window
        ]
        if count < YEAR:
            texts.append(("short-year", int(count), f"{count} of {YEAR} days with P&L: no zone"))
        remarks += [
            desk_remark(rule, study.data.pnl, str(desk), first, last, n, text + also) for rule, n, text in texts
        ]
    return remarks
