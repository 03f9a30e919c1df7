"""The run folder: written whole or not at all, never overwritten, read back as it was written.

A folder is built beside its place under a name of its own, flushed to disk, and renamed. The manifest holds the
SHA-256 of every file, so that a garbled or edited file is refused, not reported on.
"""

import hashlib
import json
import os
import secrets
import shutil
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any, cast

import pandas as pd

from backtest.errors import RecordError
from backtest.recording.cells import read_csv, write_csv
from backtest.recording.manifest import FORMAT, PROGRAM, manifest_text
from backtest.records import Record

MANIFEST = "manifest.json"
TABLES = {
    "pnl": "pnl.parquet",
    "forecasts": "forecasts.parquet",
    "fits": "fits.parquet",
    "results": "results.csv",
    "criteria": "criteria.csv",
    "exceptions": "exceptions.csv",
    "bridge": "bridge.csv",
    "four_cells": "four_cells.csv",
    "scoreboard": "scoreboard.csv",
    "estimation_risk": "estimation_risk.csv",
    "paths": "paths.parquet",
    "remarks": "data_remarks.csv",
}
"""Each table of a Record and the file that holds it."""
_RUN_AGAIN = "Restore the file from a copy, or run the study again."


def check_place(wanted: str | Path) -> Path:
    """Return the folder asked for as a path, after a trial that something can be made there; leaves nothing.

    Raises RecordError for an empty path, one with a NUL character, and where the place cannot be written.
    """
    remedy = "Choose another place with --out (in Python: out=)."
    if not isinstance(wanted, str | Path) or not str(wanted).strip() or "\0" in str(wanted):
        raise RecordError("this is no path of a run folder", value=repr(wanted), remedy=remedy)
    place = Path(wanted)
    place = place if place.name not in ("", "..") else place.resolve()
    nearest = next((folder for folder in place.parents if os.path.lexists(folder)), place.parent)
    trial = _sibling(nearest / place.name)
    try:
        trial.mkdir()
        trial.rmdir()
    except OSError as error:
        what = "the run folder cannot be written"
        raise RecordError(what, value=error.strerror, place=str(place), remedy=remedy) from None
    return place


def write_record(record: Record, wanted: Path) -> Path:
    """Write a run folder at ``wanted``, or at ``wanted-2``, ``wanted-3`` ... where that is taken; return the folder.

    Raises RecordError where the place cannot be written; nothing half-written is left then.
    """
    wanted = wanted if wanted.name not in ("", "..") else wanted.resolve()
    with _built_beside(record, wanted) as built:
        return _take_place(built, wanted)


def replace_folder(record: Record, folder: Path) -> Path:
    """Write a run folder at ``folder`` in place of the run that is there, if any; return the folder.

    Raises RecordError where what is there is not a run folder of this program: it is left alone.
    """
    if os.path.lexists(folder) and not is_run_folder(folder):
        remedy = "Move it away or choose another place."
        raise RecordError("only a run folder can be replaced, and this is none", place=str(folder), remedy=remedy)
    with _built_beside(record, folder) as built:
        old = _sibling(folder)
        existed = folder.exists()
        if existed:
            folder.rename(old)
        try:
            built.rename(folder)
        except OSError:
            if existed:
                old.rename(folder)
            raise
    shutil.rmtree(old, ignore_errors=True)
    return folder


def is_run_folder(folder: Path) -> bool:
    """Say whether a folder holds a manifest written by this program."""
    try:
        manifest = json.loads((folder / MANIFEST).read_bytes())
    except (OSError, ValueError):
        return False
    return not folder.is_symlink() and isinstance(manifest, dict) and manifest.get("program") == PROGRAM


def write_document(folder: Path, name: str, text: str) -> Path:
    """Put a rendered document into a run folder, whole or not at all; return its path.

    Raises RecordError where ``folder`` is no run folder, ``name`` is a path or a file of the record, or the disk fails.
    """
    if Path(name).name != name or name in {MANIFEST, *TABLES.values()}:
        raise RecordError("a document needs a plain file name of its own", value=name, place=str(folder))
    if not is_run_folder(folder):
        raise RecordError("this is no run folder", place=str(folder), remedy="Name the folder that a run printed.")
    path = folder / name
    part = _sibling(path)
    try:
        _write_bytes(part, text.encode("utf-8"))
        part.replace(path)
    except OSError as error:
        part.unlink(missing_ok=True)
        raise RecordError("the document cannot be written", value=error.strerror, place=str(path)) from error
    return path


