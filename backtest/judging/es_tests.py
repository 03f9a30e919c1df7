"""How deep: Acerbi and Szekely's first and third statistic, and their minimally biased one.

All are one-sided as published: negative means ES understated, p = P(Z* <= Z).

The law of Z1 is taken given which days are exceptions: Z1 speaks of the loss given an exception, so how many there were
is no evidence, and a law that mixed over their number would be too strict with few of them and too lenient with many.

Z3 needs each day's quantiles beyond VaR and a little below it. They are rebuilt from VaR, ES and the GPD shape, where
the forecast has none from an assumed one; below VaR the same GPD is continued. Observed and simulated PITs pass through
the same quantiles, so that the law holds for uniform PITs whatever the shape; the shape only weighs the worst days.
"""

from dataclasses import replace
from functools import lru_cache
from typing import NamedTuple

import numpy as np
import numpy.typing as npt
from numpy.polynomial.chebyshev import chebvander

from backtest.judging.answers import Answer, SampleTest, Settings
from backtest.judging.es_samples import (
    of_size,
    shapes_or,
    simulated_answer,
    simulated_excesses,
    usable,
    usable_with_pit,
)
from backtest.judging.nulls import ASSUMED_SHAPE, excess_blocks, excess_of_mean_one, generator, p_lower
from backtest.judging.samples import Sample

Floats = npt.NDArray[np.float64]

_ROUNDING = 1e-9
_NODES = 25


def z1(losses: Floats, es: Floats) -> float:
    """Return Z1 = 1 - mean of L/ES over exceptions; losses and es float64[n], the exception days only, n >= 1.

    Source: Acerbi and Szekely (2014), their first statistic, in loss convention.
    """
    return float(1.0 - np.mean(losses / es))


def z1_null(tail: Sample, days: int, shapes: Floats | float, settings: Settings) -> Floats:
    """Simulate Z1 given which days are exceptions: float64[simulations].

    tail: the exception days of a sample of ``days`` days; shapes: the GPD shape, one or float64[exceptions].
    """
    gap, sums = 1.0 - tail.var / tail.es, np.zeros(settings.simulations)
    shapes = np.broadcast_to(shapes, gap.shape)
    for part, excesses in excess_blocks(settings.seed, tail.level, days, settings.simulations, shapes):
        sums = sums + gap[part] @ (excesses - 1.0)  # L*/ES = 1 + (1 - VaR/ES)(W - 1), W of mean one
    return -sums / tail.days


def ridge(losses: Floats, var: Floats, es: Floats, level: float) -> float:
    """Return the mean of [ES - VaR - (L - VaR)^+/(1 - level)]/ES: 0 expected, negative means ES understated.

    Source: Acerbi and Szekely (2019), "The minimally biased backtest for ES", Risk, in relative form (from memory).
    """
    return float(np.mean((es - var - np.maximum(losses - var, 0.0) / (1.0 - level)) / es))


def ridge_null(sample: Sample, shapes: Floats | float, settings: Settings) -> Floats:
    """Simulate the ridge statistic from exceedances along the path of forecasts: float64[simulations]."""
    drawn, excesses = simulated_excesses(sample, shapes, settings)
    gap = 1.0 - sample.var / sample.es
    return float(np.mean(gap)) - drawn.sums(excesses, gap) / (sample.days * sample.nominal)


def worst_count(days: int, level: float) -> int:
    """Return floor(T (1 - level)), the number of worst days that Z3 averages."""
    return int(np.floor(days * (1.0 - level) + _ROUNDING))


@lru_cache(maxsize=4)
def _least_of_uniforms(seed: int, level: float, days: int, simulations: int) -> Floats:
    """Simulate the smallest ``worst_count`` of ``days`` uniforms, ascending: float64[simulations, count]."""
    rng = generator(seed, "worst PITs", level, days)
    steps = rng.standard_exponential((simulations, worst_count(days, level)))
    return np.asarray(-np.expm1(-np.cumsum(steps / np.arange(days, days - steps.shape[1], -1), axis=1)))


class WorstDays(NamedTuple):
    """What Z3 needs of a path: Z3 = -(mean relative excess at each node - expected) @ weights.

    Mean excesses of the worst days are smooth in the shape, so a few Chebyshev nodes stand for all days' shapes.
    ``least`` is the smallest expected mean of the worst days' losses, which must be positive.
    """

    nodes: Floats
    expected: Floats
    weights: Floats
    least: float


def worst_days(sample: Sample, shapes: Floats | float) -> WorstDays:
    """Prepare Z3 along a path of forecasts; shapes: the GPD shape, one or float64[T]."""
    shapes = np.broadcast_to(shapes, sample.var.shape)
    nodes, polynomials = _interpolation(shapes)
    expected, gap = _expected_means(sample.days, sample.level, nodes), sample.es - sample.var
    scale = sample.var + gap * (polynomials @ expected)
    return WorstDays(nodes, expected, (gap / scale) @ polynomials / sample.days, float(scale.min()))


