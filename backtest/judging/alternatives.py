"""Named alternatives: reviews simulated from a known market, with forecasts that are right or wrong in one named way.

The market is a GARCH(1,1) with Student t innovations of 5 degrees of freedom (alpha 0.08, beta 0.90, variance 1). The
forecasts know its parameters: nothing is fitted. Every alternative sees the same losses.
"""

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import lru_cache
from typing import NamedTuple

import numpy as np
import numpy.typing as npt
from scipy.special import gamma, ndtr, ndtri, stdtr, stdtrit

from backtest.judging.nulls import generator
from backtest.judging.samples import Sample

Floats = npt.NDArray[np.float64]

ALPHA, BETA, FREEDOM = 0.08, 0.90, 5.0
_UNIT = float(np.sqrt((FREEDOM - 2.0) / FREEDOM))
"""Standard deviation 1: what a t variable is multiplied with."""
_BURN_IN = 500
_MANY_PATHS, _MANY_DAYS = 2000, 1000
"""Size of the sample that stands for the market's unconditional law."""


class Paths(NamedTuple):
    """Simulated reviews, float64[reviews, days]: the true sigma, the loss, and the true PIT of the loss."""

    sigma: Floats
    losses: Floats
    pit: Floats


class Tail(NamedTuple):
    """A law of mean zero and variance one at a level: quantile, shortfall and the GPD shape of its excesses.

    The GPD of that shape has the mean and the variance of the excess over the quantile; a test that simulates
    exceedances from VaR, ES and shape then has both moments right.
    """

    quantile: float
    shortfall: float
    shape: float


class Forecasts(NamedTuple):
    """Forecasts for simulated reviews, float64[reviews, days] each."""

    var: Floats
    es: Floats
    sigma: Floats
    shape: Floats
    pit: Floats


@lru_cache(maxsize=2)
def simulate(reviews: int, days: int, seed: int) -> Paths:
    """Simulate the market: ``reviews`` paths of ``days`` days, after a burn-in from the mean variance."""
    draws = generator(seed, "garch t5 market", 0.0, reviews).standard_t(FREEDOM, (_BURN_IN + days, reviews))
    variance, sigma = np.ones(reviews), np.empty_like(draws)
    for day, drawn in enumerate(draws):
        sigma[day] = np.sqrt(variance)
        variance = (1.0 - ALPHA - BETA) + variance * (BETA + ALPHA * (_UNIT * drawn) ** 2)
    draws, sigma = draws[_BURN_IN:].T.copy(), sigma[_BURN_IN:].T.copy()
    return Paths(sigma, sigma * _UNIT * draws, _chance(draws))


def _chance(draws: Floats) -> Floats:
    return np.asarray(stdtr(FREEDOM, draws), dtype=np.float64)


def student_tail(level: float) -> Tail:
    """Return the tail of the standardised t with 5 degrees of freedom, in closed form."""
    n, q, a = FREEDOM, float(stdtrit(FREEDOM, level)), 1.0 - level
    density = gamma((n + 1) / 2) / (np.sqrt(n * np.pi) * gamma(n / 2)) * (1 + q * q / n) ** (-(n + 1) / 2)
    partial = density * (n + q * q) / (n - 1)  # E[X; X > q]
    square = ((n - 1) * q * partial + n * a) / (n - 2)  # E[X^2; X > q], by parts
    return _tail(_UNIT * q, _UNIT * partial / a, _UNIT**2 * square / a)


def normal_tail(level: float) -> Tail:
    """Return the tail of the standard normal, in closed form."""
    q, a = float(ndtri(level)), 1.0 - level
    density = np.exp(-q * q / 2) / np.sqrt(2 * np.pi)
    return _tail(q, density / a, q * density / a + 1.0)


def _tail(quantile: float, mean: float, square: float) -> Tail:
    excess, variance = mean - quantile, square - mean**2
    return Tail(float(quantile), float(mean), float((1.0 - excess**2 / variance) / 2.0))


@lru_cache(maxsize=1)
def _unconditional() -> Floats:
    """Return sorted losses of the market, all days of many paths: its law without knowledge of the day."""
    return np.sort(simulate(_MANY_PATHS, _MANY_DAYS, 1).losses, axis=None)


