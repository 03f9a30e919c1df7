"""Estimation risk: what a test says of a model that is right, but whose parameters are estimated anew every day.

The usual law of a test takes the forecasts as given: a right model has independent exceptions with probability 1 -
level. A model that is right but estimated has not: with historical simulation, the j-th largest of W losses is exceeded
with probability j/(W + 1) whatever the losses' law, and since an exception raises VaR while it is in the window, the
count varies less than a binomial one. Here a model that is itself a law (see model_law), with the parameters of the
last day, generates whole histories; each is forecast by the same model, fits and all, and judged by the same
statistics. The share of replicates at least as extreme is the p under the refitted law. It is that of a parametric
bootstrap: it takes the last day's parameters for the true ones.

A replicate is the window and as many days after it as the longest sample has, on consecutive weekdays up to the last
target day; a sample of T days is judged on the last T of them. Random numbers depend on the seed, the length and the
number of the replicate: desks and models share them, and more replicates leave the earlier ones as they were. A
statistic that is not defined in a replicate, or whose history grew beyond all numbers, counts as extreme.
"""

import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
import numpy.typing as npt
import pandas as pd

from backtest.errors import StudyError, near_miss
from backtest.explaining.model_law import ModelLaw, model_law
from backtest.explaining.replicates import fingerprint, keep, kept
from backtest.forecasting.asked import Asked
from backtest.forecasting.engine import DeskHistory, forecast_group
from backtest.forecasting.models import Model
from backtest.judging import battery
from backtest.judging.answers import SampleTest, Settings
from backtest.judging.dependence import dynamic_quantile, observed_moments
from backtest.judging.es_samples import usable
from backtest.judging.nulls import generator, p_doubled, p_upper
from backtest.judging.pits import read_pits
from backtest.judging.samples import Sample
from backtest.judging.severity import z2
from backtest.records import ESTIMATION_RISK_COLUMNS

Floats = npt.NDArray[np.float64]

REPLICATIONS = 199
FEWEST_REPLICATIONS = 19
REFITTED = "refitted"
KEPT_AT_ONCE = 20
"""After how many replicates what was made is kept."""
_COUNT = "binomial"
_ALIKE = 1e-9


def _count(sample: Sample, _: Settings) -> float:
    return float(sample.exceptions)


def _dynamic_quantile(sample: Sample, settings: Settings) -> float:
    if sample.days < settings.lagged_hits + 2:
        return np.nan
    found = observed_moments(sample, settings.lagged_hits)
    return float(dynamic_quantile(found, sample.var, sample.level).sum())


def _es_zones(sample: Sample, _: Settings) -> float:
    pits = read_pits(sample)
    return np.nan if pits.missing else float(pits.depths.sum())


def _acerbi_szekely_2(sample: Sample, _: Settings) -> float:
    used, missing, _notes = usable(sample)
    return np.nan if missing else z2(used.losses, used.var, used.es, used.level)


@dataclass(frozen=True)
class _Asked:
    """A statistic and how its p is read from replicates (N) and the observed one."""

    statistic: Callable[[Sample, Settings], float]
    p: Callable[[Floats, float], float]


STATISTICS = {
    _COUNT: _Asked(_count, p_doubled),
    "dynamic-quantile": _Asked(_dynamic_quantile, p_upper),
    "es-zones": _Asked(_es_zones, p_doubled),
    "acerbi-szekely-2": _Asked(_acerbi_szekely_2, p_doubled),
}
"""The tests that can be asked, by their keys in the battery."""
TESTS = (_COUNT, "dynamic-quantile", "es-zones")
"""The tests that are asked where none are named."""


@dataclass(frozen=True)
class Refitted:
    """Statistics of replicated histories.

    values float64[B, C], a column for each of ``columns`` (level, days, test); seconds spent on those that were not
    kept from before, of which there are ``reused``.
    """

    columns: tuple[tuple[float, int, str], ...]
    values: Floats
    seconds: float
    reused: int

    def of(self, level: float, days: int, test: str) -> Floats:
        """Return the replicates of one statistic at one level on the last ``days`` days: float64[B]."""
        return np.asarray(self.values[:, self.columns.index((level, days, test))])


