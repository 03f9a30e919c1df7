"""Tests that weigh the PIT by a kernel over levels: a uniform window, and the score pair of a normal tail."""

from dataclasses import replace
from functools import lru_cache

import numpy as np
import numpy.typing as npt
from scipy.special import ndtri

from backtest.judging.answers import Answer, SampleTest, Settings
from backtest.judging.counts import rate_interval
from backtest.judging.graded import tails
from backtest.judging.nulls import p_upper
from backtest.judging.phrases import p_text
from backtest.judging.pits import read_pits, simulated_tails
from backtest.judging.samples import Sample
from backtest.judging.tail_shape import of_tail

Floats = npt.NDArray[np.float64]


def uniform_moments(low: float, high: float) -> tuple[float, float]:
    """Return mean and standard deviation of the integral of 1{u >= v} over v in [low, high], u uniform.

    Source: Gordy and McNeil (2020), Journal of Banking and Finance 116, uniform kernel.
    """
    width, above = high - low, 1.0 - high
    mean = width**2 / 2.0 + width * above
    square = width**3 / 3.0 + width**2 * above
    return mean, float(np.sqrt(square - mean**2))


def window_sum(pits: Floats, level: float) -> float:
    """Return the sum over days of (PIT - b)/(level - b) kept within 0 and 1, b = 1 - 2 (1 - level)."""
    rate = 1.0 - level
    return float(np.clip((pits - (1.0 - 2.0 * rate)) / rate, 0.0, 1.0).sum())


def _window(sample: Sample, _: Settings) -> Answer:
    pits = read_pits(sample)
    if pits.missing:
        return Answer(missing=pits.missing)
    used, rate = pits.used, pits.used.nominal
    total, x, days = window_sum(pits.values, used.level), used.exceptions, used.days
    mean, spread = (moment / rate for moment in uniform_moments(1.0 - 2.0 * rate, used.level))
    lower, upper = tails(total, days, rate, rate)
    low, high = rate_interval(x, days)
    notes = (
        f"levels from {1.0 - 2.0 * rate:.6g} to {used.level:.6g} weighed alike: a loss between counts in part",
        f"{total:.4g} counted, {days * mean:.4g} expected; {(total - days * mean) / (spread * np.sqrt(days)):.3g} "
        "standard deviations",
        f"p is twice the smaller tail; one-sided p for too many {p_text(upper)}",
        "size: the rate of exceptions",
        *pits.notes,
    )
    more = "more" if x > days * rate else "fewer"
    direction = f"{more} exceptions than the level implies" if abs(x - days * rate) > 1e-9 * days else ""
    return Answer(
        used=used, statistic=total, p_value=min(1.0, 2.0 * min(lower, upper)), law="exact", estimate=x / days,
        low=low, high=high, direction=direction, evidence="var-low" if upper <= lower else "var-high", notes=notes,
    )  # fmt: skip


def score_covariance(level: float) -> npt.NDArray[np.float64]:
    """Return the covariance of one day's scores in m and s of the censored normal law at (0, 1): float64[2, 2]."""
    c, a = float(ndtri(level)), 1.0 - level
    f = float(np.exp(-0.5 * c * c) / np.sqrt(2.0 * np.pi))
    first = c * f + a + f * f / level
    mixed = (c * c + 1.0) * f + c * f * f / level
    second = c**3 * f + c * f + 2.0 * a + c * c * f * f / level
    return np.array([[first, mixed], [mixed, second]])


def probit_statistic(
    count: Floats | float, first: Floats | float, second: Floats | float, days: int, level: float
) -> Floats:
    """Return the score test T^-1 U' S^-1 U of m = 0, s = 1, elementwise.

    count, first, second: number, sum and sum of squares of the normal scores above the level. It is the score version
    of the censored likelihood ratio. Source: Gordy and McNeil (2020), truncated probit-normal score pair, on
    [level, 1].
    """
    c = float(ndtri(level))
    below = (days - count) * float(np.exp(-0.5 * c * c) / np.sqrt(2.0 * np.pi)) / level
    u, v = first - below, second - count - c * below
    inverse = np.linalg.inv(score_covariance(level))
    return np.asarray((inverse[0, 0] * u * u + 2.0 * inverse[0, 1] * u * v + inverse[1, 1] * v * v) / days)


@lru_cache(maxsize=32)
def probit_null(seed: int, level: float, length: int, simulations: int) -> Floats:
    """Simulate the score test of independent uniform PITs: float64[simulations]."""
    tails = simulated_tails(seed, level, length, simulations)
    return probit_statistic(tails.counts, tails.sums(tails.scores), tails.sums(tails.scores**2), length, level)


def _probit(sample: Sample, settings: Settings) -> Answer:
    pits = read_pits(sample)
    if pits.missing:
        return Answer(missing=pits.missing)
    used, z = pits.used, pits.scores
    statistic = float(probit_statistic(len(z), float(z.sum()), float(z @ z), used.days, used.level))
    null = probit_null(settings.seed, used.level, used.days, settings.simulations)
    return replace(of_tail(pits), statistic=statistic, p_value=p_upper(null, statistic), law="simulated")


_SOURCE = "Gordy and McNeil (2020), Journal of Banking and Finance 116"

TESTS = (
    SampleTest("spectral-window", "how often", f"{_SOURCE}, uniform kernel; exact law", _window),
    SampleTest("spectral-probit", "what shape", f"{_SOURCE}, truncated probit-normal scores", _probit),
)
