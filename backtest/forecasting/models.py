"""The model grammar: a forecast model is a filter and a tail. Names and options are resolved here, before any data."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from backtest.errors import StudyError, near_miss
from backtest.kernels.gpd import FEWEST

MEANS = ("zero", "constant", "ar1", "ar1-no-intercept")
GPD_FITS = ("ml", "zhang-stephens", "pwm")
"""In the order of the estimators of kernels/gpd.py."""
STARTS = ("sample-variance", "mean-square", "unconditional", "ewma-75")
INNOVATIONS = ("normal", "t", "skew-t")
ESTIMATED = ("garch", "gjr")
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

    @property
    def label(self) -> str:
        """The filter as written in the fits table."""
        return f"{self.kind} {self.mean} {self.innovations} {self.start}" if self.kind in ESTIMATED else self.kind


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
        conditions = self.filter.start == "ewma-75" and self.filter.mean in ("ar1", "ar1-no-intercept")
        return self.window - int(conditions)

    @property
    def line(self) -> str:
        """The model in one line."""
        every = "daily" if self.recalibrate_days == 1 else f"every {self.recalibrate_days} days"
        fitted = f"; recalibrated {every}" if self.filter.kind in ESTIMATED else ""
        return f"{_FILTER_LINES[self.filter.kind](self)}; {_TAIL_LINES[self.tail.kind](self)}{fitted}"

    @property
    def source(self) -> str:
        """The published sources of filter and tail."""
        sources = (_SOURCES[self.filter.kind], _SOURCES[self.tail.kind], _SOURCES.get(self.tail.fit, ""))
        return "; ".join(s for s in sources if s) or "common practice, no source"


_FILTER_LINES: dict[str, Any] = {
    "none": lambda m: f"last {m.window} losses as they are",
    "ewma": lambda m: f"last {m.window} losses over an EWMA volatility (decay {m.filter.decay:g})",
    "garch": lambda m: _estimated_line(m, "GARCH(1,1)"),
    "gjr": lambda m: _estimated_line(m, "GJR(1,1)"),
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
_FILTER_OPTIONS = {"none": (), "ewma": ("decay",), "garch": _ESTIMATED_OPTIONS, "gjr": _ESTIMATED_OPTIONS}
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
    else:
        options = {key: value for key, value in model.items() if value is not None}
        _check_keys(options)
    name = str(options.get("name", "")) or f"{options.get('filter', 'none')} {options.get('tail', 'empirical')}"
    spec_filter, spec_tail = _filter(options, name, every_start), _tail(options, name)
    days = int(options.get("recalibrate_days", recalibrate_days))
    resolved = Model(name, spec_filter, spec_tail, int(options.get("window", window)), days)
    _check_reach(resolved, levels)
    return resolved


def resolve_all(
    models: Sequence[str | Mapping[str, Any]], *, taken: Sequence[str] = (), **options: Any
) -> tuple[Model, ...]:
    """Resolve several models (see ``resolve``); a name used twice, or already ``taken``, is refused."""
    resolved = tuple(resolve(model, **options) for model in models)
    seen = set(taken)
    for model in resolved:
        if model.name in seen:
            raise StudyError("two models of the same name", value=model.name, remedy="Give each its own name.")
        seen.add(model.name)
    return resolved


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


def _refuse_strangers(options: Mapping[str, Any], kind: str, table: Mapping[str, tuple[str, ...]], name: str) -> None:
    for key in {o for group in table.values() for o in group} - set(table[kind]):
        if key in options and key != "recalibrate_days":
            raise StudyError(
                f"{key} does not belong to {kind}", value=options[key], place=f"model {name!r}", remedy="Leave it out."
            )


def _filter(options: Mapping[str, Any], name: str, every_start: bool) -> FilterSpec:
    kind = _pick(options, "filter", "none", tuple(_FILTER_OPTIONS), name)
    _refuse_strangers(options, kind, _FILTER_OPTIONS, name)
    if kind == "ewma":
        return FilterSpec(kind, decay=float(options.get("decay", 0.94)))
    if kind in ESTIMATED:
        defaults = (("mean", "ar1"), ("start", STARTS[0]), ("innovations", INNOVATIONS[0]))
        mean, start, law = (_pick(options, key, default, _CHOICES[key], name) for key, default in defaults)
        return FilterSpec(kind, mean=mean, start=start, innovations=law, every_start=every_start)
    return FilterSpec(kind)


def _tail(options: Mapping[str, Any], name: str) -> TailSpec:
    kind = _pick(options, "tail", "empirical", tuple(_TAIL_OPTIONS), name)
    _refuse_strangers(options, kind, _TAIL_OPTIONS, name)
    if kind == "age-weighted":
        return TailSpec(kind, decay=float(options.get("age_decay", 0.99)))
    if kind != "gpd":
        return TailSpec(kind)
    fit = _pick(options, "gpd_fit", "ml", _CHOICES["gpd_fit"], name)
    return TailSpec(kind, share=float(options.get("tail_share", 0.10)), fit=fit)


def _estimated_line(model: Model, process: str) -> str:
    f = model.filter
    process = f"a {f.mean} mean and {process} volatility by {_BY_LAW[f.innovations]} (start {f.start})"
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
