"""The commands. A root error becomes one line on standard error and exit code 2; anything else is a bug.

Exit codes: 0 done, whatever the tests say; 2 input or study refused; 3 done, but more forecasts fell back than the
study allows; anything else is a bug with a traceback.
"""

import sys
from pathlib import Path
from typing import Annotated

import typer
from rich.console import Console
from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeElapsedColumn

from backtest import pipeline
from backtest.errors import StudyError, TailmarkError
from backtest.study import read_study

REFUSED, TOO_MANY_FALLBACKS = 2, 3

app = typer.Typer(
    name="tailmark",
    help="Judge reported VaR and ES beside independent challengers, day by day, without look-ahead.",
    no_args_is_help=True,
    add_completion=False,
    pretty_exceptions_enable=False,
    rich_markup_mode=None,
)

StudyPath = Annotated[Path, typer.Argument(help="The study file (TOML).", show_default=False)]
RunPath = Annotated[Path, typer.Argument(help="A run folder.", show_default=False)]
OutPath = Annotated[
    str | None, typer.Option("--out", metavar="PATH", help="The run folder [default: <study>-run beside the study].")
]
Workers = Annotated[int | None, typer.Option("--workers", min=1, help="Threads [default: the machine's cores].")]


class _Shown:
    """Progress on standard error: a bar on a terminal, a line a quarter of the way elsewhere."""

    def __init__(self, console: Console) -> None:
        self._console = console
        columns = (TextColumn("{task.description}"), BarColumn(), MofNCompleteColumn(), TimeElapsedColumn())
        self._bar = Progress(*columns, console=console, transient=True)
        self._task = self._bar.add_task("starting", total=1)
        self._said: set[tuple[str, int]] = set()

    def __enter__(self) -> "_Shown":
        if self._console.is_terminal:
            self._bar.start()
        return self

    def __exit__(self, *_: object) -> None:
        if self._console.is_terminal:  # elsewhere stopping a bar that never started writes an empty line
            self._bar.stop()

    def __call__(self, what: str, done: int, total: int) -> None:
        if self._console.is_terminal:
            self._bar.update(self._task, description=what, completed=done, total=total)
            return
        quarter = 4 * done // max(total, 1)
        if (what, quarter) not in self._said:
            self._said.add((what, quarter))
            self._console.print(f"{what}: {done} of {total}" if total > 1 else what, highlight=False)


def _run(study_path: Path, out: str | Path | None, workers: int | None, replace: bool) -> None:
    study = read_study(study_path)
    with _Shown(Console(stderr=True)) as progress:
        outcome = pipeline.run(study, out, workers=workers, progress=progress, replace=replace)
    for number, sentence in enumerate(outcome.sentences, 1):
        typer.echo(f"{number}. {sentence}")
    typer.echo(
        "Statistical evidence, not approval or advice; the applicable rules, supervisor and licensed judgement decide."
    )
    if outcome.taken is not None:
        typer.echo(f"{outcome.taken} exists, so the run is in {outcome.folder}: nothing is overwritten.", err=True)
    typer.echo(f"Summary: {outcome.folder / pipeline.SUMMARY}")
    if outcome.too_many_fallbacks:
        allowed = study.forecast.fallback_share
        typer.echo(
            f"{outcome.fallback_share:.1%} of forecasts fell back, more than fallback_share = {allowed:g}.", err=True
        )
        raise typer.Exit(TOO_MANY_FALLBACKS)


@app.command()
def demo(workers: Workers = None) -> None:
    """Run the demo study (an invented bank) and write reports/demo; needs a checkout."""
    root = Path(pipeline.__file__).resolve().parent.parent
    study = root / "data_demo" / "study.toml"
    if not study.is_file():
        remedy = "Run it from a checkout of the source, or use 'tailmark run STUDY'."
        raise StudyError("the demo needs a checkout: its data are not installed", place="tailmark demo", remedy=remedy)
    _run(study, root / "reports" / "demo", workers, replace=True)


@app.command()
def draft(files: Annotated[list[Path], typer.Argument(help="One or more extracts.", show_default=False)]) -> None:
    """Write a study for an unknown extract to standard output, each detection a comment to confirm."""
    typer.echo(pipeline.draft(files), nl=False)


@app.command()
def check(study: StudyPath) -> None:
    """Read a study and all its data, list the remarks, compute nothing."""
    for line in pipeline.check(read_study(study)):
        typer.echo(line)


@app.command()
def run(study: StudyPath, out: OutPath = None, workers: Workers = None) -> None:
    """Read, forecast, judge, record and report a study."""
    _run(study, out, workers, replace=False)


@app.command()
def report(run: RunPath) -> None:
    """Render the summary of a run again from its record; computes nothing."""
    typer.echo(f"Summary: {pipeline.render(run)}")


@app.command()
def show(
    run: RunPath,
    desk: Annotated[str, typer.Argument(help="A desk of the run.", show_default=False)],
    date: Annotated[str, typer.Argument(help="The target day, as 2025-12-31.", show_default=False)],
) -> None:
    """Say what was forecast for a desk's day and what happened, as recorded; computes nothing."""
    for line in pipeline.show(run, desk, date):
        typer.echo(line)


@app.command()
def power(
    days: Annotated[int, typer.Option("--days", help="Length of the review in business days.")] = 250,
    level: Annotated[float, typer.Option("--level", help="Confidence of VaR and ES, as 0.99.")] = 0.99,
    test: Annotated[
        str | None, typer.Option("--test", metavar="KEY", help="One test, in words [default: all, as a table].")
    ] = None,
) -> None:
    """Say in how many of 100 reviews of this length each test sees a model that is wrong in a named way."""
    for line in pipeline.power(days, level, test):
        typer.echo(line)


def main() -> None:
    """Run the command line: the entry point of ``tailmark``."""
    try:
        app(prog_name="tailmark")
    except TailmarkError as error:
        typer.echo(f"tailmark: {error}", err=True)
        sys.exit(REFUSED)


if __name__ == "__main__":
    main()
