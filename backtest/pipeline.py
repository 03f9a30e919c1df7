"""The only module that knows every room; the public verbs."""

import dataclasses
import datetime as dt
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import joblib
import numpy as np
import pandas as pd

from backtest.errors import StudyError
from backtest.explaining.steps import DeskSteps, Method, desk_steps, resolve_windows
from backtest.forecasting.asked import ask
from backtest.forecasting.engine import DeskHistory, joined
from backtest.forecasting.histories import check_past, desk_histories, learnt_from, reported_scales, unscaled_days
from backtest.forecasting.models import Model, resolve, resolve_all
from backtest.judging import battery
from backtest.judging.bridge import bridge_table
from backtest.judging.exceptions import exceptions_table
from backtest.judging.power import upper_power
from backtest.judging.sufficiency import multiple_results
from backtest.judging.zones import resolve_rules
from backtest.reading.draft import draft_study
from backtest.reading.inputs import read_inputs
from backtest.reading.remarks import in_order
from backtest.recording.manifest import make_manifest
from backtest.recording.run_folder import check_place, read_record, replace_folder, write_document, write_record
from backtest.records import (
    DATE_DTYPE,
    FORECAST_COLUMNS,
    PNL_KINDS,
    REMARK_COLUMNS,
    REPORTED_STATUS,
    Inputs,
    Record,
    first_known,
    latest_known,
    results_table,
)
from backtest.reporting.html import summary_html
from backtest.reporting.lines import input_lines
from backtest.reporting.sentences import six_sentences
from backtest.reporting.show import day_view
from backtest.study_form import Study
from backtest.values import whole
from backtest.verbs import Progress, each, forecast_desks, refuse_reserved, silent

SUMMARY = "summary.html"


@dataclass(frozen=True)
class Outcome:
    """What a run leaves: its folder, the six sentences, and whether more forecasts fell back than the study allows.

    ``taken`` is the folder asked for where that was there already, so that the run is in another one.
    """

    folder: Path
    sentences: tuple[str, ...]
    fallback_share: float
    too_many_fallbacks: bool
    taken: Path | None = None


@dataclass(frozen=True)
class _Resolved:
    """Everything a study names, resolved before any data are read."""

    models: tuple[Model, ...]
    methods: tuple[Method, ...]
    tests: tuple[str, ...]


def _resolve(study: Study) -> _Resolved:
    plan, review = study.forecast, study.review
    settings = {"levels": plan.levels, "window": plan.window, "recalibrate_days": plan.recalibrate_days}
    pairs = [m.model_dump(exclude_none=True) for m in plan.model]
    taken = [review.subject] if review.subject else []
    models = resolve_all([*plan.models, *pairs], taken=taken, every_start=plan.every_start, **settings)
    refuse_reserved(models, review.subject)
    check_past(models, plan.learn_from)
    resolve_rules(review.rules)
    resolve_windows(plan.levels)
    methods = []
    for m in review.method:
        options = m.model_dump(exclude_none=True, exclude={"since"})
        methods.append(Method(m.since, resolve({"name": f"method from {m.since}", **options}, levels=plan.levels)))
    return _Resolved(models, tuple(methods), battery.resolve(study.judge.tests))


def _inputs(study: Study, resolved: _Resolved) -> tuple[Inputs, list[DeskHistory]]:
    """Read the data and what each desk hands to the engine.

    Refuses a challenger that bears the name of a reported model other than the subject; remarks on days whose reported
    VaR cannot be a scale.
    """
    inputs = read_inputs(study)
    shared = sorted({m.name for m in resolved.models} & set(inputs.reported["model"]))
    if shared:
        raise StudyError(
            "a challenger and a model of the reported file have the same name", value=shared[0], place=str(study.path),
            rule="a name stands for one model", remedy="Give the challenger another name in [[forecast.model]].",
        )  # fmt: skip
    scales = reported_scales(resolved.models, inputs.reported, study.review.subject)
    histories = desk_histories(
        inputs.pnl, inputs.calendar, inputs.as_of, study.forecast.learn_from, inputs.desks, inputs.vectors, scales
    )
    remarks = in_order([*inputs.remarks, *unscaled_days(histories, resolved.models)])
    return dataclasses.replace(inputs, remarks=remarks), histories


def check(study: Study) -> list[str]:
    """Resolve every name of a study and read all its data; return lines on what was read and every remark.

    Raises what a run would raise; computes nothing.
    """
    resolved = _resolve(study)
    inputs, _ = _inputs(study, resolved)
    return input_lines(inputs)


def draft(files: Sequence[str | Path]) -> str:
    """Return the text of a study for an unknown extract, each detection a comment to confirm."""
    return draft_study([Path(file) for file in files])


def run(
    study: Study,
    out: str | Path | None = None,
    *,
    workers: int | None = None,
    progress: Progress | None = None,
    replace: bool = False,
) -> Outcome:
    """Read, forecast, judge, record and report a study.

    ``out`` is the run folder (default ``<study>-run`` beside the study); one that exists is never overwritten, the next
    free name is taken, unless ``replace`` and it is a run folder. ``workers``: threads, default the machine's cores.
    """
    started, report = dt.datetime.now(dt.UTC), progress or silent
    resolved = _resolve(study)
    wanted = check_place(study.folder / f"{study.path.stem}-run" if out is None else out)
    report("reading", 0, 1)
    inputs, histories = _inputs(study, resolved)
    cores = joblib.cpu_count() if workers is None else whole(workers, "workers", least=1)
    asked = ask(study.forecast.bands, study.forecast.horizons, seed=study.seed)
    forecasts, fits = forecast_desks(histories, resolved.models, study.forecast.levels, cores, report, asked)
    bridge = _bridge_steps(study, inputs, histories, forecasts, resolved, cores, report)
    record = _judged(study, inputs, resolved, forecasts, fits, bridge, started, report)
    folder = replace_folder(record, wanted) if replace else write_record(record, wanted)
    report("writing the summary", 0, 1)
    write_document(folder, SUMMARY, summary_html(record))
    return _outcome(record, folder, study.forecast.fallback_share, None if folder == wanted else wanted)


