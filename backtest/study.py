"""The study file: one TOML file says what is reviewed, where the data lie and how the extract is written.

Here its form is checked: keys, types, ranges, paths. Whether a model, test or rule of that name exists is asked by
the room that owns the name. Unknown keys are refused with the near miss; nothing is guessed.
"""

import datetime as dt
import tomllib
from pathlib import Path, PurePosixPath
from typing import Annotated, Any, Literal

from pydantic import AfterValidator, BaseModel, ConfigDict, Field, ValidationError, model_validator

from backtest.errors import StudyError, near_miss


def _inside(path: str) -> str:
    if "\0" in path:
        raise ValueError("a path holds no NUL character")
    pure = PurePosixPath(path.replace("\\", "/"))
    if pure.is_absolute() or ".." in pure.parts or ":" in path:
        raise ValueError("paths are relative to the study file and stay inside its folder")
    return path


def _one_character(text: str) -> str:
    if len(text) != 1:
        raise ValueError("must be one character")
    return text


def _each_once(items: tuple[Any, ...]) -> tuple[Any, ...]:
    if len(set(items)) < len(items):
        raise ValueError(f"a value stands twice in {list(items)}")
    return items


Span = Annotated[int, Field(ge=20)] | Literal["all"]
Level = Annotated[float, Field(gt=0.5, lt=1.0)]
FilePath = Annotated[str, AfterValidator(_inside), Field(min_length=1)]
Character = Annotated[str, AfterValidator(_one_character)]


class _Form(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True, populate_by_name=True, strict=False)


class _Pair(_Form):
    """A filter and a tail with their options, as every block that describes a model writes them."""

    filter: str = "none"
    tail: str = "empirical"
    decay: float | None = Field(default=None, gt=0, lt=1)
    mean: str | None = None
    innovations: str | None = None
    start: str | None = None
    age_decay: float | None = Field(default=None, gt=0, lt=1)
    tail_share: float | None = Field(default=None, gt=0, lt=0.5)


class Method(_Pair):
    """How the reported model works from a date on, in the model grammar, so that it can be performed again."""

    since: dt.date = Field(alias="from")
    window: int = Field(ge=50)


class Review(_Form):
    """The reported model under review and the spans it is judged on."""

    subject: str | None = None
    firm: str | None = None
    as_of: dt.date | None = None
    days: Annotated[tuple[Span, ...], AfterValidator(_each_once)] = (250, "all")
    rules: str | None = None
    method: tuple[Method, ...] = ()

    @model_validator(mode="after")
    def _methods_in_order(self) -> "Review":
        starts = [m.since for m in self.method]
        if starts != sorted(set(starts)):
            raise ValueError("[[review.method]] blocks must be in order of their 'from' dates, each date once")
        return self


class LevelColumn(_Form):
    """A column of a wide extract that holds one measure at one level."""

    column: str
    level: Level


class Columns(_Form):
    """Names in the extract where they differ from ours; a wide file maps a column to a measure and a level."""

    date: str = "date"
    desk: str = "desk"
    hypothetical: str = "hypothetical"
    actual: str = "actual"
    risk_theoretical: str = "risk_theoretical"
    risk_theoretical_aligned: str = "risk_theoretical_aligned"
    currency: str = "currency"
    known_on: str = "known_on"
    flag: str = "flag"
    model: str = "model"
    level: str = "level"
    var: str | tuple[LevelColumn, ...] = "var"
    es: str | tuple[LevelColumn, ...] = "es"
    sigma: str = "sigma"
    pit: str = "pit"