def say_nothing(text: str) -> None:
    """Show nothing."""


def estimation_risk(
    history: DeskHistory,
    samples: Sequence[Sample],
    models: Sequence[Model],
    settings: Settings,
    *,
    tests: Sequence[str] = TESTS,
    replications: int = REPLICATIONS,
    folder: Path | None = None,
    say: Callable[[str], None] = say_nothing,
) -> pd.DataFrame:
    """Return one row a sample and test (ESTIMATION_RISK_COLUMNS): its usual p and, where defined, the refitted one.

    ``samples``: of one desk, any models, P&L kinds, levels and spans; ``models``: those of ours that forecast them;
    ``folder``: where replicates are kept, and taken up again; ``say`` gets a line with the expected cost of each model
    before most of it is spent. ``seconds`` are those of the whole model. Raises StudyError for an unknown test or too
    few replications, RecordError for kept replicates that cannot be read.
    """
    _check(tests, replications)
    ours = {model.name: model for model in models}
    rows: list[dict[str, object]] = []
    for name in dict.fromkeys(sample.model for sample in samples):
        mine = [sample for sample in samples if sample.model == name]
        law, missing, found = None, "", None
        if any(sample.days for sample in mine):
            levels = np.array(sorted({sample.level for sample in mine}))
            law, missing = model_law(history, ours.get(name), levels)
        if law is not None:
            columns = _columns(mine, tests)
            found = simulate(history.desk, law, ours[name], columns, settings, replications, folder, say)
        rows += [_row(sample, test, settings, law, found, missing) for sample in mine for test in tests]
    return pd.DataFrame(rows, columns=list(ESTIMATION_RISK_COLUMNS))


def simulate(
    desk: str,
    law: ModelLaw,
    model: Model,
    columns: tuple[tuple[float, int, str], ...],
    settings: Settings,
    replications: int = REPLICATIONS,
    folder: Path | None = None,
    say: Callable[[str], None] = say_nothing,
) -> Refitted:
    """Return ``replications`` replicates of the statistics ``columns`` (level, days, test) under a model's own law."""
    days = max(column[1] for column in columns)
    name = _fingerprint(law, model, columns, settings)
    start = time.perf_counter()
    rows = [_replicate(0, law, model, columns, settings)]
    first = time.perf_counter() - start
    before = kept(folder, name, len(columns))
    same = len(before) > 0 and np.allclose(before[0], rows[0], _ALIKE, _ALIKE, equal_nan=True)
    reused = len(before) if same else 0
    rows += list(before[1:reused])
    left = max(replications - len(rows), 0)
    say(
        f"estimation risk, {desk}, {model.name}: {left} replicates of {model.window} + {days} days to make, about "
        f"{first * left:.0f} s (one took {first:.2g} s); kept from before: {reused}"
        + f", dropped, since the first comes out otherwise now: {len(before)}"
        * (len(before) > reused)
    )
    for number in range(len(rows), replications):
        rows.append(_replicate(number, law, model, columns, settings))
        if len(rows) % KEPT_AT_ONCE == 0 or len(rows) == replications:
            keep(folder, name, np.array(rows))
    return Refitted(columns, np.array(rows[:replications]), time.perf_counter() - start, min(reused, replications))


def _check(tests: Sequence[str], replications: int) -> None:
    for test in tests:
        if test not in STATISTICS:
            remedy = near_miss(test, STATISTICS)
            raise StudyError("no statistic of estimation risk", value=test, place="estimation risk", remedy=remedy)
    if replications < FEWEST_REPLICATIONS:
        rule = f"at least {FEWEST_REPLICATIONS}: the smallest p is 1/(replications + 1)"
        raise StudyError("too few replications", value=replications, place="estimation risk", rule=rule)


def _columns(samples: Sequence[Sample], tests: Sequence[str]) -> tuple[tuple[float, int, str], ...]:
    """Return which statistics replicates need: each level and number of days once, with the count and the tests."""
    places = sorted({(sample.level, sample.days) for sample in samples if sample.days})
    return tuple((*place, test) for place in places for test in dict.fromkeys((_COUNT, *tests)))