def z3(chances: Floats, level: float, worst: WorstDays) -> Floats:
    """Return Z3 from the smallest ``worst_count`` values of 1 - PIT: float64[n, count] to float64[n].

    Source: Acerbi and Szekely (2014), their third statistic; quantiles VaR + (ES - VaR) g(u), g the GPD quantile of
    mean one in (1 - u)/(1 - level).
    """
    logs, total = -np.log(chances / (1.0 - level)), np.zeros(len(chances))
    for node, expected, weight in zip(*worst[:3], strict=True):
        total -= weight * (excess_of_mean_one(logs, node).mean(axis=1) - expected)
    return total


def z3_null(sample: Sample, shapes: Floats | float, settings: Settings) -> Floats:
    """Simulate Z3 from uniform PITs along the path of forecasts: float64[simulations]."""
    chances = _least_of_uniforms(settings.seed, sample.level, sample.days, settings.simulations)
    return z3(chances, sample.level, worst_days(sample, shapes))


def _interpolation(shapes: Floats) -> tuple[Floats, Floats]:
    """Return nodes and, for each day, the Lagrange polynomials of the nodes at its shape: float64[T, nodes]."""
    low, high = float(shapes.min()), float(shapes.max())
    if low == high:
        return np.array([low]), np.ones((len(shapes), 1))
    points = np.cos(np.pi * (np.arange(_NODES) + 0.5) / _NODES)
    inverse = 2.0 / _NODES * chebvander(points, _NODES - 1).T
    inverse[0] /= 2.0
    at = chebvander(2.0 * (shapes - low) / (high - low) - 1.0, _NODES - 1)
    return low + (points + 1.0) / 2.0 * (high - low), at @ inverse


def _expected_means(days: int, level: float, nodes: Floats) -> Floats:
    """Return the expected mean relative excess of the worst days, for uniform PITs: float64[nodes].

    The i-th smallest s of T uniforms has E s^(-xi) = product of j/(j - xi) over j = i..T.
    """
    safe = np.where(np.abs(nodes) < 1e-8, 1e-8, nodes)[:, None]
    logs = -np.log1p(-safe / np.arange(1, days + 1))
    tails = np.cumsum(logs[:, ::-1], axis=1)[:, ::-1][:, : worst_count(days, level)]
    excess = (1.0 - safe) / safe * np.expm1(safe * np.log(1.0 - level) + tails)
    return np.asarray(excess.mean(axis=1))


def _acerbi_szekely_1(sample: Sample, settings: Settings) -> Answer:
    used, missing, notes = usable(sample)
    if missing:
        return Answer(missing=missing)
    if used.exceptions == 0:
        size = of_size(used, settings)
        return replace(size, missing="0 exceptions, needs 1", notes=size.notes + notes)
    tail = used.on(used.hits)

    def null(shapes: Floats | float) -> Floats:
        return z1_null(tail, used.days, shapes if isinstance(shapes, float) else shapes[used.hits], settings)

    said = ("negative: ES understated; one-sided; law given which days are exceptions", *notes)
    answer = simulated_answer(used, settings, z1(tail.losses, tail.es), null, p_lower, said)
    return replace(answer, evidence="es-low")


def _acerbi_szekely_3(sample: Sample, settings: Settings) -> Answer:
    used, missing, notes = usable_with_pit(sample)
    if missing:
        return Answer(missing=missing)
    count = worst_count(used.days, used.level)
    if count == 0:
        return Answer(missing=f"needs {int(np.ceil(1 / used.nominal - _ROUNDING))} days, has {used.days}")
    worst = worst_days(used, shapes_or(used, ASSUMED_SHAPE))
    if worst.least <= 0.0:
        return Answer(missing="needs an expected loss above 0 on the worst days, on every day")

    def null(shapes: Floats | float) -> Floats:
        return z3_null(used, shapes, settings)

    chances = np.sort(1.0 - used.pit)[None, :count]
    said = (
        "negative: ES understated; one-sided; joint test of the whole tail",
        f"uses the {count} largest PITs, with quantiles rebuilt from VaR, ES and shape",
        *notes,
    )
    answer = simulated_answer(used, settings, float(z3(chances, used.level, worst)[0]), null, p_lower, said)
    return replace(answer, evidence="risk-low")


def _acerbi_szekely_ridge(sample: Sample, settings: Settings) -> Answer:
    used, missing, notes = usable(sample)
    if missing:
        return Answer(missing=missing)

    def null(shapes: Floats | float) -> Floats:
        return ridge_null(used, shapes, settings)

    said = ("negative: ES understated; one-sided; a wrong VaR also lowers it, but only at second order", *notes)
    observed = ridge(used.losses, used.var, used.es, used.level)
    answer = simulated_answer(used, settings, observed, null, p_lower, said)
    return replace(answer, evidence="es-low")


TESTS = (
    SampleTest("acerbi-szekely-1", "how deep", "Acerbi and Szekely (2014), first statistic", _acerbi_szekely_1),
    SampleTest("acerbi-szekely-3", "how deep", "Acerbi and Szekely (2014), third statistic", _acerbi_szekely_3),
    SampleTest("acerbi-szekely-ridge", "how deep", "Acerbi and Szekely (2019), relative form", _acerbi_szekely_ridge),
)
