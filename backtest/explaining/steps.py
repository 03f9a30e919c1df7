"""The steps of the bridge for one desk: which forecasts stand between the reported VaR and the last challenger."""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from datetime import date

import numpy as np
import pandas as pd

from backtest.errors import StudyError
from backtest.forecasting.engine import DeskHistory, forecast_group, groups
from backtest.forecasting.models import REPORTED, Model, resolve
from backtest.judging.bridge import FEWEST_SHARED_DAYS, STEPS, Step
from backtest.records import AGAIN, FOR_THE_BRIDGE

WINDOWS = (1000, 750, 500)
"""Windows the bridge tries, the longest first; it takes the first that leaves enough shared days."""
_MODELS = ("historical", "filtered-historical", "conditional-evt")


@dataclass(frozen=True)
class Method:
    """How the subject works from a day on, as a model of the grammar."""

    since: date
    model: Model

    def __post_init__(self) -> None:
        """Refuse a method that would perform the reported VaR again from itself."""
        if self.model.filter.kind == REPORTED:
            raise StudyError(
                "a reported model cannot be performed again from its own VaR", value=REPORTED,
                place="review.method, filter", remedy="Write how the model works, or leave the method out.",
            )  # fmt: skip


@dataclass(frozen=True)
class DeskSteps:
    """The steps of one desk (empty where history does not allow them) and the forecasts made for them alone."""

    desk: str
    steps: tuple[Step, ...]
    extra: pd.DataFrame


def resolve_windows(levels: Sequence[float]) -> dict[int, tuple[Model, ...]]:
    """Return the challengers of the bridge at each of its windows; raises StudyError where a level is out of reach."""
    return {w: tuple(resolve(name, levels=levels, window=w) for name in _MODELS) for w in WINDOWS}


def desk_steps(
    history: DeskHistory,
    reported: pd.DataFrame,
    made: pd.DataFrame,
    *,
    subject: str | None,
    methods: Sequence[Method],
    ready: Sequence[Model],
    levels: Sequence[float],
) -> DeskSteps:
    """Build the steps of one desk.

    ``reported``: the subject's rows of this desk (empty without a subject); ``made``: this desk's forecasts by the
    models ``ready``, used again where model and window are the same; ``methods``: how the subject works, in order of
    dates, empty where the study does not say.
    """
    first, extra = [], []
    if subject is not None:
        if reported.empty:
            return DeskSteps(history.desk, (), made.iloc[:0])
        first.append(Step(STEPS[0], subject, methods[-1].model.window if methods else None, reported))
        if methods:
            again = perform_again(history, methods, levels).assign(model=f"{subject}{AGAIN}")
            first.append(Step(STEPS[1], f"{subject}{AGAIN}", methods[-1].model.window, again))
            extra.append(again)
    window = choose_window(history, [step.forecasts for step in first])
    if window is None:
        return DeskSteps(history.desk, (), made.iloc[:0])
    challengers, new = _challengers(history, window, made, ready, levels)
    return DeskSteps(history.desk, (*first, *challengers), pd.concat([made.iloc[:0], *extra, *new], ignore_index=True))


def choose_window(history: DeskHistory, before: Sequence[pd.DataFrame]) -> int | None:
    """Return the longest window of WINDOWS that leaves FEWEST_SHARED_DAYS with the steps ``before``, None if none."""
    loss = history.realised["hypothetical"].dropna()
    days = loss.index.to_numpy().astype("datetime64[D]")
    for table in before:
        known = table.loc[table["var"].notna(), "date"].to_numpy().astype("datetime64[D]")
        days = np.intersect1d(days, known)
    for window in WINDOWS:
        targets = history.plan(window).targets
        if len(np.intersect1d(days, targets)) >= FEWEST_SHARED_DAYS:
            return window
    return None


def perform_again(history: DeskHistory, methods: Sequence[Method], levels: Sequence[float]) -> pd.DataFrame:
    """Return the forecasts of the subject's own method, each day by the method in force that day."""
    parts = []
    for i, method in enumerate(methods):
        forecasts, _ = forecast_group(history, [method.model], levels)
        begin = pd.Timestamp(method.since)
        end = pd.Timestamp(methods[i + 1].since) if i + 1 < len(methods) else pd.Timestamp.max
        dates = pd.to_datetime(forecasts["date"])
        parts.append(forecasts[(dates >= begin) & (dates < end)])
    return pd.concat(parts, ignore_index=True)


def _challengers(
    history: DeskHistory, window: int, made: pd.DataFrame, ready: Sequence[Model], levels: Sequence[float]
) -> tuple[list[Step], list[pd.DataFrame]]:
    """Return the last three steps at a window; what is not among ``made`` is forecast now, under a name of its own."""
    wanted = resolve_windows(levels)[window]
    found = {name: model for name in _MODELS for model in ready if _same(model, wanted[_MODELS.index(name)])}
    missing = [m for m in wanted if m.name not in found]
    labels = {m.name: _label(m, ready) for m in missing}
    new = []
    for group in groups(missing):
        table, _ = forecast_group(history, group, levels)
        new.append(table.assign(model=table["model"].map(labels)))
    steps = []
    for model, step in zip(wanted, STEPS[2:], strict=True):
        own = found.get(model.name)
        name = own.name if own else labels[model.name]
        rows = next((t for t in [made, *new] if (t["model"] == name).any()), made)
        steps.append(Step(step, name, window, rows[rows["model"] == name]))
    return steps, new


def _label(model: Model, ready: Sequence[Model]) -> str:
    """Return the name of a challenger made for the bridge alone: never that of a model of the study."""
    label = f"{model.name} {model.window}"
    return f"{label}{FOR_THE_BRIDGE}" if label in {m.name for m in ready} else label


def _same(one: Model, other: Model) -> bool:
    return replace(one, name=other.name) == other
