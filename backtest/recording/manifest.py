"""The manifest of a run: what went in, with which settings and versions, and how often a forecast fell back.

It names no path and no machine, so that the record of a run can be handed on.
"""

import hashlib
import json
import math
import platform
from collections import Counter
from collections.abc import Mapping, Sequence
from datetime import UTC, datetime
from importlib.metadata import PackageNotFoundError, version
from typing import Any

import numpy as np
import pandas as pd

from backtest.errors import RecordError
from backtest.records import FALLBACK, REPORTED_STATUS, Source

FORMAT = 2
"""Number of the run folder's format; a folder of another number is refused."""
PROGRAM = "tailmark"
_LIBRARIES = ("numpy", "scipy", "pandas", "numba")


def make_manifest(
    *,
    study: Mapping[str, Any],
    sources: Sequence[Source],
    seeds: Mapping[str, int],
    forecasts: pd.DataFrame,
    started: datetime,
    finished: datetime,
    extra: Mapping[str, Any],
) -> dict[str, object]:
    """Return the manifest of a run as a JSON-ready mapping.

    Arguments: ``study`` the settings as a JSON-ready mapping; ``seeds`` by purpose; ``forecasts`` the table of the
    run, from which fallbacks are counted; ``started, finished`` with time zone; ``extra`` what the run adds: as_of,
    models, desks, power. Raises RecordError where a time has no zone or ``extra`` repeats a key of the manifest.
    """
    settings = plain(dict(study))
    inputs = [{"role": s.role, "name": s.name, "sha256": s.sha256, "rows": s.rows} for s in sources]
    manifest: dict[str, object] = {
        "format": FORMAT,
        "program": PROGRAM,
        "version": _version(PROGRAM),
        "versions": {"python": platform.python_version()} | {name: _version(name) for name in _LIBRARIES},
        "platform": f"{platform.system()} {platform.machine()}",
        "run": run_id(inputs, settings),
        "seeds": dict(seeds),
        "study": settings,
        "inputs": inputs,
        "started": _utc(started),
        "finished": _utc(finished),
        "fallbacks": count_fallbacks(forecasts),
    }
    twice = sorted(manifest.keys() & extra.keys())
    if twice:
        raise RecordError("a manifest key is given twice", value=", ".join(twice))
    return manifest | {key: plain(value) for key, value in extra.items()}


def run_id(inputs: Sequence[Mapping[str, object]], settings: object) -> str:
    """Return the short name of a run: 12 hexadecimal digits of a hash over input hashes and settings, not over time."""
    text = json.dumps([[i["role"], i["sha256"]] for i in inputs] + [settings], sort_keys=True, allow_nan=False)
    return hashlib.sha256(text.encode()).hexdigest()[:12]


def count_fallbacks(forecasts: pd.DataFrame) -> dict[str, object]:
    """Count our forecasts (desk x model x day, levels together) and those made by a stated fallback.

    Returns forecasts, fallbacks, by_status (each status with its count) and by_model_and_desk (model, desk,
    forecasts, fallbacks, share), the rows with fallbacks only.
    """
    own = forecasts[forecasts["status"] != REPORTED_STATUS]
    days = own.drop_duplicates(["date", "desk", "model"])
    fell = own[is_fallback(own["status"])].drop_duplicates(["date", "desk", "model"])
    made = Counter(zip(days["model"], days["desk"], strict=True))
    lost = Counter(zip(fell["model"], fell["desk"], strict=True))
    rows = [
        {"model": m, "desk": d, "forecasts": made[m, d], "fallbacks": n, "share": n / made[m, d]}
        for (m, d), n in sorted(lost.items())
    ]
    statuses = own.drop_duplicates(["date", "desk", "model", "status"])["status"].value_counts()
    by_status = {str(status): int(n) for status, n in sorted(statuses.items())}
    return {"forecasts": len(days), "fallbacks": len(fell), "by_status": by_status, "by_model_and_desk": rows}


def is_fallback(status: pd.Series) -> pd.Series:
    """Say for each status whether one of its parts (separated by ; or ,) begins with the word for a fallback."""
    found = {
        s: any(part.strip().startswith(FALLBACK) for part in str(s).replace(",", ";").split(";"))
        for s in status.unique()
    }
    return status.map(found).astype(bool)


def manifest_text(manifest: Mapping[str, object]) -> str:
    """Return the manifest as JSON with sorted keys, ending in a newline."""
    return json.dumps(plain(dict(manifest)), sort_keys=True, indent=1, ensure_ascii=False, allow_nan=False) + "\n"


def plain(value: Any) -> Any:
    """Return a value as JSON knows it: numpy scalars as numbers, tuples as lists, what is not finite as null."""
    if isinstance(value, Mapping):
        return {str(k): plain(v) for k, v in value.items()}
    if isinstance(value, list | tuple):
        return [plain(v) for v in value]
    if isinstance(value, np.datetime64):
        return str(value.astype("datetime64[D]"))
    if isinstance(value, np.generic):
        return plain(value.item())
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value.isoformat() if hasattr(value, "isoformat") else value


def _version(distribution: str) -> str:
    try:
        return version(distribution)
    except PackageNotFoundError:  # run from a checkout that was never installed
        return "not installed"


def _utc(time: datetime) -> str:
    if time.tzinfo is None:
        raise RecordError("a time of the run has no time zone", value=time.isoformat())
    return time.astimezone(UTC).strftime("%Y-%m-%dT%H:%M:%SZ")
