"""Figures as SVG text: the data of a figure is a plain record that can be tested, the drawing only draws it."""

import re
from dataclasses import dataclass
from io import StringIO
from typing import Any

import numpy as np

from backtest.records import PNL_KINDS
from backtest.reporting import wording as say
from backtest.reporting.book import Book

DAYS_SHOWN = 500
"""Business days in a figure: more would neither print nor keep the page small."""
_INK, _GREY, _PALE = "#1d2228", "#6d7680", "#b4bbc2"
_SETTINGS: dict[Any, Any] = {
    "svg.fonttype": "none",
    "text.parse_math": False,
    "font.family": "sans-serif",
    "font.size": 8,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.linewidth": 0.6,
    "xtick.major.width": 0.6,
    "ytick.major.width": 0.6,
}


@dataclass(frozen=True)
class LossFigure:
    """Losses of one desk against VaR: arrays over the same days, amounts in the unit of the P&L.

    ``losses`` and ``exceptions`` by P&L kind; exceptions are of the first model named in ``var`` (flags over the
    days). NaN where there is no P&L or no forecast.
    """

    dates: np.ndarray
    losses: dict[str, np.ndarray]
    var: dict[str, np.ndarray]
    exceptions: dict[str, np.ndarray]
    level: float
    currency: str
    cut: bool


def losses_against_var(book: Book, desk: str, level: float) -> LossFigure | None:
    """Return the data of a desk's figure: the main model and one challenger at a level, over the latest days.

    The challenger is conditional-evt where it was run, else the last of the study. None without a forecast.
    """
    names = [
        book.main_model,
        "conditional-evt" if "conditional-evt" in book.models else next(iter(book.models[::-1]), ""),
    ]
    tables = {n: book.daily(desk, n, level, PNL_KINDS[0]) for n in dict.fromkeys(names) if n}
    tables = {n: t for n, t in tables.items() if len(t)}
    if not tables:
        return None
    every = np.unique(np.concatenate([t["date"].to_numpy() for t in tables.values()]))
    dates = every[-DAYS_SHOWN:]
    pnl = book.pnl(desk).set_index("date")
    losses = {k: -pnl[k].reindex(dates).to_numpy() for k in PNL_KINDS if k in pnl and pnl[k].notna().any()}
    var = {n: t.set_index("date")["var"].reindex(dates).to_numpy() for n, t in tables.items()}
    judged = next(iter(var.values()))
    exceptions = {k: loss > judged for k, loss in losses.items()}
    return LossFigure(dates, losses, var, exceptions, level, book.currency, len(every) > DAYS_SHOWN)


def caption(figure: LossFigure, desk: str) -> str:
    """Return the caption of a desk's figure: what is drawn, which days, what the marks mean, how many there are."""
    models = [say.name(m) for m in figure.var]
    lines = f"black line {models[0]}" + (f", dashed line {models[1]}" if len(models) > 1 else "")
    days = f"{say.whole(len(figure.dates))} business days, {say.date(figure.dates[0])} to {say.date(figure.dates[-1])}"
    latest = f"the latest {days}" if figure.cut else days
    marks = {"hypothetical": "filled dots", "actual": "open rings"}
    counts = [f"{marks[k]} losses beyond {models[0]} on {k} P&L ({int(e.sum())})" for k, e in figure.exceptions.items()]
    kind, level = next(iter(figure.losses), "no"), say.level(figure.level)
    head = f"{say.name(desk)}: daily losses on {kind} P&L (bars) against one-day {level} VaR"
    return f"{head}; {latest}. {lines[0].upper()}{lines[1:]}; {'; '.join(counts)}. Days with a profit have no bar."


def draw(figure: LossFigure, salt: str) -> str:
    """Return the figure as SVG text that depends on its data and ``salt`` only (the salt keeps its ids its own)."""
    # matplotlib is imported here, in its one listed place, so that work without figures does not wait for it
    from matplotlib import rc_context
    from matplotlib.backends.backend_svg import FigureCanvasSVG
    from matplotlib.figure import Figure

    with rc_context({**_SETTINGS, "svg.hashsalt": salt}):
        canvas = FigureCanvasSVG(Figure(figsize=(7.4, 2.7)))
        _draw_losses(canvas.figure.add_axes((0.075, 0.17, 0.815, 0.8)), figure)
        return _svg_text(canvas)


def _draw_losses(axes: Any, figure: LossFigure) -> None:
    dates = figure.dates.astype("datetime64[D]")
    shown = [*figure.losses.values(), *figure.var.values()]
    top = max((float(np.nanmax(v)) for v in shown if np.isfinite(v).any()), default=1.0)
    scale, unit = say.axis_scale(top, figure.currency)
    loss = next(iter(figure.losses.values()), np.full(len(dates), np.nan))
    spikes = np.column_stack([np.zeros(len(loss)), np.clip(loss, 0, None), np.full(len(loss), np.nan)]) / scale
    bars = loss > 0
    axes.plot(np.repeat(dates[bars], 3), spikes[bars].ravel(), color=_PALE, linewidth=0.8)
    for (_, var), style in zip(figure.var.items(), ("-", (0, (3, 1.4))), strict=False):
        axes.step(
            dates, var / scale, where="mid", color=_INK if style == "-" else _GREY, linestyle=style, linewidth=1.0
        )
    for kind, hits in figure.exceptions.items():
        face, size = (_INK, 3.4) if kind == "hypothetical" else ("none", 6.2)
        axes.plot(dates[hits], figure.losses[kind][hits] / scale, "o", ms=size, mfc=face, mec=_INK, mew=0.9)
    axes.set_ylim(0, 1.08 * max(top, 0.0) / scale or 1)
    axes.margins(x=0.01)
    axes.set_ylabel(f"loss, {unit}")
    _label_dates(axes)
    _label_lines(axes, figure, scale)


def _label_dates(axes: Any) -> None:
    axes.tick_params(length=2.5)
    axes.set_xlabel("business date (year-month)")
    axes.xaxis.set_major_formatter(lambda x, _: str(np.datetime64(int(x), "D"))[:7])


def _label_lines(axes: Any, figure: LossFigure, scale: float) -> None:
    """Write at the right end of each line what it is, the higher line's words above the lower's."""
    ends = []
    for word, var in zip(("judged", "challenger"), figure.var.values(), strict=False):
        known = np.flatnonzero(np.isfinite(var))
        if len(known):
            ends.append([float(var[known[-1]]) / scale, word, figure.dates[known[-1]].astype("datetime64[D]")])
    ends.sort(key=lambda e: e[0])
    room = 0.075 * axes.get_ylim()[1]
    if len(ends) == 2 and ends[1][0] - ends[0][0] < room:
        middle = (ends[0][0] + ends[1][0]) / 2
        ends[0][0], ends[1][0] = middle - room / 2, middle + room / 2
    for height, word, day in ends:
        axes.annotate(
            word, (day, height), xytext=(5, 0), textcoords="offset points", va="center", annotation_clip=False
        )


def _svg_text(canvas: Any) -> str:
    """Return the drawing as part of a page: no head of a file, no style that would leak, no id that nothing needs."""
    file = StringIO()
    canvas.print_svg(file, metadata={"Date": None, "Creator": None, "Format": None, "Type": None})
    text = file.getvalue()
    text = text[text.index("<svg") :]
    text = re.sub(r"<style.*?</style>|<!--.*?-->|<metadata>.*?</metadata>", "", text, flags=re.DOTALL).strip()
    needed = set(re.findall(r"#([\w-]+)", text))
    return re.sub(r' id="([^"]*)"', lambda m: m[0] if m[1] in needed else "", text)