def _scaled(tail: Tail, sigma: Floats, pit: Floats) -> Forecasts:
    return Forecasts(tail.quantile * sigma, tail.shortfall * sigma, sigma, np.full_like(sigma, tail.shape), pit)


def _right(market: Paths, level: float) -> Forecasts:
    return _scaled(student_tail(level), market.sigma, market.pit)


def _understated(factor: float) -> Callable[[Paths, float], Forecasts]:
    def forecasts(market: Paths, level: float) -> Forecasts:
        sigma = factor * market.sigma
        return _scaled(student_tail(level), sigma, _chance(market.losses / (_UNIT * sigma)))

    return forecasts


def _more_often(factor: float) -> Callable[[Paths, float], Forecasts]:
    """Report the VaR of a lower level: more exceptions, and the right law of what lies beyond and below."""

    def forecasts(market: Paths, level: float) -> Forecasts:
        true = 1.0 - factor * (1.0 - level)
        beyond = market.pit > true
        pit = np.where(beyond, 1.0 - (1.0 - market.pit) / factor, market.pit * level / true)
        return _scaled(student_tail(true), market.sigma, pit)

    return forecasts


def _thin(market: Paths, level: float) -> Forecasts:
    """Keep the right VaR; beyond it the forecast is the normal law whose quantile this VaR is."""
    right, normal = student_tail(level), normal_tail(level)
    width = right.quantile / normal.quantile * market.sigma
    pit = np.where(market.pit > level, ndtr(market.losses / width), market.pit)
    shape = np.full_like(width, normal.shape)
    return Forecasts(right.quantile * market.sigma, normal.shortfall * width, market.sigma, shape, pit)


def _unmoved(market: Paths, level: float) -> Forecasts:
    """Forecast every day with the market's unconditional law."""
    law = _unconditional()
    place = int(np.ceil(level * len(law) - 1e-9)) - 1
    beyond = law[place + 1 :]
    tail = _tail(law[place], float(beyond.mean()), float(np.mean(beyond**2)))
    pit = (np.searchsorted(law, market.losses) + 0.5) / (len(law) + 1)
    return _scaled(tail, np.ones_like(market.sigma), pit)


@dataclass(frozen=True)
class Alternative:
    """A way in which forecasts are wrong: name in the table, a short heading, words, and how the forecasts are made."""

    key: str
    heading: str
    words: str
    forecasts: Callable[[Paths, float], Forecasts]


ALTERNATIVES = {
    a.key: a
    for a in (
        Alternative("right", "right", "forecasts are right", _right),
        Alternative("rate-x2", "rate x 2", "true rate of exceptions twice the nominal", _more_often(2.0)),
        Alternative("sigma-10", "sigma -10%", "sigma understated by 10%", _understated(0.9)),
        Alternative("sigma-20", "sigma -20%", "sigma understated by 20%", _understated(0.8)),
        Alternative("thin-tail", "thin tail", "normal tail beyond a right VaR where t5 is true", _thin),
        Alternative("no-reaction", "no reaction", "no reaction to volatility: one VaR for all days", _unmoved),
    )
}


@lru_cache(maxsize=len(ALTERNATIVES))
def _forecasts(key: str, level: float, reviews: int, days: int, seed: int) -> Forecasts:
    return ALTERNATIVES[key].forecasts(simulate(reviews, days, seed), level)


def reviews_of(key: str, level: float, length: int, *, reviews: int, days: int, seed: int) -> Iterator[Sample]:
    """Yield simulated reviews under an alternative: the first ``length`` days of each of the market's paths.

    Reviews of several lengths share paths of ``days`` days. The sample's model bears the alternative's key.
    """
    market, made = simulate(reviews, days, seed), _forecasts(key, level, reviews, days, seed)
    dates = np.arange(length).astype("datetime64[D]")
    for row in range(reviews):
        arrays = (market.losses, *made)
        yield Sample("simulated", key, "hypothetical", level, dates, *(a[row, :length] for a in arrays))