class Data(_Form):
    """Where the tables lie and how they are written. ``reported_columns`` overrides ``columns`` for that file.

    Current positions under past moves come from ``vectors`` (``date, desk, scenario, pnl``) or, for linear books, from
    ``factors`` (``date, factor, return``) and ``exposures`` (``date, desk, factor, amount``): the P&L of a scenario is
    the sum of amount x return, profit positive. ``date`` of vectors and exposures follows ``var_date``; a scenario is
    a past day, whose market move is applied to the positions of ``date``.
    """

    pnl: FilePath
    reported: FilePath | None = None
    desks: FilePath | None = None
    changes: FilePath | None = None
    calendar: FilePath | None = None
    vectors: FilePath | None = None
    factors: FilePath | None = None
    exposures: FilePath | None = None
    currency: str = "EUR"
    var_date: Literal["target", "as-of"] = "target"
    pnl_sign: Literal["profit-positive", "loss-positive"] = "profit-positive"
    var_sign: Literal["positive", "negative"] = "positive"
    separator: Character = ","
    decimal: Literal[".", ","] = "."
    encoding: str = "utf-8"
    date_format: str = "%Y-%m-%d"
    columns: Columns = Columns()
    reported_columns: Columns | None = None

    @model_validator(mode="after")
    def _separators_differ(self) -> "Data":
        if self.separator == self.decimal:
            raise ValueError("separator and decimal cannot be the same character")
        return self

    @model_validator(mode="after")
    def _one_kind_of_vectors(self) -> "Data":
        if (self.factors is None) != (self.exposures is None):
            raise ValueError("factors and exposures go together: vectors are built from both")
        if self.vectors is not None and self.factors is not None:
            raise ValueError("vectors are supplied or built from factors and exposures, not both")
        return self


class ModelSettings(_Pair):
    """A pair of filter and tail, named by the user; names are resolved by the model grammar."""

    name: str = Field(min_length=1)
    gpd_fit: str | None = None
    window: int | None = Field(default=None, ge=50)
    recalibrate_days: int | None = Field(default=None, ge=1)


class Forecast(_Form):
    """Which challengers are run, on which past: P&L as it came, or (vectors) each day's positions under past moves.

    ``recalibrate_days``: the days on which parameters are estimated anew lie on a fixed grid, so that a later cut-off
    moves none of them: weekdays are counted from a fixed date, every k-th recalibrates, and so does the first of
    each block of 256.
    """

    window: int = Field(default=1000, ge=50)
    recalibrate_days: int = Field(default=1, ge=1)
    levels: Annotated[tuple[Level, ...], AfterValidator(_each_once)] = Field(default=(0.975, 0.99), min_length=1)
    learn_from: Literal["hypothetical", "actual", "vectors"] = "hypothetical"
    fallback_share: float = Field(default=0.01, ge=0, le=1)
    horizons: tuple[Annotated[int, Field(ge=1, le=250)], ...] = (1,)
    bands: Literal["delta", "bootstrap", "none"] = "delta"
    every_start: bool = False
    models: tuple[str, ...] = ("historical", "filtered-historical", "unconditional-evt", "conditional-evt")
    model: tuple[ModelSettings, ...] = ()


class Judge(_Form):
    """Which tests are asked, and how finely their laws are simulated."""

    tests: Literal["default"] | tuple[str, ...] = "default"
    significance: float = Field(default=0.05, gt=0, lt=0.5)
    simulations: int = Field(default=9999, ge=99)


class Study(_Form):
    """A study as read: every key of the file, with defaults filled in, and the file it came from."""

    title: str = "Market-risk model review"
    seed: int = Field(default=20260101, ge=0)
    review: Review = Review()
    data: Data
    forecast: Forecast = Forecast()
    judge: Judge = Judge()
    path: Path = Field(default=Path("study.toml"), exclude=True)

    @property
    def folder(self) -> Path:
        """The folder that the study's paths are relative to."""
        return self.path.parent


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
        forms = [a for a in _flatten(field.annotation) if isinstance(a, type) and issubclass(a, _Form)]
        form = forms[0]
    return {f.alias or n for n, f in form.model_fields.items()} - {"path"}


def _flatten(annotation: Any) -> list[Any]:
    parts = getattr(annotation, "__args__", ())
    return [annotation] + [inner for part in parts for inner in _flatten(part)]
