"""The forms of the study file: its keys, types, ranges and defaults. ``study`` reads a file against them."""

import datetime as dt
from pathlib import Path, PurePosixPath
from typing import Annotated, Any, Literal

from pydantic import AfterValidator, BaseModel, ConfigDict, Field, model_validator


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


class Form(BaseModel):
    """A table of the study file: unknown keys are refused, nothing changes once read."""

    model_config = ConfigDict(extra="forbid", frozen=True, populate_by_name=True, strict=False)


class _Pair(Form):
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


class Criteria(Form):
    """What "fit" means in a house: limits on sizes, and results that are required. The values are house defaults.

    ``..._multiple_at_most``: the multiple of the reported VaR or ES that would have sufficed, by the lower end of its
    interval. ``exceptions_zone``: the worst zone of the dated rule that is accepted. ``clustering``: "no evidence"
    asks that no test of when exceptions fall finds them clustered or dependent on the size of VaR, "any" asks nothing.
    ``minimum_days``: below it nothing is judged.
    """

    var_multiple_at_most: float = Field(default=1.2, gt=0)
    es_multiple_at_most: float = Field(default=1.2, gt=0)
    exceptions_zone: Literal["green", "amber", "red"] = "green"
    clustering: Literal["no evidence", "any"] = "no evidence"
    minimum_days: int = Field(default=250, ge=1)


class Review(Form):
    """The reported model under review, the spans it is judged on, and the criteria (None: house defaults)."""

    subject: str | None = None
    firm: str | None = None
    as_of: dt.date | None = None
    days: Annotated[tuple[Span, ...], AfterValidator(_each_once)] = (250, "all")
    rules: str | None = None
    previous: FilePath | None = None
    criteria: Criteria | None = None
    method: tuple[Method, ...] = ()

    @model_validator(mode="after")
    def _methods_in_order(self) -> "Review":
        starts = [m.since for m in self.method]
        if starts != sorted(set(starts)):
            raise ValueError("[[review.method]] blocks must be in order of their 'from' dates, each date once")
        return self


class LevelColumn(Form):
    """A column of a wide extract that holds one measure at one level."""

    column: str
    level: Level


class Columns(Form):
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


class Data(Form):
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


class Forecast(Form):
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


class Judge(Form):
    """Which tests are asked, and how finely their laws are simulated.

    ``lagged_hits``: of the dynamic quantile test. ``estimation_risk``: judge also whole histories simulated from each
    model that is a law, forecast anew day by day: minutes a desk; replicates are kept beside the study.
    """

    tests: Literal["default"] | tuple[str, ...] = "default"
    significance: float = Field(default=0.05, gt=0, lt=0.5)
    simulations: int = Field(default=9999, ge=99)
    lagged_hits: Literal[1, 4] = 1
    estimation_risk: bool = False


class Study(Form):
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
