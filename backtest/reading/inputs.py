"""From a study to checked inputs: every file read once, every rule asked once, all remarks collected."""

import dataclasses
from dataclasses import dataclass, field

import numpy as np
import pandas as pd

from backtest.errors import DataError, StudyError
from backtest.reading import gaps
from backtest.reading.business_days import (
    calendar_from_data,
    cut_off,
    days_of_data,
    read_calendar,
    refuse_short_calendar,
    within,
)
from backtest.reading.desks import (
    complete_desks,
    desks_of_data,
    no_changes,
    read_changes,
    read_desks,
    refuse_unknown,
    refuse_unknown_firm,
    remark_desks,
)
from backtest.reading.exposures import EXPOSURE_COLUMNS, FACTOR_COLUMNS, build_vectors, read_factors
from backtest.reading.history import refuse_nothing_to_do, rules_not_applied, short_histories
from backtest.reading.pnl import read_pnl
from backtest.reading.remarks import in_order, per_desk
from backtest.reading.reported import COLUMNS, empty_reported, read_reported, to_target_dates
from backtest.reading.shift import shifted
from backtest.reading.stretches import stale_pnl, stale_var
from backtest.reading.tables import Table, layout_of, read_table
from backtest.reading.totals import not_adding_up
from backtest.reading.vector_days import on_target_days, refuse_without_vectors, vector_remarks
from backtest.reading.vectors import VECTOR_COLUMNS, read_vectors
from backtest.records import DeskVectors, Inputs, Remark, latest_known
from backtest.study_form import Study

ROLES = ("pnl", "reported", "desks", "changes", "calendar", "vectors", "factors", "exposures")
ROWS = {"pnl": "P&L rows", "reported": "reported forecasts", "changes": "changes"}


@dataclass
class _Gathered:
    """What has been gathered so far: tables by role, columns used per file, remarks."""

    study: Study
    tables: dict[str, Table]
    used: dict[str, set[str]] = field(default_factory=dict)
    remarks: list[Remark] = field(default_factory=list)

    def name(self, role: str) -> str:
        return self.tables[role].name if role in self.tables else role

    def use(self, role: str, columns: set[str]) -> None:
        self.used.setdefault(self.name(role), set()).update(columns)

    def leave_out(self, frame: pd.DataFrame, late: pd.Series, rule: str, role: str, text: str) -> pd.DataFrame:
        """Return the rows that are not ``late``; remark on the others."""
        self.remarks += per_desk(rule, self.name(role), frame[late], text)
        return frame[~late].reset_index(drop=True)


def read_inputs(study: Study) -> Inputs:
    """Read and check every table that a study names; see records.Inputs for what is returned.

    Nothing is repaired: values are kept as written (in the conventions of records), and what looks odd is a remark.
    Raises DataError (file, row, column, value, remedy) for what cannot be read or is systematically mis-mapped, and
    StudyError where study and files do not fit together.
    """
    gathered = _Gathered(study, _open(study))
    pnl, used = read_pnl(gathered.tables["pnl"], study.data)
    gathered.use("pnl", used)
    refuse_unknown_firm(pnl, study)
    reported = _reported(gathered)
    supplied = _calendar(gathered)
    known_days = days_of_data(pnl, reported) if supplied is None else supplied
    reported, moved = to_target_dates(
        reported, known_days, gathered.name("reported"), as_of_dated=study.data.var_date == "as-of"
    )
    gathered.remarks += moved
    desks = _desks(gathered, pnl, reported)
    changes = _changes(gathered, desks)
    as_of = cut_off(study, pnl, gathered.name("pnl"))
    pnl, reported, changes = _up_to(gathered, as_of, pnl, reported, changes)
    if supplied is not None:
        refuse_short_calendar(supplied, pnl, gathered.name("calendar"))
    calendar = within(known_days, pnl["date"].min(), as_of)
    vectors = _vectors(gathered, desks, known_days, as_of)
    inputs = _assemble(gathered, as_of, calendar, pnl, reported, desks, changes)
    inputs = dataclasses.replace(inputs, vectors=vectors)
    refuse_nothing_to_do(study, inputs.pnl, inputs.reported, calendar, vectors)
    remarks = [*gathered.remarks, *rules_not_applied(study), *_unnamed(gathered), *_look(gathered, inputs, supplied)]
    return dataclasses.replace(inputs, remarks=in_order(remarks))