def read_record(folder: Path) -> Record:
    """Read a run folder.

    Raises RecordError (file, remedy) where it is none, has another format number, or a file is missing or not the
    one that the run wrote.
    """
    manifest = read_manifest(folder)
    files = cast(dict[str, dict[str, Any]], manifest["files"])
    tables = {table: _read_table(folder / name, files[name]) for table, name in TABLES.items()}
    return Record(manifest=manifest, **tables)


def read_manifest(folder: Path) -> dict[str, Any]:
    """Read the manifest of a run folder; raises RecordError as ``read_record`` does."""
    place = folder / MANIFEST
    try:
        manifest = json.loads(place.read_bytes())
    except OSError as error:
        remedy = "Name the folder that a run printed."
        raise RecordError("no manifest can be read", value=error.strerror, place=str(place), remedy=remedy) from None
    except ValueError:
        raise RecordError("the manifest is garbled", place=str(place), remedy=_RUN_AGAIN) from None
    if not isinstance(manifest, dict) or manifest.get("program") != PROGRAM:
        raise RecordError("the manifest is not one of this program", place=str(place))
    if manifest.get("format") != FORMAT:
        remedy = f"This version reads format {FORMAT}: use the version that wrote it, or run the study again."
        raise RecordError("unknown format number", value=manifest.get("format"), place=str(place), remedy=remedy)
    files = manifest.get("files")
    absent = sorted(set(TABLES.values()) - set(files if isinstance(files, dict) else ()))
    if absent:
        raise RecordError(f"the manifest does not list {', '.join(absent)}", place=str(place), remedy=_RUN_AGAIN)
    return manifest


def _read_table(path: Path, listed: dict[str, Any]) -> pd.DataFrame:
    try:
        found = _sha256(path)
    except OSError as error:
        raise RecordError("file cannot be read", value=error.strerror, place=str(path), remedy=_RUN_AGAIN) from None
    if found != listed.get("sha256"):
        what = "file is not the one that the run wrote (its SHA-256 differs from the manifest's)"
        raise RecordError(what, place=str(path), remedy=_RUN_AGAIN)
    return read_csv(path, dict(listed["columns"])) if path.suffix == ".csv" else pd.read_parquet(path)


@contextmanager
def _built_beside(record: Record, wanted: Path) -> Iterator[Path]:
    part = _sibling(wanted)
    try:
        wanted.parent.mkdir(parents=True, exist_ok=True)
        part.mkdir()
        _fill(record, part)
        yield part
        _flush(wanted.parent)
    except OSError as error:
        raise RecordError("the run folder cannot be written", value=str(error.strerror), place=str(wanted)) from error
    finally:
        shutil.rmtree(part, ignore_errors=True)


def _fill(record: Record, folder: Path) -> None:
    files = {}
    for table, name in TABLES.items():
        frame = getattr(record, table)
        entry: dict[str, object] = {"rows": len(frame)}
        if name.endswith(".csv"):
            entry["columns"] = [*write_csv(folder / name, frame).items()]  # a list: JSON keys are sorted, columns not
        else:
            frame.to_parquet(folder / name, index=False)
        _flush(folder / name)
        files[name] = entry | {"sha256": _sha256(folder / name)}
    text = manifest_text(record.manifest | {"program": PROGRAM, "format": FORMAT, "files": files})
    _write_bytes(folder / MANIFEST, text.encode("utf-8"))
    _flush(folder)


def _take_place(built: Path, wanted: Path) -> Path:
    number = 1
    while True:
        place = wanted if number == 1 else wanted.with_name(f"{wanted.name}-{number}")
        if not os.path.lexists(place) and _renamed(built.rename, place):
            return place
        number += 1


def _renamed(rename: Callable[[Path], object], place: Path) -> bool:
    try:
        rename(place)
    except OSError:
        if os.path.lexists(place):  # somebody else took the place since we looked
            return False
        raise
    return True


def _sibling(path: Path) -> Path:
    return path.with_name(f".{path.name[:80]}.{secrets.token_hex(4)}.part")


def _write_bytes(path: Path, content: bytes) -> None:
    path.write_bytes(content)
    _flush(path)


def _flush(path: Path) -> None:
    """Ask the disk to keep a file or folder; Windows cannot open folders, and needs it less."""
    if path.is_dir() and os.name == "nt":
        return
    handle = os.open(path, os.O_RDONLY if path.is_dir() else os.O_RDWR)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)


def _sha256(path: Path) -> str:
    with path.open("rb") as file:
        return hashlib.file_digest(file, "sha256").hexdigest()
