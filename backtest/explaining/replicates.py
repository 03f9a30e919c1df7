"""Replicates that were made before: kept in one file for each law, so that a stopped or longer simulation goes on.

A file is named by everything that determines a replicate. What the program itself computes may change too; whoever
takes replicates up again therefore makes the first of them once more and drops all if it is not the same.
"""

import hashlib
from collections.abc import Sequence
from pathlib import Path

import numpy as np

from backtest.errors import RecordError


def fingerprint(parts: Sequence[object]) -> str:
    """Return a name of 32 letters for what determines replicates: arrays count by their bytes, the rest by its repr."""
    digest = hashlib.sha256()
    for part in parts:
        digest.update(part.tobytes() if isinstance(part, np.ndarray) else repr(part).encode())
        digest.update(b"\0")
    return digest.hexdigest()[:32]


def kept(folder: Path | None, name: str, width: int) -> np.ndarray:
    """Return the replicates (B, width) kept under a name, none where there is no file.

    Raises RecordError for a file that does not hold such replicates.
    """
    path = None if folder is None else folder / f"{name}.npy"
    if path is None or not path.exists():
        return np.empty((0, width))
    try:
        values = np.load(path, allow_pickle=False)
    except (ValueError, EOFError, OSError) as error:
        raise _unreadable(path, str(error)) from error
    if values.ndim != 2 or values.shape[1] != width or values.dtype != np.float64:
        raise _unreadable(path, f"{values.dtype} {values.shape}")
    return np.asarray(values)


def keep(folder: Path | None, name: str, values: np.ndarray) -> None:
    """Keep replicates (B, width) under a name, in the place of those kept before; without a folder do nothing."""
    if folder is None:
        return
    folder.mkdir(parents=True, exist_ok=True)
    # written beside it and then moved, so that a run that is stopped leaves the old file or the new one
    fresh = folder / f"{name}.part.npy"
    np.save(fresh, values, allow_pickle=False)
    fresh.replace(folder / f"{name}.npy")


def _unreadable(path: Path, value: str) -> RecordError:
    rule = "a table of numbers, one row a replicate"
    return RecordError(
        "kept replicates cannot be read", rule=rule, value=value, place=str(path), remedy="Delete the file."
    )
