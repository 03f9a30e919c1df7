"""From forecasts to a record: everything judged, by terms fixed before, and the manifest of the run."""

import datetime as dt
from collections.abc import Mapping, Sequence
from dataclasses import asdict, dataclass
from typing import Any

import numpy as np
import pandas as pd

from backtest.explaining.estimation_risk import estimation_risk
from backtest.explaining.steps import DeskSteps, Method
from backtest.forecasting.engine import DeskHistory, joined
from backtest.forecasting.histories import learnt_from
from backtest.forecasting.models import Model
from backtest.judging.answers import Settings
from backtest.judging.battery import Battery, judge_table
from backtest.judging.bridge import bridge_table
from backtest.judging.criteria import Criteria, criteria_table
from backtest.judging.exceptions import exceptions_table
from backtest.judging.four_cells import four_cells
from backtest.judging.power import upper_power
from backtest.judging.samples import Desk, read_book
from backtest.judging.scoreboard import scoreboard
from backtest.judging.sufficiency import multiple_results
from backtest.recording.manifest import make_manifest
from backtest.recording.terms import changed_terms, hashed_terms
from backtest.records import (
    DATE_DTYPE,
    ESTIMATION_RISK_COLUMNS,
    FORECAST_COLUMNS,
    PNL_KINDS,
    REMARK_COLUMNS,
    REPORTED_STATUS,
    Inputs,
    Record,
    Result,
    first_known,
    latest_known,
    results_table,
)
from backtest.study_form import Criteria as HouseDefaults
from backtest.study_form import Study
from backtest.verbs import Progress, each


@dataclass(frozen=True)
class Resolved:
    """Everything a study names, resolved before any data are read."""

    models: tuple[Model, ...]
    methods: tuple[Method, ...]
    battery: Battery
    previous: Mapping[str, Any] | None


def reported_rows(inputs: Inputs) -> pd.DataFrame:
    """Return the institution's forecasts in the form of our own."""
    rows = inputs.reported.rename(columns={"pit": "pit_hypothetical"})
    rows = rows.assign(horizon=1, status=REPORTED_STATUS, origin=np.datetime64("NaT", "us"))
    for column in FORECAST_COLUMNS:
        if column not in rows:
            rows[column] = np.nan
    return rows[list(FORECAST_COLUMNS)].astype({"origin": DATE_DTYPE})


def judged(
    study: Study,
    inputs: Inputs,
    resolved: Resolved,
    forecasts: pd.DataFrame,
    fits: pd.DataFrame,
    bridge: Sequence[DeskSteps],
    risk: pd.DataFrame,
    started: dt.datetime,
    report: Progress,
) -> Record:
    """Return the record of a run: its forecasts judged by terms that are fixed, and hashed, before judging."""
    terms = _terms(study, inputs, resolved)
    report("judging", 0, 1)
    pnl, first = latest_known(inputs.pnl, inputs.as_of), first_known(inputs.pnl, inputs.as_of)
    rows = joined([reported_rows(inputs), forecasts], FORECAST_COLUMNS)
    results = _results(study, inputs, resolved, pnl, first, rows)
    everything = joined([rows, *(b.extra for b in bridge)], FORECAST_COLUMNS)
    manifest = _manifest(study, inputs, resolved, pnl, everything[everything["horizon"] == 1], started, terms)
    levels, subject = study.forecast.levels, study.review.subject
    window, significance = study.forecast.window, study.judge.significance
    return Record(
        manifest=manifest,
        pnl=_kept_pnl(pnl, first),
        forecasts=everything,
        fits=fits,
        results=results_table(results),
        criteria=criteria_table(results, _criteria(study), subject=subject, place=_main_place(study)),
        exceptions=exceptions_table(pnl, rows, subject, as_of=inputs.as_of),
        bridge=bridge_table(pnl, {b.desk: b.steps for b in bridge}, levels=levels, as_of=inputs.as_of),
        four_cells=four_cells(pnl, rows, levels=levels, window=window, significance=significance, as_of=inputs.as_of),
        scoreboard=scoreboard(pnl, rows, calendar=inputs.calendar, as_of=inputs.as_of),
        estimation_risk=risk,
        paths=pd.DataFrame(columns=["desk", "model", "figure", "series", "x", "y", "low", "high"]),
        remarks=pd.DataFrame([[getattr(r, c) for c in REMARK_COLUMNS] for r in inputs.remarks], columns=REMARK_COLUMNS),
    )