def render(folder: str | Path) -> Path:
    """Render the summary of a run folder again from its record; computes nothing."""
    record = read_record(Path(folder))
    return write_document(Path(folder), SUMMARY, summary_html(record))


def show(folder: str | Path, desk: str, date: str) -> list[str]:
    """Return the lines that say what was forecast for a desk's day and what happened, as recorded."""
    return day_view(read_record(Path(folder)), desk, date)


def _outcome(record: Record, folder: Path, allowed: float, taken: Path | None) -> Outcome:
    counted: Any = record.manifest["fallbacks"]
    share = counted["fallbacks"] / counted["forecasts"] if counted["forecasts"] else 0.0
    return Outcome(folder, tuple(six_sentences(record)), share, share > allowed, taken)


def _reported_rows(inputs: Inputs) -> pd.DataFrame:
    """Return the institution's forecasts in the form of our own."""
    rows = inputs.reported.rename(columns={"pit": "pit_hypothetical"})
    rows = rows.assign(horizon=1, status=REPORTED_STATUS, origin=np.datetime64("NaT", "us"))
    for column in FORECAST_COLUMNS:
        if column not in rows:
            rows[column] = np.nan
    return rows[list(FORECAST_COLUMNS)].astype({"origin": DATE_DTYPE})


def _bridge_steps(
    study: Study,
    inputs: Inputs,
    histories: Sequence[DeskHistory],
    forecasts: pd.DataFrame,
    resolved: _Resolved,
    workers: int,
    report: Progress,
) -> list[DeskSteps]:
    subject = study.review.subject
    reported = _reported_rows(inputs)

    def steps(history: DeskHistory) -> DeskSteps:
        rows = reported[(reported["desk"] == history.desk) & (reported["model"] == subject)]
        made = forecasts[(forecasts["desk"] == history.desk) & (forecasts["horizon"] == 1)]
        return desk_steps(
            history, rows, made, subject=subject, methods=resolved.methods, ready=resolved.models,
            levels=study.forecast.levels,
        )  # fmt: skip

    return each(steps, histories, workers, report, "bridge by desk")


def _judged(
    study: Study,
    inputs: Inputs,
    resolved: _Resolved,
    forecasts: pd.DataFrame,
    fits: pd.DataFrame,
    bridge: Sequence[DeskSteps],
    started: dt.datetime,
    report: Progress,
) -> Record:
    review, as_of = study.review, inputs.as_of
    pnl = latest_known(inputs.pnl, as_of)
    judged = joined([_reported_rows(inputs), forecasts], FORECAST_COLUMNS)
    report("judging", 0, 1)
    options: dict[str, Any] = {"spans": review.days, "seed": study.seed, "calendar": inputs.calendar, "as_of": as_of}
    results = battery.judge_table(
        pnl, judged, tests=resolved.tests, significance=study.judge.significance,
        simulations=study.judge.simulations, subject=review.subject, firm=review.firm, rules=review.rules,
        first_known=first_known(inputs.pnl, as_of), **options,
    )  # fmt: skip
    results += multiple_results(pnl, judged, **options)
    table = bridge_table(pnl, {b.desk: b.steps for b in bridge}, levels=study.forecast.levels, as_of=as_of)
    everything = joined([judged, *(b.extra for b in bridge)], FORECAST_COLUMNS)
    return Record(
        manifest=_manifest(study, inputs, resolved, everything[everything["horizon"] == 1], started),
        pnl=_kept_pnl(inputs),
        forecasts=everything,
        fits=fits,
        results=results_table(results),
        exceptions=exceptions_table(pnl, judged, review.subject, as_of=as_of),
        bridge=table,
        paths=pd.DataFrame(columns=["desk", "model", "figure", "series", "x", "y", "low", "high"]),
        remarks=pd.DataFrame([[getattr(r, c) for c in REMARK_COLUMNS] for r in inputs.remarks], columns=REMARK_COLUMNS),
    )


def _kept_pnl(inputs: Inputs) -> pd.DataFrame:
    """Return the P&L as known at the cut-off, with the first-known values beside it where they differ."""
    pnl, first = latest_known(inputs.pnl, inputs.as_of), first_known(inputs.pnl, inputs.as_of)
    both = pnl.merge(first, on=["date", "desk"], how="left", suffixes=("", "_first"))
    for kind in PNL_KINDS:
        if kind in pnl:
            pnl[f"first_known_{kind}"] = both[f"{kind}_first"].where(both["known_on"] != both["known_on_first"])
    return pnl


def _manifest(
    study: Study, inputs: Inputs, resolved: _Resolved, forecasts: pd.DataFrame, started: dt.datetime
) -> dict[str, object]:
    settings = study.model_dump(mode="json", by_alias=True, exclude_none=True)
    level, days = 0.99, min((d for d in study.review.days if isinstance(d, int)), default=250)
    pnl = latest_known(inputs.pnl, inputs.as_of)
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
    return make_manifest(
        study=settings, sources=inputs.sources, seeds={"study": study.seed}, forecasts=forecasts, started=started,
        finished=dt.datetime.now(dt.UTC),
        extra={"as_of": str(inputs.as_of), "models": models, "desks": desks, "power": power},
    )  # fmt: skip
