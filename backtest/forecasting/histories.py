"""From the P&L of many desks, and their vectors where models learn from those, to what each hands to the engine."""

from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np
import pandas as pd

from backtest.errors import StudyError
from backtest.forecasting.engine import DeskHistory
from backtest.forecasting.models import ESTIMATED, REPORTED, Model
from backtest.forecasting.windows import NO_REPORT, ReportedVar
from backtest.records import NO_VECTORS, PNL_KINDS, VECTORS, DeskVectors, Remark, latest_known


def desk_histories(
    pnl: pd.DataFrame,
    calendar: np.ndarray,
    as_of: np.datetime64,
    learn_from: str,
    desks: pd.DataFrame | None = None,
    vectors: Mapping[str, DeskVectors] | None = None,
    scales: Mapping[str, ReportedVar] | None = None,
) -> list[DeskHistory]:
    """Return each desk's history, in order of names.

    ``pnl``: as records.Inputs.pnl; ``learn_from``: the column that models learn from, or "vectors": then a desk that
    ``vectors`` does not have has no past and no forecast; ``scales``: by desk, see ``reported_scales``. A desk's
    business days run from its first P&L to its ``valid_to`` in ``desks``, else to ``as_of``: a day without P&L keeps
    its forecast.
    """
    latest = latest_known(pnl, as_of)
    own = learn_from == VECTORS
    known = pnl[pnl["known_on"] <= as_of].assign(loss=lambda t: -t[PNL_KINDS[0] if own else learn_from])
    ends = {} if desks is None else dict(zip(desks["desk"], desks["valid_to"], strict=True))
    histories = []
    for desk, rows in known.groupby("desk", sort=True):
        mine = latest[latest["desk"] == desk]
        index = mine["date"].to_numpy().astype("datetime64[D]")
        realised = {k: pd.Series(-mine[k].to_numpy(), index=index) for k in PNL_KINDS if k in mine}
        end = ends.get(desk)
        last = as_of if end is None or pd.isna(end) else min(as_of, np.datetime64(end, "D"))
        days = calendar[(calendar >= rows["date"].min().to_datetime64()) & (calendar <= last)]
        past = (vectors or {}).get(str(desk), NO_VECTORS) if own else None
        scale = (scales or {}).get(str(desk), NO_REPORT)
        histories.append(DeskHistory(str(desk), rows[["date", "known_on", "loss"]], days, realised, past, scale))
    return histories


def reported_scales(models: Sequence[Model], reported: pd.DataFrame, subject: str | None) -> dict[str, ReportedVar]:
    """Return by desk the reported VaR that filter ``reported`` scales by; empty where no model asks for it.

    ``reported``: ``date, desk, model, level, var``, one row each; it is the VaR of ``subject``, else of the only model
    there. Raises StudyError where nothing is reported, or several models are and none is the subject.
    """
    wanted = [model.name for model in models if model.filter.kind == REPORTED]
    if not wanted:
        return {}
    found, place = sorted(reported["model"].unique()), f"model {wanted[0]!r}"
    if subject is None and len(found) != 1:
        raise StudyError(
            "filter 'reported' needs the VaR of one reported model", value=", ".join(found) or None, place=place,
            rule="the scale is the VaR of review.subject, else of the only reported model",
            remedy="Set review.subject (in Python: hand over the rows of one model)." if found
            else "Supply data.reported (in Python: reported=).",
        )  # fmt: skip
    mine = reported[reported["model"] == (subject or found[0])]
    return {str(desk): _reported_var(rows) for desk, rows in mine.groupby("desk")}


def _reported_var(rows: pd.DataFrame) -> ReportedVar:
    wide = rows.set_index(["level", "date"])["var"].unstack("date").sort_index().sort_index(axis=1)  # noqa: PD010
    days = wide.columns.to_numpy().astype("datetime64[D]")
    return ReportedVar(wide.index.to_numpy(dtype=np.float64), days, wide.to_numpy(dtype=np.float64))


def unscaled_days(histories: Sequence[DeskHistory], models: Sequence[Model]) -> list[Remark]:
    """Return remarks on the days that have ``window`` known losses but no forecast by filter ``reported``."""
    remarks = []
    for window in sorted({model.window for model in models if model.filter.kind == REPORTED}):
        for history in histories:
            losses = replace(history, vectors=None).plan(window).targets
            scaled = history.plan(window, REPORTED).targets
            left = np.setdiff1d(losses, scaled)
            late = int((left > scaled[0]).sum()) if len(scaled) else 0
            if len(left):
                text = (
                    f"days without a forecast by filter 'reported' (window {window}): {len(left)}, of them "
                    f"{len(left) - late} before {window} ratios to the reported VaR are known and {late} without a "
                    "positive reported VaR"
                )
                days = (str(left[0]), str(left[-1]))
                remarks.append(Remark("unscaled-days", "reported", history.desk, *days, len(left), text))
    return remarks


def learnt_from(learn_from: str, vectors: Mapping[str, DeskVectors], desk: str) -> dict[str, object]:
    """Return what the models of a desk learnt from, for the manifest: its name and, of vectors, how many there are.

    ``vectors``: days with a vector; ``scenarios``: the fewest and the most scenarios of one.
    """
    if learn_from != VECTORS:
        return {"learn_from": learn_from}
    counts = vectors.get(desk, NO_VECTORS).counts
    span = [int(counts.min()), int(counts.max())] if len(counts) else [0, 0]
    return {"learn_from": learn_from, "vectors": len(counts), "scenarios": span}


def check_past(models: Sequence[Model], learn_from: str) -> None:
    """Refuse models that keep parameters for days on end where the positions behind the past change every day.

    A volatility filter's parameters are in money: fitted on yesterday's positions they do not fit today's.
    """
    for model in models:
        if learn_from == VECTORS and model.filter.kind in ESTIMATED and model.recalibrate_days > 1:
            raise StudyError(
                "parameters cannot be kept from day to day where models learn from vectors",
                rule="learn_from = 'vectors' needs recalibrate_days = 1: positions change, parameters are in money",
                value=model.recalibrate_days,
                place=f"model {model.name!r}",
                remedy="Set recalibrate_days = 1.",
            )
