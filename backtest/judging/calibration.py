"""How deep: Nolde and Ziegel's calibration tests of VaR and ES together.

v1 = 1 - level - I and v2 = VaR - ES + I (L - VaR)/(1 - level) have conditional mean 0 if both forecasts are right. Both
are known in advance on a day without exception, so the laws are simulated from exceptions along the path; chi-square
laws reject correct forecasts 18 to 50 times in 100 at 250 to 500 days (nominal 5) and are not used. Second moments are
uncentred throughout. Without an exception the two-sided and the general statistic are 0: no evidence.

Source: Nolde and Ziegel (2017), Annals of Applied Statistics 11, 1833-1874.
"""

from collections.abc import Callable
from dataclasses import replace
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from backtest.judging.answers import Answer, SampleTest, Settings
from backtest.judging.es_samples import simulated_answer, simulated_excesses, usable
from backtest.judging.nulls import p_upper
from backtest.judging.samples import Sample

Floats = npt.NDArray[np.float64]

_COLLINEAR = 1e-12


class Moments(NamedTuple):
    """Sums over the T days of v1, v2, their squares and product, v2 in units of the mean ES - VaR; and exceptions.

    One value a path, observed or simulated: float64[n] each.
    """

    days: int
    exceptions: Floats
    v1: Floats
    v2: Floats
    v11: Floats
    v22: Floats
    v12: Floats


def moments(sample: Sample) -> Moments:
    """Return the observed sums: float64[1]; every day needs VaR and ES."""
    a, hits, count = sample.nominal, sample.hits, np.array([float(sample.exceptions)])
    beyond = np.where(hits, sample.losses - sample.var, 0.0)
    v2 = (sample.var - sample.es + beyond / a) / float(np.mean(sample.es - sample.var))
    parts = (np.array([np.sum(values)]) for values in (v2, v2 * v2, (a - hits) * v2))
    return _with_counts(sample.days, a, count, *parts)


def _with_counts(days: int, a: float, count: Floats, v2: Floats, v22: Floats, v12: Floats) -> Moments:
    # one formula for observed and simulated counts, so that ties are ties to the last digit
    return Moments(days, count, days * a - count, v2, days * a * a + count * (1.0 - 2.0 * a), v22, v12)


def moments_null(sample: Sample, shapes: Floats | float, settings: Settings) -> Moments:
    """Simulate the sums from exceptions along the path of forecasts: float64[simulations] each."""
    drawn, excesses = simulated_excesses(sample, shapes, settings)
    a, days, count = sample.nominal, sample.days, np.diff(drawn.starts).astype(np.float64)
    gap = sample.es - sample.var
    gap = gap / float(np.mean(gap))
    deep = excesses / a  # on an exception v2 = gap (W/a - 1), elsewhere -gap
    linear, hit_gap = drawn.sums(deep, gap), drawn.sums(np.ones(len(deep)), gap)
    v22 = np.sum(gap**2) + drawn.sums(deep * (deep - 2.0), gap**2)
    # v1 v2 = a v2 - I v2, and I v2 = gap (W/a - 1)
    v12 = a * (linear - np.sum(gap)) - (linear - hit_gap)
    return _with_counts(days, a, count, linear - np.sum(gap), v22, v12)


def one_sided(m: Moments) -> Floats:
    """Return the larger of the two t = sqrt(T) mean/sqrt(mean square), signed so that large means understated."""
    return np.asarray(np.maximum(*signed_t(m)))


def signed_t(m: Moments) -> tuple[Floats, Floats]:
    """Return the t of -v1 (too many exceptions) and of v2 (too deep)."""
    return -m.v1 / np.sqrt(m.v11), m.v2 / np.sqrt(m.v22)