def refitted(
    study: Study,
    inputs: Inputs,
    resolved: Resolved,
    histories: Sequence[DeskHistory],
    forecasts: pd.DataFrame,
    workers: int,
    report: Progress,
) -> pd.DataFrame:
    """Return the laws of tests under re-estimation, where the study asks for them; replicates are kept beside it."""
    if not study.judge.estimation_risk:
        return pd.DataFrame(columns=list(ESTIMATION_RISK_COLUMNS))
    judge, pnl = study.judge, latest_known(inputs.pnl, inputs.as_of)
    rows = joined([reported_rows(inputs), forecasts], FORECAST_COLUMNS)
    settings = Settings(judge.significance, judge.simulations, study.seed, judge.lagged_hits)
    known = {history.desk: history for history in histories}
    book = read_book(pnl, rows, calendar=inputs.calendar, as_of=inputs.as_of)
    folder = study.folder / f"{study.path.stem}-replicates"

    def say(text: str) -> None:
        report(text, 0, 1)

    def of_desk(desk: Desk) -> pd.DataFrame:
        samples = list(desk.samples(study.review.days))
        return estimation_risk(known[desk.name], samples, resolved.models, settings, folder=folder, say=say)

    desks = [desk for desk in book.desks if desk.name in known]
    return joined(each(of_desk, desks, workers, report, "estimation risk by desk"), ESTIMATION_RISK_COLUMNS)


def _results(
    study: Study, inputs: Inputs, resolved: Resolved, pnl: pd.DataFrame, first: pd.DataFrame, rows: pd.DataFrame
) -> list[Result]:
    review, judge = study.review, study.judge
    options: dict[str, Any] = {
        "spans": review.days, "seed": study.seed, "calendar": inputs.calendar, "as_of": inputs.as_of,
    }  # fmt: skip
    results = judge_table(
        pnl, rows, tests=resolved.battery, significance=judge.significance, simulations=judge.simulations,
        lagged_hits=judge.lagged_hits, subject=review.subject, firm=review.firm, rules=review.rules,
        first_known=first, **options,
    )  # fmt: skip
    return results + multiple_results(pnl, rows, **options)


def _criteria(study: Study) -> Criteria:
    return Criteria(**(study.review.criteria or HouseDefaults()).model_dump())


def _main_place(study: Study) -> int:
    """Return the place of the span the criteria are about: the shortest number of days asked for, else the first."""
    shortest = _shortest(study)
    return 0 if shortest is None else study.review.days.index(shortest)


def _shortest(study: Study) -> int | None:
    """Return the shortest number of days asked for; None where only all days are judged."""
    return min((d for d in study.review.days if isinstance(d, int)), default=None)


def _terms(study: Study, inputs: Inputs, resolved: Resolved) -> dict[str, object]:
    """Return the terms of this review with their hash, and how they differ from those of the previous one."""
    review, judge = study.review, study.judge
    values = {
        "subject": review.subject, "days": review.days, "rules": review.rules, "as_of": str(inputs.as_of),
        "tests": resolved.battery.keys, "significance": judge.significance, "simulations": judge.simulations,
        "lagged_hits": judge.lagged_hits, "criteria": asdict(_criteria(study)),
    }  # fmt: skip
    kept = hashed_terms(values)
    if resolved.previous is not None:
        before: Any = resolved.previous.get("terms", {})
        kept["previous_run"] = resolved.previous.get("run")
        kept["changed"] = changed_terms(values, before.get("values", {}))
    return kept


def _kept_pnl(pnl: pd.DataFrame, first: pd.DataFrame) -> pd.DataFrame:
    """Return the P&L as known at the cut-off, with the first-known values beside it where they differ."""
    both, pnl = pnl.merge(first, on=["date", "desk"], how="left", suffixes=("", "_first")), pnl.copy()
    for kind in PNL_KINDS:
        if kind in pnl:
            pnl[f"first_known_{kind}"] = both[f"{kind}_first"].where(both["known_on"] != both["known_on_first"])
    return pnl


def _manifest(
    study: Study, inputs: Inputs, resolved: Resolved, pnl: pd.DataFrame, forecasts: pd.DataFrame,
    started: dt.datetime, terms: dict[str, object],
) -> dict[str, object]:  # fmt: skip
    settings = study.model_dump(mode="json", by_alias=True, exclude_none=True)
    level, days = 0.99, _shortest(study) or 250
    desks = {
        str(desk): {
            "first": f"{rows['date'].min():%Y-%m-%d}",
            "last": f"{rows['date'].max():%Y-%m-%d}",
            "days": len(rows),
            **learnt_from(study.forecast.learn_from, inputs.vectors, str(desk)),
        }
        for desk, rows in pnl.groupby("desk")
    }
    models = [
        {
            "name": m.name,
            "filter": m.filter.label,
            "tail": m.tail.kind,
            "window": m.window,
            "line": m.line,
            "source": m.source,
        }
        for m in resolved.models
    ]
    power = {
        "level": level, "days": days, "nominal_rate": round(1 - level, 12), "true_rate": round(2 * (1 - level), 12),
        "power": upper_power(days, level),
    }  # fmt: skip
    criteria = asdict(_criteria(study)) | {"house_defaults": study.review.criteria is None}
    return make_manifest(
        study=settings, sources=inputs.sources, seeds={"study": study.seed}, forecasts=forecasts, started=started,
        finished=dt.datetime.now(dt.UTC),
        extra={
            "as_of": str(inputs.as_of), "models": models, "desks": desks, "power": power, "terms": terms,
            "criteria": criteria,
        },
    )  # fmt: skip
