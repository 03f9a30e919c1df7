"""From the columns of an extract to the keys of a study: [data.columns] and [data.reported_columns]."""

from collections.abc import Iterable

import numpy as np

from backtest.reading.cells import numbers
from backtest.reading.columns import PNL_VALUES
from backtest.reading.draft_extract import Extract
from backtest.reading.draft_layout import Finding
from backtest.reading.draft_names import RiskColumn
from backtest.reading.draft_text import Line


def map_pnl(extract: Extract) -> list[Line]:
    """Return the lines for a P&L file: date, desk, the P&L kinds, currency, known_on, flag."""
    lines = [_required(extract, key) for key in ("date", "desk")]
    if "hypothetical" not in extract.pnl:
        lines.append(Line("hypothetical", _missing(extract)))
    lines += [Line(kind, extract.pnl[kind]) for kind in PNL_VALUES if kind in extract.pnl]
    return lines + _optional(extract, ("currency", "known_on", "flag"))


def map_reported(extract: Extract) -> list[Line]:
    """Return the lines for a file with forecasts: date, desk, model, then VaR and ES by level or in long form."""
    lines = [*(_required(extract, key) for key in ("date", "desk")), *_optional(extract, ("model", "sigma", "pit"))]
    ours = [column for column in extract.risk if not column.why_not]
    return lines + (_long(extract, ours) if "level" in extract.keys else _wide(extract, ours))


def merged(first: Iterable[Line], second: Iterable[Line]) -> list[Line]:
    """Return the lines of both, each key once."""
    return list({line.key: line for line in [*second, *first]}.values())


def rest(extract: Extract, lines: Iterable[Line]) -> list[str]:
    """Say, for the reader, which columns of the file are not mapped, and why not where there is a reason."""
    named = {name for line in lines if line.finding.sure for name in _columns(line.finding.value)}
    left = [column for column in extract.table.columns if column not in named]
    reasons = {column.column: column.why_not for column in extract.risk if column.why_not}
    return [f"{column} ({reasons[column]})" if column in reasons else column for column in left]


def _columns(value: object) -> list[str]:
    return [str(item["column"]) for item in value] if isinstance(value, list) else [str(value)]


def var_sign(extract: Extract) -> Finding:
    """Return the sign in which VaR is stored, by its values in the first VaR column."""
    column = next((c.column for c in extract.risk if c.measure == "var" and not c.why_not), None)
    if column is None:
        return Finding("positive", "there is no VaR column to look at", False)
    values = numbers(extract.table, column)
    values = values[np.isfinite(values)]
    below = int((values < 0).sum())
    why = f"{below} of {len(values)} values of {column!r} are negative"
    return Finding("negative" if 2 * below > len(values) else "positive", why)


def _required(extract: Extract, key: str) -> Line:
    return Line(key, extract.keys.get(key) or _missing(extract))


def _missing(extract: Extract) -> Finding:
    header = ", ".join(extract.table.columns)
    return Finding("", f"not recognised; the columns of {extract.table.name} are {header}", False)


def _optional(extract: Extract, keys: Iterable[str]) -> list[Line]:
    return [Line(key, extract.keys[key]) for key in keys if key in extract.keys]


def _long(extract: Extract, ours: list[RiskColumn]) -> list[Line]:
    lines = [Line("level", extract.keys["level"])]
    for measure in ("var", "es"):
        column = next((c.column for c in ours if c.measure == measure), None)
        if column is not None:
            lines.append(Line(measure, Finding(column, "by its name")))
        elif measure == "var":
            lines.append(Line(measure, _missing(extract)))
    return lines


def _wide(extract: Extract, ours: list[RiskColumn]) -> list[Line]:
    lines, levels = [], {c.level for c in ours if c.measure == "var"}
    for measure in ("var", "es"):
        columns = _once_per_level([c for c in ours if c.measure == measure])
        known = [c for c in columns if c.level is not None and c.level in levels]
        others = [c for c in columns if c not in known]
        if known:
            why = "measure and level read from the names" + _others(others)
            lines.append(Line(measure, Finding([_level_column(c, c.level) for c in known], why)))
        elif others or measure == "var":
            guess = [_level_column(c, c.level or 0.99) for c in others] or [{"column": "", "level": 0.99}]
            why = "no usual level in the name" if others else f"no VaR column recognised{_others(others)}"
            why = "there is no VaR at this level" if others and measure == "es" and others[0].level else why
            lines.append(Line(measure, Finding(guess, why, False)))
    return lines


def _once_per_level(columns: list[RiskColumn]) -> list[RiskColumn]:
    return list({c.level or c.column: c for c in reversed(columns)}.values())[::-1]


def _level_column(column: RiskColumn, level: float | None) -> dict[str, object]:
    return {"column": column.column, "level": level}


def _others(others: list[RiskColumn]) -> str:
    return "; left out: " + ", ".join(c.column for c in others) if others else ""