def _open(study: Study) -> dict[str, Table]:
    """Read every file once; P&L and reported forecasts may be the same one."""
    data, layout = study.data, layout_of(study.data)
    _refuse_unread_mapping(study)
    refuse_without_vectors(study)
    tables: dict[str, Table] = {}
    by_name: dict[str, Table] = {}
    for role in ROLES:
        name = getattr(data, role)
        if name is not None:
            if name not in by_name:
                by_name[name] = read_table(study.folder, name, role, layout)
            tables[role] = dataclasses.replace(by_name[name], role=role)
    return tables


def _refuse_unread_mapping(study: Study) -> None:
    """Refuse a study that maps VaR columns, or names the model under review, but names no reported file."""
    data = study.data
    mapped = data.reported_columns is not None or {"var", "es"} & data.columns.model_fields_set
    asked = "review.subject" if study.review.subject is not None else "the VaR columns" if mapped else ""
    if asked and data.reported is None:
        raise StudyError(
            f"{asked} cannot be found: no reported file is named",
            rule="reported forecasts are read from data.reported",
            value=study.review.subject,
            place=f"{study.path.name}, data.reported",
            remedy=f"Set data.reported (it may be the same file as data.pnl, {data.pnl!r}).",
        )


def _reported(gathered: _Gathered) -> pd.DataFrame:
    if "reported" not in gathered.tables:
        return empty_reported().assign(line=0)
    frame, used, remarks = read_reported(gathered.tables["reported"], gathered.study)
    gathered.use("reported", used)
    gathered.remarks += remarks
    return frame


def _calendar(gathered: _Gathered) -> np.ndarray | None:
    if "calendar" not in gathered.tables:
        return None
    days, used = read_calendar(gathered.tables["calendar"])
    gathered.use("calendar", used)
    return days


def _desks(gathered: _Gathered, pnl: pd.DataFrame, reported: pd.DataFrame) -> pd.DataFrame:
    study = gathered.study
    if "desks" not in gathered.tables:
        return desks_of_data(pnl, reported, study.data.currency)
    table = gathered.tables["desks"]
    desks, used = read_desks(table)
    gathered.use("desks", used)
    desks = complete_desks(desks, pnl, study, table)
    rule = f"every desk stands in {table.name}"
    refuse_unknown(pnl, gathered.tables["pnl"], desks["desk"], rule)
    if "reported" in gathered.tables:
        refuse_unknown(reported, gathered.tables["reported"], desks["desk"], rule)
    gathered.remarks += remark_desks(desks, pnl, reported, table)
    return desks


def _changes(gathered: _Gathered, desks: pd.DataFrame) -> pd.DataFrame:
    if "changes" not in gathered.tables:
        return no_changes().assign(line=0)
    table = gathered.tables["changes"]
    changes, used = read_changes(table)
    gathered.use("changes", used)
    refuse_unknown(changes, table, desks["desk"], "a change names a desk of the data")
    return changes


def _vectors(
    gathered: _Gathered, desks: pd.DataFrame, days: np.ndarray, as_of: np.datetime64
) -> dict[str, DeskVectors]:
    """Return the vectors supplied, or built from factors and exposures, under their target days."""
    data, tables = gathered.study.data, gathered.tables
    as_of_dated, known = data.var_date == "as-of", list(desks["desk"])
    if "vectors" in tables:
        vectors = read_vectors(tables["vectors"], data, known)
        gathered.use("vectors", set(VECTOR_COLUMNS))
    elif "factors" in tables:
        factors = read_factors(tables["factors"])
        vectors = build_vectors(tables["exposures"], factors, known, as_of_dated=as_of_dated)
        gathered.use("factors", set(FACTOR_COLUMNS))
        gathered.use("exposures", set(EXPOSURE_COLUMNS))
    else:
        return {}
    name = gathered.name(_vectors_role(gathered))
    vectors, remarks = on_target_days(vectors, days, as_of, name, as_of_dated=as_of_dated)
    gathered.remarks += remarks
    return vectors


