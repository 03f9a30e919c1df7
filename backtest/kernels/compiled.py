"""The only place that calls numba's jit and chooses where compiled kernels are kept.

Compilation happens once per machine. The cache folder carries the program's version and a hash of all kernel sources,
numba's version and the CPU: numba alone would serve stale code when a kernel's callee in another file changes. Where
no folder is writable, kernels are compiled anew in each process and ``cache_folder()`` is None.
"""

import hashlib
import os
import stat
import sys
import tempfile
from collections.abc import Callable
from pathlib import Path
from typing import Any, TypeVar, cast

import llvmlite.binding
import numba

Function = TypeVar("Function", bound=Callable[..., Any])

_MATHS = {"contract", "arcp", "nsz"}
"""Fused multiply-add and reciprocals; never "reassoc", which reorders the variance recursion and slows it."""


def _fingerprint() -> str:
    digest = hashlib.sha256()
    for source in sorted(Path(__file__).parent.glob("*.py")):
        digest.update(source.name.encode() + source.read_bytes())
    digest.update(f"{numba.__version__} {llvmlite.binding.get_host_cpu_name()} {sys.version_info[:2]}".encode())
    return digest.hexdigest()[:16]


def _candidates() -> list[Path]:
    if os.environ.get("TAILMARK_CACHE"):
        return [Path(os.environ["TAILMARK_CACHE"])]
    home = os.environ.get("LOCALAPPDATA") if os.name == "nt" else os.environ.get("XDG_CACHE_HOME")
    base = Path(home) if home else Path("~/.cache").expanduser()
    user = str(os.getuid()) if hasattr(os, "getuid") else "user"
    return [base / "tailmark", Path(tempfile.gettempdir()) / f"tailmark-{user}"]


def _usable(folder: Path) -> bool:
    """Tell whether the folder is ours and writable: cached code is loaded from it, so nobody else may write there."""
    try:
        folder.mkdir(parents=True, exist_ok=True, mode=0o700)
        if hasattr(os, "getuid"):
            state = folder.stat()
            if state.st_uid != os.getuid() or state.st_mode & stat.S_IWOTH:
                return False
        with tempfile.TemporaryFile(dir=folder):
            return True
    except OSError:
        return False


def _choose() -> Path | None:
    for base in _candidates():
        folder = base / f"kernels-{_fingerprint()}"
        if _usable(base) and _usable(folder):
            return folder
    return None


_FOLDER = _choose()


def cache_folder() -> Path | None:
    """Return the folder that holds compiled kernels, or None where none is writable."""
    return _FOLDER


def is_warm() -> bool:
    """Tell whether this machine has compiled these kernels before."""
    return _FOLDER is not None and any(_FOLDER.rglob("*.nbi"))


def compiled(function: Function) -> Function:
    """Compile a kernel on first use (nopython, without the interpreter lock), cached where a folder is writable."""
    return _jit(function, {"no_cfunc_wrapper": True})


def in_place(function: Function) -> Function:
    """Compile a kernel that only writes into what it is handed: no new array, no array returned.

    References to arrays are then not counted: an atomic operation each, and code to compile around it.
    """
    return _jit(function, {"_nrt": False, "no_cfunc_wrapper": True})


def inner(function: Function) -> Function:
    """Compile a kernel that only kernels call, ``in_place``, without the door from Python, which costs as much."""
    return _jit(function, {"_nrt": False, "no_cpython_wrapper": True, "no_cfunc_wrapper": True})


def _jit(function: Function, options: dict[str, bool]) -> Function:
    config: Any = numba.config
    kept = config.CACHE_DIR
    config.CACHE_DIR = str(_FOLDER or "")
    try:
        jit: Any = numba.njit
        made: Any = jit(nogil=True, fastmath=_MATHS, error_model="numpy", cache=_FOLDER is not None, **options)(
            function
        )
    finally:
        config.CACHE_DIR = kept
    return cast(Function, made)
