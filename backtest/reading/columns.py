"""Which column of a file is which: the study's names against the file's header."""

from collections.abc import Sequence

from backtest.errors import DataError, StudyError, near_miss
from backtest.reading.tables import Table
from backtest.study_form import Columns, Data, LevelColumn

PNL_VALUES = ("hypothetical", "actual", "risk_theoretical", "risk_theoretical_aligned")
PNL_KEYS = ("date", "desk", *PNL_VALUES, "currency", "known_on", "flag")
REPORTED_KEYS = ("date", "desk", "model", "level", "var", "es", "sigma", "pit", "known_on")


def reported_columns(data: Data) -> Columns:
    """Return the names for the reported file: ``data.columns``, overridden by what ``reported_columns`` sets."""
    if data.reported_columns is None:
        return data.columns
    own = {key: getattr(data.reported_columns, key) for key in data.reported_columns.model_fields_set}
    return data.columns.model_copy(update=own)


def find(
    table: Table, columns: Columns, keys: Sequence[str], required: Sequence[str], strict: set[str]
) -> dict[str, str]:
    """Return our name -> the file's column for those of ``keys`` that the file has.

    Raises DataError where a required key, or one the study sets itself (``strict``), is not in the header. A column
    that the study names for one key is not taken for another by that other key's default name.
    """
    named = {key: str(getattr(columns, key)) for key in keys}
    claimed = [named[key] for key in keys if key in strict]
    _refuse_shared(claimed, table.name)
    free = {key: name for key, name in named.items() if key in strict or name not in claimed}
    for key in keys:
        if (key in required or key in strict) and free.get(key, "") not in table.columns:
            refuse_missing(table, f"data.columns.{key}", named[key])
    return {key: name for key, name in free.items() if name in table.columns}


def _refuse_shared(claimed: Sequence[str], place: str) -> None:
    shared = sorted({name for name in claimed if claimed.count(name) > 1})
    if shared:
        remedy = "Name each column once in data.columns."
        raise StudyError("two keys of the study name the same column", value=shared[0], place=place, remedy=remedy)


def refuse_missing(table: Table, key: str, name: str) -> None:
    """Raise DataError for a column that the study names (or needs) and the file lacks."""
    raise DataError(
        "a column is missing",
        rule=f"{key} names a column of the file",
        value=name,
        place=f"{table.name}, header",
        remedy=f"{near_miss(name, table.columns)} Correct {key} in the study, or the file.",
    )


def wide_levels(columns: Columns) -> list[tuple[float, str, str | None]] | None:
    """Return (level, VaR column, ES column or None) of a wide file by level; None where the file is long.

    Raises StudyError where VaR is mapped by level and ES is not (or the reverse), a level or column stands twice, or
    an ES level has no VaR column.
    """
    if isinstance(columns.var, str):
        if not isinstance(columns.es, str):
            _refuse_levels("data.columns.es lists levels, data.columns.var does not", None)
        return None
    if isinstance(columns.es, str) and "es" in columns.model_fields_set:
        _refuse_levels("data.columns.var lists levels, data.columns.es does not", columns.es)
    shortfalls = () if isinstance(columns.es, str) else columns.es
    _check_once(columns.var)
    _check_once(shortfalls)
    _refuse_shared([c.column for c in (*columns.var, *shortfalls)], "data.columns")
    by_level = {c.level: c.column for c in shortfalls}
    lonely = sorted(set(by_level) - {c.level for c in columns.var})
    if lonely or not columns.var:
        _refuse_levels("an ES column needs a VaR column at the same level", lonely[0] if lonely else None)
    return [(c.level, c.column, by_level.get(c.level)) for c in sorted(columns.var, key=lambda c: c.level)]


def _check_once(columns: Sequence[LevelColumn]) -> None:
    levels = [c.level for c in columns]
    twice = sorted({level for level in levels if levels.count(level) > 1})
    if twice:
        _refuse_levels("a level stands twice", twice[0])


def _refuse_levels(what: str, value: object) -> None:
    remedy = 'Write var = [{ column = "...", level = 0.99 }] and es likewise, level by level.'
    raise StudyError(what, value=value, place="data.columns", remedy=remedy)
