"""Draft a study for an unknown extract: every detection is a value with a comment to confirm."""

import os
from collections.abc import Iterable, Sequence
from pathlib import Path
from typing import Any

import pandas as pd

from backtest.errors import DataError, TailmarkError
from backtest.reading.business_days import days_of_data
from backtest.reading.draft_evidence import Evidence, firm_row, look, pnl_sign, var_date
from backtest.reading.draft_extract import POSITION_ROLES, Extract, look_at
from backtest.reading.draft_layout import Finding
from backtest.reading.draft_mapping import map_pnl, map_reported, merged, rest, var_sign
from backtest.reading.draft_names import says_loss
from backtest.reading.draft_text import Line, render
from backtest.reading.history import known_before_last
from backtest.reading.pnl import read_pnl
from backtest.reading.reported import DEFAULT_MODEL, empty_reported, read_reported
from backtest.study_form import Study

SIDE_ROLES = ("desks", "changes", "calendar")
WINDOWS = (1000, 500, 250, 100, 50)
"""Windows offered where nothing is reported: the longest that some desk reaches."""


def draft_study(files: Sequence[Path]) -> str:
    """Return the TOML text of a study for the files of an extract, to be saved in their common folder.

    What was detected stands as a value with ``# confirm: why``; what was not is a commented-out line with
    ``# complete: why``. Raises DataError for no files and for a file that cannot be read as a table.
    """
    if not files:
        raise DataError("there is no file to draft a study for", remedy="Name one or more CSV or Parquet files.")
    paths = [Path(file).absolute() for file in files]
    folder = Path(os.path.commonpath([path.parent for path in paths]))
    extracts = [look_at(path, folder) for path in paths]
    by_role = _by_role(extracts)
    sections = _mapped(by_role)
    pnl, reported, refusal = _tables(by_role, sections)
    evidence = None if pnl is None else look(pnl, reported)
    sections["data"] += _conventions(by_role, evidence)
    sections["review"], sections["forecast"] = _review(by_role, evidence), _forecast(by_role, evidence)
    order = ("review", "data", "data.columns", "data.reported_columns", "forecast")
    notes = _notes(extracts, by_role, sections, refusal)
    return render(notes, {section: sections[section] for section in order})


def _by_role(extracts: Sequence[Extract]) -> dict[str, Extract]:
    """Give each role its file: the first that fits; forecasts may lie in the P&L file."""
    by_role: dict[str, Extract] = {}
    for extract in extracts:
        by_role.setdefault(extract.role, extract)
    by_role.pop("", None)
    for role in _without_use(by_role):
        del by_role[role]
    if "reported" not in by_role and "pnl" in by_role and by_role["pnl"].risk:
        by_role["reported"] = by_role["pnl"]
    return by_role


def _without_use(by_role: dict[str, Extract]) -> list[str]:
    """Return the roles that a study would refuse: factors or exposures alone, and both beside vectors."""
    pair: list[str] = [role for role in ("factors", "exposures") if role in by_role]
    return pair if len(pair) == 1 or "vectors" in by_role else []


def _mapped(by_role: dict[str, Extract]) -> dict[str, list[Line]]:
    """Return the lines that follow from the files' form: names of files, layout, columns."""
    pnl, reported = by_role.get("pnl"), by_role.get("reported")
    columns = map_pnl(pnl) if pnl else []
    others = map_reported(reported) if reported else []
    if pnl is reported and reported is not None:
        columns, others = merged(columns, others), []
    layout = _layout(by_role)
    roles = ("pnl", "reported", *SIDE_ROLES, *(role for role in POSITION_ROLES if role in by_role))
    data = [_file(role, by_role.get(role)) for role in roles]
    return {
        "data": [*data, *(Line(key, finding) for key, finding in layout.items())],
        "data.columns": columns,
        "data.reported_columns": others,
    }


def _layout(by_role: dict[str, Extract]) -> dict[str, Finding]:
    """Return how the files are written, key by key from the first that tells: P&L, forecasts, then the others."""
    ordered = sorted(by_role, key=lambda role: ("pnl", "reported", role).index(role))
    layout: dict[str, Finding] = {}
    for extract in (by_role[role] for role in ordered):
        for key, finding in extract.layout.items():
            if key in _told(extract) and (key not in layout or (finding.sure and not layout[key].sure)):
                layout[key] = finding
    return layout


def _told(extract: Extract) -> list[str]:
    """Return the keys of the layout that a file can tell of: one column alone shows no separator and no decimal."""
    alone = len(extract.table.columns) == 1
    return [key for key in extract.layout if not (alone and key in ("separator", "decimal"))]


def _file(role: str, extract: Extract | None) -> Line:
    if extract is None:
        return Line(role, Finding(f"{role}.csv", f"no file was recognised as {role}", False))
    return Line(role, Finding(extract.table.name, f"by its columns, {extract.table.rows} rows"))


