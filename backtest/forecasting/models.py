"""The model grammar: a forecast model is a filter and a tail. Names and options are resolved here, before any data."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from backtest.errors import StudyError, near_miss
from backtest.forecasting.processes import PROCESSES
from backtest.kernels.gpd import FEWEST
from backtest.values import fraction, listed, whole

MEANS = ("zero", "constant", "ar1", "ar1-no-intercept")
GPD_FITS = ("ml", "zhang-stephens", "pwm")
"""In the order of the estimators of kernels/gpd.py."""
STARTS = ("sample-variance", "mean-square", "unconditional", "ewma-75")
INNOVATIONS = ("normal", "t", "skew-t")
LIBRARY, REPORTED = "library", "reported"
"""Filters that ask the library arch for a process, and that take the reported VaR as the scale."""
SHORTEST = 50
"""Shortest window in losses."""
ESTIMATED = ("garch", "gjr", LIBRARY)
"""Filters with parameters to estimate."""


@dataclass(frozen=True)
class FilterSpec:
    """A filter with its options; options that do not belong to the kind keep their neutral value."""

    kind: str
    decay: float = 0.0
    mean: str = "zero"
    start: str = ""
    innovations: str = ""
    every_start: bool = False
    process: str = ""

    @property
    def label(self) -> str:
        """The filter as written in the fits table."""
        kind = f"{self.kind}:{self.process}" if self.process else self.kind
        options = (self.mean, self.innovations, self.start) if self.kind in ESTIMATED else ()
        return " ".join([kind, *filter(None, options)])

    @property
    def conditions(self) -> int:
        """How many days at the front of a past have no residual, since they only condition."""
        return int(self.mean in ("ar1", "ar1-no-intercept") and (self.start == "ewma-75" or self.kind == LIBRARY))


@dataclass(frozen=True)
class TailSpec:
    """A tail with its options."""

    kind: str
    share: float = 0.0
    fit: str = ""
    decay: float = 0.0


@dataclass(frozen=True)
class Model:
    """A named pair of filter and tail, its window (losses) and how often its parameters are renewed."""

    name: str
    filter: FilterSpec
    tail: TailSpec
    window: int
    recalibrate_days: int

    @property
    def residuals(self) -> int:
        """How many residuals a window leaves the tail."""
        return self.window - self.filter.conditions

    @property
    def line(self) -> str:
        """The model in one line."""
        every = "daily" if self.recalibrate_days == 1 else f"every {self.recalibrate_days} days"
        fitted = f"; recalibrated {every}" if self.filter.kind in ESTIMATED else ""
        return f"{_FILTER_LINES[self.filter.kind](self)}; {_TAIL_LINES[self.tail.kind](self)}{fitted}"

    @property
    def source(self) -> str:
        """The published sources of filter and tail."""
        process = PROCESSES[self.filter.process].source if self.filter.process else ""
        sources = (_SOURCES[self.filter.kind], process, _SOURCES[self.tail.kind], _SOURCES.get(self.tail.fit, ""))
        return "; ".join(s for s in sources if s) or "common practice, no source"


_FILTER_LINES: dict[str, Any] = {
    "none": lambda m: f"last {m.window} losses as they are",
    "ewma": lambda m: f"last {m.window} losses over an EWMA volatility (decay {m.filter.decay:g})",
    "garch": lambda m: _estimated_line(m, "GARCH(1,1)"),
    "gjr": lambda m: _estimated_line(m, "GJR(1,1)"),
    LIBRARY: lambda m: (
        _estimated_line(m, f"{m.filter.process} ({PROCESSES[m.filter.process].orders})")
        + ", by the library arch, slower: one start a fit, a general optimiser"
    ),
    REPORTED: lambda m: (
        f"last {m.window} losses, each over the VaR reported for its day, times the VaR reported for the target day"
    ),
}
_BY_LAW = {
    "normal": "Gaussian quasi maximum likelihood",
    "t": "maximum likelihood with Student t innovations",
    "skew-t": "maximum likelihood with skewed t innovations",
}
_BY = {"ml": "", "zhang-stephens": " by Zhang-Stephens", "pwm": " by probability-weighted moments"}
_TAIL_LINES: dict[str, Any] = {
    "empirical": lambda m: "empirical quantile, the ceil(nq)-th smallest",
    "age-weighted": lambda m: f"empirical quantile weighted by age (decay {m.tail.decay:g})",
    "normal": lambda m: "normal tail",
    "t": lambda m: "Student t tail",
    "skew-t": lambda m: "skewed Student t tail",
    "gpd": lambda m: (
        f"generalized Pareto tail on the top {m.tail.share:.0%} ({_excesses(m)} excesses)" + _BY[m.tail.fit]
    ),
}
_SOURCES = {
    "none": "",
    LIBRARY: "",
    REPORTED: "",
    "empirical": "",
    "age-weighted": "Boudoukh, Richardson & Whitelaw (1998)",
    "normal": "",
    "t": "Student t innovations: Bollerslev (1987)",
    "skew-t": "Hansen (1994)",
    "ml": "",
    "zhang-stephens": "Zhang & Stephens (2009)",
    "pwm": "Hosking & Wallis (1987)",
    "ewma": "decay 0.94: the published value for daily data (1996)",
    "garch": "Bollerslev (1986); quasi maximum likelihood: Bollerslev & Wooldridge (1992)",
    "gjr": "Glosten, Jagannathan & Runkle (1993)",
    "gpd": "McNeil & Frey (2000)",
}

_ESTIMATED_OPTIONS = ("mean", "start", "innovations", "recalibrate_days")
_FILTER_OPTIONS: dict[str, tuple[str, ...]] = {
    "none": (), "ewma": ("decay",), "garch": _ESTIMATED_OPTIONS, "gjr": _ESTIMATED_OPTIONS, REPORTED: (),
    LIBRARY: ("mean", "innovations", "recalibrate_days"),
}  # fmt: skip
_FILTER_NAMES = (*(k for k in _FILTER_OPTIONS if k != LIBRARY), *(f"{LIBRARY}:{p}" for p in PROCESSES))
_TAIL_OPTIONS: dict[str, tuple[str, ...]] = {
    "empirical": (), "age-weighted": ("age_decay",), "normal": (), "t": (), "skew-t": (),
    "gpd": ("tail_share", "gpd_fit"),
}  # fmt: skip
_CHOICES = {"mean": MEANS, "start": STARTS, "innovations": INNOVATIONS, "gpd_fit": GPD_FITS}

NAMED: dict[str, dict[str, str]] = {
    "historical": {"filter": "none", "tail": "empirical"},
    "ewma-normal": {"filter": "ewma", "tail": "normal"},
    "volatility-scaled": {"filter": "ewma", "tail": "empirical"},
    "garch-normal": {"filter": "garch", "tail": "normal"},
    "filtered-historical": {"filter": "garch", "tail": "empirical"},
    "unconditional-evt": {"filter": "none", "tail": "gpd"},
    "conditional-evt": {"filter": "garch", "tail": "gpd"},
    "garch-t": {"filter": "garch", "innovations": "t", "tail": "t"},
    "garch-skew-t": {"filter": "garch", "innovations": "skew-t", "tail": "skew-t"},
}


def resolve(
    model: str | Mapping[str, Any],
    *,
    levels: Sequence[float],
    window: int = 1000,
    recalibrate_days: int = 1,
    every_start: bool = False,
) -> Model:
    """Turn a model's name, or a mapping with the keys of ``[[forecast.model]]``, into a Model.

    ``levels`` are those it will be asked for. Raises StudyError (with the near miss) for a name or option that does not
    exist or does not belong to that filter or tail, and where a tail cannot reach a level.
    """
    if isinstance(model, str):
        if model not in NAMED:
            raise StudyError("unknown model", value=model, place="forecast.models", remedy=near_miss(model, NAMED))
        options: dict[str, Any] = {"name": model, **NAMED[model]}
    elif isinstance(model, Mapping):
        options = {key: value for key, value in model.items() if value is not None}
        _check_keys(options)
    else:
        rule = "a model is a name, or a mapping with the keys of [[forecast.model]]"
        raise StudyError("not a model", value=model, place="forecast.models", rule=rule)
    name = options.get("name") or f"{options.get('filter', 'none')} {options.get('tail', 'empirical')}"
    if not isinstance(name, str):
        raise StudyError("a model's name is not text", value=name, place="forecast.models")
    spec_filter, spec_tail = _filter(options, name, every_start), _tail(options, name)
    days = whole(options.get("recalibrate_days", recalibrate_days), f"model {name!r}, recalibrate_days", least=1)
    length = whole(options.get("window", window), f"model {name!r}, window", least=SHORTEST)
    resolved = Model(name, spec_filter, spec_tail, length, days)
    _check_named(resolved, every_start)
    _check_reach(resolved, levels)
    return resolved


def resolve_all(
    models: Sequence[str | Mapping[str, Any]], *, taken: Sequence[str] = (), **options: Any
) -> tuple[Model, ...]:
    """Resolve several models (see ``resolve``); a name used twice, or already ``taken``, is refused."""
    resolved = tuple(resolve(model, **options) for model in listed(models, "forecast.models", '["historical"]'))
    seen = set(taken)
    for model in resolved:
        if model.name in seen:
            raise StudyError("two models of the same name", value=model.name, remedy="Give each its own name.")
        seen.add(model.name)
    return resolved


def _check_named(model: Model, every_start: bool) -> None:
    """Refuse a pair that goes by the name of a named model and is another one; window and recalibration may differ."""
    if model.name in NAMED:
        options, name = NAMED[model.name], model.name
        if (model.filter, model.tail) != (_filter(options, name, every_start), _tail(options, name)):
            rule = f"{name} is filter {options['filter']!r} and tail {options['tail']!r} with their usual options"
            what, remedy = "a pair bears the name of another, a named model", "Give the pair a name of its own."
            raise StudyError(what, value=name, place="forecast.model", rule=rule, remedy=remedy)


def _check_keys(options: Mapping[str, Any]) -> None:
    known = {"name", "filter", "tail", "window"}
    known |= {o for group in (*_FILTER_OPTIONS.values(), *_TAIL_OPTIONS.values()) for o in group}
    for key in options:
        if key not in known:
            raise StudyError("unknown key in a model", value=key, remedy=near_miss(key, known))


def _pick(options: Mapping[str, Any], key: str, default: str, known: Sequence[str], name: str) -> str:
    value = str(options.get(key, default))
    if value not in known:
        raise StudyError(f"unknown {key}", value=value, place=f"model {name!r}", remedy=near_miss(value, known))
    return value


def _share(options: Mapping[str, Any], key: str, default: float, below: float, name: str) -> float:
    return fraction(options.get(key, default), f"model {name!r}, {key}", above=0.0, below=below)


def _refuse_strangers(options: Mapping[str, Any], kind: str, table: Mapping[str, tuple[str, ...]], name: str) -> None:
    for key in {o for group in table.values() for o in group} - set(table[kind]):
        if key in options and key != "recalibrate_days":
            raise StudyError(
                f"{key} does not belong to {kind}", value=options[key], place=f"model {name!r}", remedy="Leave it out."
            )


def _filter(options: Mapping[str, Any], name: str, every_start: bool) -> FilterSpec:
    kind, _, process = _pick(options, "filter", "none", _FILTER_NAMES, name).partition(":")
    _refuse_strangers(options, kind, _FILTER_OPTIONS, name)
    if kind == "ewma":
        return FilterSpec(kind, decay=_share(options, "decay", 0.94, 1.0, name))
    if kind in ESTIMATED:
        defaults = (("mean", "ar1"), ("start", STARTS[0]), ("innovations", INNOVATIONS[0]))
        mean, start, law = (_pick(options, key, default, _CHOICES[key], name) for key, default in defaults)
        if process:
            return FilterSpec(kind, mean=mean, innovations=law, process=process)
        return FilterSpec(kind, mean=mean, start=start, innovations=law, every_start=every_start)
    return FilterSpec(kind)


def _tail(options: Mapping[str, Any], name: str) -> TailSpec:
    kind = _pick(options, "tail", "empirical", tuple(_TAIL_OPTIONS), name)
    _refuse_strangers(options, kind, _TAIL_OPTIONS, name)
    if kind == "age-weighted":
        return TailSpec(kind, decay=_share(options, "age_decay", 0.99, 1.0, name))
    if kind != "gpd":
        return TailSpec(kind)
    fit = _pick(options, "gpd_fit", "ml", _CHOICES["gpd_fit"], name)
    return TailSpec(kind, share=_share(options, "tail_share", 0.10, 0.5, name), fit=fit)


def _estimated_line(model: Model, process: str) -> str:
    f = model.filter
    start = f" (start {f.start})" if f.start else ""
    process = f"a {f.mean} mean and {process} volatility by {_BY_LAW[f.innovations]}{start}"
    return f"last {model.window} losses through {process}"


def _excesses(model: Model) -> int:
    return int(np.floor(model.tail.share * model.residuals + 1e-9))


def _check_reach(model: Model, levels: Sequence[float]) -> None:
    if model.tail.kind != "gpd":
        return
    k, place = _excesses(model), f"model {model.name!r}"
    if k < FEWEST:
        raise StudyError(
            f"a generalized Pareto tail needs at least {FEWEST} excesses", value=k, place=place,
            rule="tail_share x window", remedy="Lengthen the window or raise tail_share.",
        )  # fmt: skip
    shallow = [q for q in levels if not (1 - q) * model.residuals < k * (1 - 1e-12)]
    if shallow:
        raise StudyError(
            "the tail starts beyond a level it is asked for", value=shallow[0], place=place,
            rule="1 - level < tail_share", remedy="Raise tail_share or leave the level out.",
        )  # fmt: skip