def _vectors_role(gathered: _Gathered) -> str:
    """Return the role of the file whose dates are those of the vectors."""
    return "exposures" if "exposures" in gathered.tables else "vectors"


def _up_to(
    gathered: _Gathered, as_of: np.datetime64, pnl: pd.DataFrame, reported: pd.DataFrame, changes: pd.DataFrame
) -> tuple[pd.DataFrame, pd.DataFrame, pd.DataFrame]:
    """Leave out what lies after the cut-off, each with a remark."""
    after = f"after the cut-off {as_of}, left out"
    leave_out, tables = gathered.leave_out, {"pnl": pnl, "reported": reported, "changes": changes}
    for role, frame in tables.items():
        text = f"{ROWS[role]} {after}: {{count}}"
        tables[role] = leave_out(frame, frame["date"] > as_of, "after-cut-off", role, text)
    pnl, text = tables["pnl"], f"P&L values that became known {after}: {{count}}"
    pnl = leave_out(pnl, pnl["known_on"] > as_of, "known-after-cut-off", "pnl", text)
    if pnl.empty:
        remedy = "Move review.as_of."
        raise DataError(f"no P&L was known by {as_of}", place=gathered.name("pnl"), remedy=remedy)
    return pnl, tables["reported"], tables["changes"]


def _assemble(
    gathered: _Gathered,
    as_of: np.datetime64,
    calendar: np.ndarray,
    pnl: pd.DataFrame,
    reported: pd.DataFrame,
    desks: pd.DataFrame,
    changes: pd.DataFrame,
) -> Inputs:
    order = ["desk", "model", "level", "date"]
    return Inputs(
        pnl=pnl.drop(columns="line"),
        reported=reported.sort_values(order, ignore_index=True)[list(COLUMNS)],
        desks=desks,
        changes=changes.drop(columns="line"),
        calendar=calendar,
        as_of=as_of,
        remarks=(),
        sources=tuple(gathered.tables[role].source for role in ROLES if role in gathered.tables),
    )


def _unnamed(gathered: _Gathered) -> list[Remark]:
    """Remark on the columns of each file that the study does not name."""
    remarks = []
    for table in {table.name: table for table in gathered.tables.values()}.values():
        rest = [column for column in sorted(table.columns) if column not in gathered.used[table.name]]
        if rest:
            text = f"columns that the study does not name, not read ({len(rest)}): {', '.join(rest)}"
            remarks.append(Remark("unnamed-columns", table.name, "", "", "", len(rest), text))
    return remarks


def _look(gathered: _Gathered, inputs: Inputs, supplied: np.ndarray | None) -> list[Remark]:
    """Return the remarks on days and values, from the checked tables."""
    pnl, reported, desks, calendar = inputs.pnl, inputs.reported, inputs.desks, inputs.calendar
    latest = latest_known(pnl, inputs.as_of)
    of_pnl, of_reported = gathered.name("pnl"), gathered.name("reported")
    on_days = (
        calendar_from_data(calendar)
        if supplied is None
        else gaps.off_calendar(pnl, supplied, "pnl-off-calendar", of_pnl)
        + gaps.off_calendar(reported, supplied, "reported-off-calendar", of_reported)
    )
    return [
        *on_days,
        *gaps.missing_days(pnl, desks, calendar, of_pnl),
        *gaps.empty_values(pnl, inputs.as_of, of_pnl),
        *gaps.weekends(pnl, reported, (of_pnl, of_reported)),
        *gaps.outside_life(pnl, desks, of_pnl),
        *gaps.one_side_only(pnl, reported, inputs.as_of, of_reported),
        *gaps.restated(pnl, inputs.as_of, of_pnl),
        *gaps.currencies(desks, gathered.name("desks")),
        *stale_pnl(latest, calendar, of_pnl),
        *stale_var(reported, calendar, of_reported),
        *shifted(latest, reported, calendar, of_reported),
        *not_adding_up(latest, desks, gathered.study.review.firm, of_pnl),
        *short_histories(gathered.study, pnl, reported, calendar),
        *vector_remarks(gathered.study, inputs, gathered.name(_vectors_role(gathered))),
    ]
