"""How often: tests of the number of exceptions."""

from dataclasses import replace
from functools import lru_cache

import numpy as np
import numpy.typing as npt
from scipy.special import xlog1py, xlogy

from backtest.judging.answers import Answer, SampleTest, Settings
from backtest.judging.counts import at_least, pmf, rate_interval, two_sided
from backtest.judging.phrases import in_hundred, p_text
from backtest.judging.power import upper_power
from backtest.judging.samples import Sample

Floats = npt.NDArray[np.float64]


def likelihood_ratio(count: npt.ArrayLike, days: int, rate: float) -> Floats:
    """Return Kupiec's LR = 2 ln[(X/T)^X (1-X/T)^(T-X)] - 2 ln[a^X (1-a)^(T-X)], 0 ln 0 = 0, elementwise in the count.

    Source: Kupiec (1995), FEDS working paper 95-24, eq. 6.
    """
    x = np.asarray(count, dtype=np.float64)
    share = x / days
    free = xlogy(x, share) + xlog1py(days - x, -share)
    return np.asarray(np.maximum(2.0 * (free - xlogy(x, rate) - xlog1py(days - x, -rate)), 0.0))


def kupiec_p(count: int, days: int, rate: float) -> float:
    """Return the exact p: the probability of all counts whose LR is at least that of ``count`` (ties included)."""
    ratios, weights = _kupiec_law(days, rate)
    return float(min(1.0, weights[ratios >= ratios[count] * (1.0 - 1e-9)].sum()))


@lru_cache(maxsize=64)
def _kupiec_law(days: int, rate: float) -> tuple[Floats, Floats]:
    return likelihood_ratio(np.arange(days + 1), days, rate), pmf(days, rate)


def _of_rate(sample: Sample) -> Answer:
    """Return the effect size both tests share: the rate, its exact interval and side."""
    x, days = sample.exceptions, sample.days
    low, high = rate_interval(x, days)
    above = x > days * sample.nominal
    direction = "more exceptions than the level implies" if above else "fewer exceptions than the level implies"
    if abs(x - days * sample.nominal) < 1e-9 * days:
        direction = "as many exceptions as the level implies"
    evidence = "var-low" if above else "var-high"
    return Answer(estimate=x / days, low=low, high=high, direction=direction, evidence=evidence)


def _binomial(sample: Sample, _: Settings) -> Answer:
    x, days, rate = sample.exceptions, sample.days, sample.nominal
    if days == 0:
        return NO_DAYS
    notes = (
        f"one-sided p for too many exceptions {p_text(at_least(x, days, rate))}",
        f"the one-sided test at 5% would see twice the nominal rate {in_hundred(upper_power(days, sample.level))}",
    )
    p_value = two_sided(x, days, rate)
    return replace(_of_rate(sample), statistic=float(x), p_value=p_value, law="exact", notes=notes)


def _kupiec(sample: Sample, _: Settings) -> Answer:
    x, days, rate = sample.exceptions, sample.days, sample.nominal
    if days == 0:
        return NO_DAYS
    statistic, p_value = float(likelihood_ratio(x, days, rate)), kupiec_p(x, days, rate)
    notes = ("p orders counts by the likelihood ratio; no chi-square approximation",)
    return replace(_of_rate(sample), statistic=statistic, p_value=p_value, law="exact", notes=notes)


NO_DAYS = Answer(missing="needs a day with both P&L and VaR")

TESTS = (
    SampleTest("binomial", "how often", "exact binomial law; interval of Clopper and Pearson (1934)", _binomial),
    SampleTest("kupiec", "how often", "Kupiec (1995), FEDS working paper 95-24, eq. 6", _kupiec),
)
