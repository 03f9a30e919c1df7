"""The only module that knows every room; the public verbs."""

import dataclasses
import datetime as dt
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pandas as pd

from backtest.errors import StudyError
from backtest.explaining.steps import DeskSteps, Method, desk_steps, resolve_windows
from backtest.forecasting.asked import ask
from backtest.forecasting.engine import DeskHistory
from backtest.forecasting.histories import check_past, desk_histories, reported_scales, unscaled_days
from backtest.forecasting.models import resolve, resolve_all
from backtest.judging import battery
from backtest.judging.power_lines import power_lines
from backtest.judging.zones import resolve_rules
from backtest.reading.draft import draft_study
from backtest.reading.inputs import read_inputs
from backtest.reading.remarks import in_order
from backtest.recording.run_folder import (
    check_place,
    read_manifest,
    read_record,
    replace_folder,
    write_document,
    write_record,
)
from backtest.records import (
    Inputs,
    Record,
)
from backtest.reporting.html import summary_html
from backtest.reporting.lines import input_lines
from backtest.reporting.sentences import six_sentences
from backtest.reporting.show import day_view
from backtest.review import Resolved, judged, refitted, reported_rows
from backtest.study_form import Study
from backtest.values import whole
from backtest.verbs import Progress, cores, each, forecast_desks, refuse_reserved, silent

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


def _resolve(study: Study) -> Resolved:
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
    previous = None if review.previous is None else read_manifest(study.folder / review.previous)
    return Resolved(models, tuple(methods), battery.resolve(study.judge.tests), previous)


def _inputs(study: Study, resolved: Resolved) -> tuple[Inputs, list[DeskHistory]]:
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
    threads = cores() if workers is None else whole(workers, "workers", least=1)
    asked = ask(study.forecast.bands, study.forecast.horizons, seed=study.seed)
    forecasts, fits = forecast_desks(histories, resolved.models, study.forecast.levels, threads, report, asked)
    bridge = _bridge_steps(study, inputs, histories, forecasts, resolved, threads, report)
    risk = refitted(study, inputs, resolved, histories, forecasts, threads, report)
    record = judged(study, inputs, resolved, forecasts, fits, bridge, risk, started, report)
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


def power(days: int, level: float, test: str | None = None) -> list[str]:
    """Return the lines that say what a review of this length could see at this level, of all tests or one."""
    return power_lines(days, level, test)


def _outcome(record: Record, folder: Path, allowed: float, taken: Path | None) -> Outcome:
    counted: Any = record.manifest["fallbacks"]
    share = counted["fallbacks"] / counted["forecasts"] if counted["forecasts"] else 0.0
    return Outcome(folder, tuple(six_sentences(record)), share, share > allowed, taken)


def _bridge_steps(
    study: Study,
    inputs: Inputs,
    histories: Sequence[DeskHistory],
    forecasts: pd.DataFrame,
    resolved: Resolved,
    workers: int,
    report: Progress,
) -> list[DeskSteps]:
    subject = study.review.subject
    reported = reported_rows(inputs)

    def steps(history: DeskHistory) -> DeskSteps:
        rows = reported[(reported["desk"] == history.desk) & (reported["model"] == subject)]
        made = forecasts[(forecasts["desk"] == history.desk) & (forecasts["horizon"] == 1)]
        return desk_steps(
            history, rows, made, subject=subject, methods=resolved.methods, ready=resolved.models,
            levels=study.forecast.levels,
        )  # fmt: skip

    return each(steps, histories, workers, report, "bridge by desk")