def two_sided(m: Moments) -> Floats:
    """Return T mean(V)' Omega^-1 mean(V) with Omega = mean of VV'; 0 without exceptions.

    Where v1 and v2 move in step (one exception of exactly mean depth), v2 says nothing more: v1 alone remains.
    """
    determinant = m.v11 * m.v22 - m.v12**2
    apart = determinant > _COLLINEAR * m.v11 * m.v22
    quadratic = m.v22 * m.v1**2 - 2.0 * m.v12 * m.v1 * m.v2 + m.v11 * m.v2**2
    both = quadratic / np.where(apart, determinant, 1.0)
    return np.asarray(np.where(m.exceptions > 0, np.where(apart, both, m.v1**2 / m.v11), 0.0))


def general(sums: Floats, squares: Floats) -> Floats:
    """Return T mean(q)^2/mean(q^2) from sums of q = (L - ES)/sigma over exceptions; 0 without exceptions.

    q = ((ES - VaR) v1/(1 - level) + v2)/sigma is 0 on every other day and, on exceptions, this over 1 - level.
    """
    return np.asarray(np.where(squares > 0.0, sums**2 / np.where(squares > 0.0, squares, 1.0), 0.0))


def general_null(sample: Sample, shapes: Floats | float, settings: Settings) -> Floats:
    """Simulate the general statistic from exceptions along the path of forecasts: float64[simulations]."""
    drawn, excesses = simulated_excesses(sample, shapes, settings)
    scale = (sample.es - sample.var) / sample.sigma
    return general(drawn.sums(excesses - 1.0, scale), drawn.sums((excesses - 1.0) ** 2, scale**2))


def _simple(sample: Sample, settings: Settings, statistic: Callable[[Moments], Floats], said: str) -> Answer:
    used, missing, notes = usable(sample)
    if missing:
        return Answer(missing=missing)
    seen = moments(used)

    def null(shapes: Floats | float) -> Floats:
        return statistic(moments_null(used, shapes, settings))

    often, deep = (float(t[0]) for t in signed_t(seen))
    parts = f"t of the rate of exceptions {often:.3g}, of their depth {deep:.3g}; positive: understated"
    said_too = (said, parts, *_without_exception(used), *notes)
    answer = simulated_answer(used, settings, float(statistic(seen)[0]), null, p_upper, said_too)
    # v2 rises with too many exceptions and with too deep ones; the t of the rate says nothing of depth
    return replace(answer, evidence="risk-low" if statistic is one_sided or deep > 0.0 else "risk-high")


def _without_exception(used: Sample) -> tuple[str, ...]:
    return ("no exception: says little",) * (used.exceptions == 0)


def _one_sided(sample: Sample, settings: Settings) -> Answer:
    return _simple(sample, settings, one_sided, "one-sided: large means VaR or ES understated; the larger of two t")


def _two_sided(sample: Sample, settings: Settings) -> Answer:
    return _simple(sample, settings, two_sided, "two-sided joint test of VaR and ES")


def _general(sample: Sample, settings: Settings) -> Answer:
    used, missing, notes = usable(sample, sigma=True)
    if missing:
        return Answer(missing=missing)
    tail = used.on(used.hits)
    residuals = (tail.losses - tail.es) / tail.sigma

    def null(shapes: Floats | float) -> Floats:
        return general_null(used, shapes, settings)

    said = ("two-sided; of the exceptions only (L - ES)/sigma enters", *_without_exception(used), *notes)
    observed = float(general(np.array(np.sum(residuals)), np.array(np.sum(residuals**2))))
    answer = simulated_answer(used, settings, observed, null, p_upper, said)
    return replace(answer, evidence="es-low" if np.sum(residuals) > 0.0 else "es-high")


_SOURCE = "Nolde and Ziegel (2017), Annals of Applied Statistics 11"

TESTS = (
    SampleTest("nolde-ziegel-one-sided", "how deep", _SOURCE + ", one-sided simple", _one_sided),
    SampleTest("nolde-ziegel-two-sided", "how deep", _SOURCE + ", two-sided simple", _two_sided),
    SampleTest("nolde-ziegel-general", "how deep", _SOURCE + ", two-sided general", _general),
)