def _fingerprint(law: ModelLaw, model: Model, columns: tuple[tuple[float, int, str], ...], settings: Settings) -> str:
    drawn = law.innovations
    arrays = (law.motion, drawn.laws, drawn.places, drawn.heights, drawn.tail)
    return fingerprint(
        (*arrays, law.variance, str(law.day), replace(model, name=""), columns, settings.seed, settings.lagged_hits)
    )


def _replicate(
    number: int, law: ModelLaw, model: Model, columns: tuple[tuple[float, int, str], ...], settings: Settings
) -> list[float]:
    """Generate one history, forecast it by the model, and return the statistics ``columns``."""
    longest = max(days for _, days, _ in columns)
    # one history serves all levels, hence no level in its stream
    rng = generator(settings.seed, f"estimation risk, replicate {number}", 0.0, model.window + longest)
    losses = law.history(np.maximum(rng.random(model.window + longest), 2.0**-54))  # strictly between 0 and 1
    if not np.all(np.isfinite(losses)):
        return [np.nan] * len(columns)
    samples = replicated(losses, law.day, model, sorted({level for level, _, _ in columns}))
    last = {(level, days): samples[level].on(np.arange(longest - days, longest)) for level, days, _ in columns}
    return [STATISTICS[test].statistic(last[level, days], settings) for level, days, test in columns]


def replicated(losses: Floats, day: np.datetime64, model: Model, levels: Sequence[float]) -> dict[float, Sample]:
    """Forecast a history of losses (window + T) that ends on ``day`` and return, by level, T days of both."""
    length, days = len(losses), len(losses) - model.window
    dates = np.busday_offset(day, np.arange(1 - length, 1), roll="forward")
    known = pd.DataFrame({"date": dates, "known_on": dates, "loss": losses})
    history = DeskHistory("", known, dates, {"hypothetical": pd.Series(losses, index=dates)})
    table, _ = forecast_group(history, [model], levels, Asked(bands="none"))
    names = ("var", "es", "sigma", "shape", "pit_hypothetical")
    blocks = {name: table[name].to_numpy(dtype=np.float64).reshape(days, len(levels)) for name in names}
    return {
        level: Sample(
            "", model.name, "hypothetical", level, dates[-days:], losses[-days:], *(blocks[n][:, i] for n in names)
        )
        for i, level in enumerate(levels)
    }


def _row(
    sample: Sample, key: str, settings: Settings, law: ModelLaw | None, found: Refitted | None, missing: str
) -> dict[str, object]:
    test = battery.TESTS[key]
    assert isinstance(test, SampleTest)
    answer = test.judge(sample, settings)
    some, spread = sample.days > 0, sample.days * sample.nominal * sample.level
    row: dict[str, object] = {
        "desk": sample.desk, "model": sample.model, "level": sample.level, "pnl_kind": sample.kind,
        "from": str(sample.dates[0]) if some else "", "to": str(sample.dates[-1]) if some else "",
        "days": sample.days, "test": key, "statistic": answer.statistic, "p_value": answer.p_value,
        "usual_law": answer.law or "", "law": "", "binomial_mean": sample.days * sample.nominal,
        "binomial_sd": float(np.sqrt(spread)), "note": missing or answer.missing,
    }  # fmt: skip
    if law is None or found is None or not some:
        return row
    counts, null = found.of(sample.level, sample.days, _COUNT), found.of(sample.level, sample.days, key)
    row |= {
        "replications": len(null), "count_mean": float(counts.mean()), "count_sd": float(counts.std(ddof=1)),
        "seconds": found.seconds,
    }  # fmt: skip
    if answer.statistic is None:
        return row
    undefined = np.isnan(null)
    p_value = STATISTICS[key].p(np.where(undefined, answer.statistic, null), answer.statistic)
    return row | {"p_refitted": p_value, "law": REFITTED, "note": _note(law, found, int(undefined.sum()))}


def _note(law: ModelLaw, found: Refitted, undefined: int) -> str:
    parts = [f"parameters of {law.day}" + f" ({law.status})" * bool(law.status)]
    parts += [f"replicates kept from before: {found.reused}"] * (found.reused > 0)
    parts += [f"replicates without this statistic, counted as extreme: {undefined}"] * (undefined > 0)
    return "; ".join(parts)
