"""The study file: one TOML file says what is reviewed, where the data lie and how the extract is written.

Here its form is checked: keys, types, ranges, paths. Whether a model, test or rule of that name exists is asked by
the room that owns the name. Unknown keys are refused with the near miss; nothing is guessed.
"""

import tomllib
from pathlib import Path
from typing import Any

from pydantic import ValidationError

from backtest.errors import StudyError, near_miss
from backtest.study_form import Form, Study


def read_study(path: str | Path) -> Study:
    """Read a study file and check its form.

    Returns the frozen Study. Raises StudyError (file, key, value, remedy) where the file cannot be read, is no TOML,
    has an unknown key, a value out of range or a path outside its folder.
    """
    if not isinstance(path, str | Path) or "\0" in str(path):
        remedy = "Hand over the path of a TOML file as text or pathlib.Path."
        raise StudyError("this is no path of a study file", value=repr(path), remedy=remedy)
    path = Path(path)
    try:
        table = tomllib.loads(path.read_bytes().decode("utf-8-sig"))
    except OSError as error:
        remedy = _studies_beside(path) if isinstance(error, FileNotFoundError) else ""
        raise StudyError(
            "the study file cannot be read", value=error.strerror, place=str(path), remedy=remedy
        ) from None
    except RecursionError:
        raise StudyError("the study file is nested too deeply", place=str(path), remedy="Write it flat.") from None
    except ValueError as error:  # not UTF-8, not TOML, or a number too long to be read
        raise StudyError(f"the study file is not valid TOML: {error}", place=str(path)) from None
    if "path" in table:
        raise StudyError("unknown key 'path'", place=str(path), remedy=near_miss("path", _known_keys(())))
    try:
        return Study.model_validate({**table, "path": path})
    except ValidationError as error:
        raise _explain(error, path) from None


def _studies_beside(path: Path) -> str:
    found = [other.name for other in path.parent.glob("*.toml")] if path.parent.is_dir() else []
    return near_miss(path.name, found) if found else f"There is no TOML file in {str(path.parent)!r}."


_PLAIN = {"tuple_type": "a list is needed", "model_type": "a table is needed", "dict_type": "a table is needed"}
"""Words for what pydantic says in terms of Python, by its type of error."""
_UNION_NAMES = {"str", "constrained-int", "literal['default']", "literal['all']"}
"""Parts of pydantic's address of an error that name a branch of a union, not a key of the file."""


def _explain(error: ValidationError, path: Path) -> StudyError:
    first = max(error.errors(), key=lambda e: len(e["loc"]))
    where = tuple(part for part in first["loc"] if part not in _UNION_NAMES and not str(part).startswith("tuple["))
    key = ".".join(str(part) for part in where)
    more = len(error.errors()) - 1
    tail = f" (and {more} more)" if more and first["type"] != "extra_forbidden" else ""
    if first["type"] == "extra_forbidden":
        return StudyError(
            f"unknown key {key!r}", place=str(path), remedy=near_miss(str(where[-1]), _known_keys(where[:-1]))
        )
    if first["type"] == "missing":
        return StudyError(f"required key {key!r} is missing", place=str(path), remedy="Add it to the study file.")
    message = _PLAIN.get(first["type"], first["msg"].removeprefix("Value error, "))
    value = None if isinstance(first["input"], dict | tuple | list) else first["input"]
    remedy = "A level is a confidence such as 0.99, never 1 or 99." if "level" in key else ""
    return StudyError(f"{key or 'study'}: {message}{tail}", place=str(path), value=value, remedy=remedy)


def _known_keys(where: tuple[Any, ...]) -> set[str]:
    form: Any = Study
    for part in where:
        if isinstance(part, int):
            continue
        field = next(f for n, f in form.model_fields.items() if part in (n, f.alias))
        forms = [a for a in _flatten(field.annotation) if isinstance(a, type) and issubclass(a, Form)]
        form = forms[0]
    return {f.alias or n for n, f in form.model_fields.items()} - {"path"}


def _flatten(annotation: Any) -> list[Any]:
    parts = getattr(annotation, "__args__", ())
    return [annotation] + [inner for part in parts for inner in _flatten(part)]
