"""The model confidence set: which models of a desk may be the best, all taken together."""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
import numpy.typing as npt

from backtest.judging.answers import Answer, SetTest, Settings
from backtest.judging.nulls import generator
from backtest.judging.ranking import mean_difference
from backtest.judging.samples import Sample
from backtest.judging.scores import score_together

Floats = npt.NDArray[np.float64]

RESAMPLES = 1000
"""Bootstrap resamples at most, whatever the number of simulations: each takes all models of a desk through T days."""
FEWEST_DAYS = 100
"""Shared days below which blocks are too few to be resampled: common practice, no source."""
_SAME = 1e-9


def block_length(days: int) -> int:
    """Return the mean block length of the stationary bootstrap: the root of T rounded up, never below T^(1/3)."""
    return int(np.ceil(np.sqrt(days)))


def membership(scores: Floats, resamples: int, rng: np.random.Generator) -> Floats:
    """Return each model's p of belonging to the set of the best: float64[M], one of them 1.

    scores float64[T, M], lower is better, no two columns a constant apart. Range statistic, stationary bootstrap; p =
    (1 + #{resample beyond})/(resamples + 1), running maximum along the elimination. Source: Hansen, Lunde and Nason
    (2011), Econometrica 79, computed by arch.bootstrap.MCS.
    """
    from arch.bootstrap import MCS  # heavy: loaded only where this test is asked for

    found = MCS(scores, 0.05, resamples, block_length(len(scores)), "R", "stationary", seed=rng)
    found.compute()
    shares = found.pvalues["Pvalue"].sort_index().to_numpy()
    return np.asarray((1.0 + np.round(shares * resamples)) / (resamples + 1.0))


def _confidence_set(samples: Sequence[Sample], settings: Settings) -> list[Answer]:
    days, models = samples[0].days, len(samples)
    lacking = "needs a second model" if models < 2 else f"needs {FEWEST_DAYS} shared days, has {days}"
    if models < 2 or days < FEWEST_DAYS:
        return [Answer(used=sample, missing=lacking) for sample in samples]
    scored = score_together(samples)
    scores = np.column_stack(scored.scores)
    first_alike = [next(j for j in range(i + 1) if _alike(scores[:, i], scores[:, j])) for i in range(models)]
    distinct = sorted(set(first_alike))
    answers = [_sized(samples, scores, first_alike, place, scored.name) for place in range(models)]
    fixed = _a_constant_apart(scores, distinct)
    if fixed or len(distinct) < 2:
        which = " and ".join(samples[place].model for place in fixed or (0, 1))
        return [replace(a, missing=f"needs score differences that vary: {which}") for a in answers]
    resamples = min(settings.simulations, RESAMPLES)
    rng = generator(settings.seed, "model confidence set", samples[0].level, days)
    p_of = dict(zip(distinct, membership(scores[:, distinct], resamples, rng), strict=True))
    note = (
        f"{models} models; range statistic, {resamples} resamples in blocks of {block_length(days)} days on average",
        "a large set means that the days cannot tell, not that the models are alike", *(n for n in [scored.note] if n),
    )  # fmt: skip
    return [
        _answered(answer, float(p_of[first]), settings, (*note, *_twin(samples, place, first)))
        for place, (answer, first) in enumerate(zip(answers, first_alike, strict=True))
    ]


def _alike(one: Floats, other: Floats) -> bool:
    return bool(np.max(np.abs(one - other)) <= _SAME * np.max(np.abs(one)))


def _a_constant_apart(scores: Floats, columns: list[int]) -> tuple[int, ...]:
    """Return two columns whose difference is the same every day, if there are any: no law can be resampled for them."""
    for place, i in enumerate(columns):
        for j in columns[:place]:
            apart = scores[:, i] - scores[:, j]
            if np.ptp(apart) <= _SAME * np.max(np.abs(apart)):
                return j, i
    return ()


def _sized(samples: Sequence[Sample], scores: Floats, first_alike: list[int], place: int, name: str) -> Answer:
    """Return the distance to the best of the other models, which says more than a distance to a poor average."""
    others = [j for j, first in enumerate(first_alike) if first != first_alike[place]]
    if not others:
        return Answer(used=samples[place], evidence="not-best")
    rival = min(others, key=lambda j: float(scores[:, j].mean()))
    size = mean_difference(scores[:, place] - scores[:, rival])
    unit = "in the unit of the P&L" if name == "tick" else "no unit"
    said = f"size: mean {name} score less that of the best other model, {samples[rival].model} ({unit}); its interval "
    return Answer(
        used=samples[place], estimate=size.mean, low=size.low, high=size.high, evidence="not-best",
        notes=(said + "does not allow for the choice of that model",),
    )  # fmt: skip


def _answered(answer: Answer, p_value: float, settings: Settings, notes: tuple[str, ...]) -> Answer:
    within = p_value > settings.significance
    words = f"{'in' if within else 'left out of'} the {100 * (1 - settings.significance):g}% set of best models"
    return replace(answer, p_value=p_value, law="simulated", direction=words, notes=answer.notes + notes)


def _twin(samples: Sequence[Sample], place: int, first: int) -> tuple[str, ...]:
    return (f"same scores as {samples[first].model}: they stand in the set as one",) * (place != first)


TESTS = (
    SetTest("confidence-set", "which is better", "Hansen, Lunde and Nason (2011), Econometrica 79", _confidence_set),
)