def _tables(
    by_role: dict[str, Extract], sections: dict[str, list[Line]]
) -> tuple[pd.DataFrame | None, pd.DataFrame, str]:
    """Read P&L and forecasts as drafted, to look at their values; return why not where the reader refuses them."""
    if "pnl" not in by_role:
        return None, empty_reported(), "no file has a column recognised as P&L"
    data = _settings(sections["data"]) | {"columns": _settings(sections["data.columns"])}
    if sections["data.reported_columns"]:
        data["reported_columns"] = _settings(sections["data.reported_columns"])
    if "reported" in by_role:
        data["var_sign"] = var_sign(by_role["reported"]).value
    try:
        study = Study.model_validate({"data": data})
        pnl, _ = read_pnl(by_role["pnl"].table, study.data)
        reported = read_reported(by_role["reported"].table, study)[0] if "reported" in by_role else empty_reported()
    except (TailmarkError, ValueError) as error:
        return None, empty_reported(), f"as drafted the files are not yet readable: {error}"
    return pnl, reported, ""


def _settings(lines: Iterable[Line]) -> dict[str, Any]:
    return {line.key: line.finding.value for line in lines if line.finding.sure}


def _conventions(by_role: dict[str, Extract], evidence: Evidence | None) -> list[Line]:
    """Return the lines on sign, date and unit, with the evidence for each."""
    names = [str(finding.value) for finding in by_role["pnl"].pnl.values()] if "pnl" in by_role else []
    loss_names = bool(names) and all(says_loss(name) for name in names)
    unseen = Finding("profit-positive", "the P&L could not be looked at", False)
    lines = [Line("pnl_sign", pnl_sign(evidence, loss_names) if evidence else unseen)]
    if "reported" in by_role:
        lines.append(Line("var_sign", var_sign(by_role["reported"])))
        unknown = Finding("target", "the values could not be looked at: target or as-of?", False)
        lines.append(Line("var_date", var_date(evidence) if evidence else unknown))
    return [*lines, Line("currency", _currency(evidence))]


def _currency(evidence: Evidence | None) -> Finding:
    found = sorted(evidence.pnl["currency"].unique()) if evidence and "currency" in evidence.pnl else []
    if len(found) == 1:
        return Finding(found[0], "the only one in the currency column")
    return Finding("EUR", f"the currency column has {', '.join(found)}" if found else "no currency column", False)


def _review(by_role: dict[str, Extract], evidence: Evidence | None) -> list[Line]:
    lines = []
    if "reported" in by_role:
        models = sorted(evidence.reported["model"].unique()) if evidence else []
        if len(models) == 1:
            named = models[0] != DEFAULT_MODEL
            why = "the only model in the file" if named else "the file names no model: choose the name to print"
            lines.append(Line("subject", Finding(models[0], why)))
        else:
            why = f"the model under review, one of {', '.join(models)}" if models else "the model under review"
            lines.append(Line("subject", Finding(models[0] if models else "", why, False)))
    firm = firm_row(evidence, "") if evidence else None
    return [*lines, Line("firm", firm)] if firm is not None else lines


def _forecast(by_role: dict[str, Extract], evidence: Evidence | None) -> list[Line]:
    """Offer a shorter window where nothing is reported and no desk reaches the default."""
    if "reported" in by_role or evidence is None:
        return []
    most = int(known_before_last(evidence.pnl, "hypothetical", days_of_data(evidence.pnl)).max())
    window = next((w for w in WINDOWS if w <= most), None)
    if window is None or window == WINDOWS[0]:
        return []
    return [Line("window", Finding(window, f"the longest history has {most} days before its last"))]


def _notes(
    extracts: Sequence[Extract], by_role: dict[str, Extract], sections: dict[str, list[Line]], refusal: str
) -> list[str]:
    notes = ["A drafted study. Save it beside the files it names; check every line marked confirm or complete."]
    used = [id(extract) for extract in by_role.values()]
    lines = [*sections["data.columns"], *sections["data.reported_columns"]]
    layouts = [extract for extract in extracts if extract.layout]
    for extract in extracts:
        if id(extract) not in used and extract.column_a_desk:
            what = "one column a desk is not read: melt it to date, desk, value (one row a date x desk)"
            notes.append(f"{extract.table.name}: {what}")
        elif id(extract) not in used:
            notes.append(f"{extract.table.name} has no role here: not recognised, or another file has it")
        elif extract.role not in (*SIDE_ROLES, *POSITION_ROLES) and (left := rest(extract, lines)):
            notes.append(f"{extract.table.name}: columns not mapped: {', '.join(left)}")
    notes += [_difference(layouts[0], other) for other in layouts[1:] if _difference(layouts[0], other)]
    return notes + ([refusal] if refusal else [])


def _difference(one: Extract, other: Extract) -> str:
    """Say where two files are written differently: a study declares one layout for all."""
    keys = [key for key in _told(one) if key in _told(other) and one.layout[key].sure and other.layout[key].sure]
    found = [key for key in keys if one.layout[key].value != other.layout[key].value]
    if not found:
        return ""
    names = f"{one.table.name} and {other.table.name}"
    return f"{names} differ in {', '.join(found)}: a study declares one layout, so write one of them again"
