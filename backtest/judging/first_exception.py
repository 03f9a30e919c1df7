"""How often: the time until the first exception."""

from bisect import bisect_left

import numpy as np
from scipy.special import xlog1py

from backtest.judging.answers import Answer, SampleTest, Settings
from backtest.judging.coverage import NO_DAYS
from backtest.judging.samples import Sample

_TIES = 1e-9
_FAR = 2**52


def first_exception_ratio(day: int, rate: float) -> float:
    """Return LR = 2 ln[(1/V)(1 - 1/V)^(V - 1)] - 2 ln[a (1 - a)^(V - 1)], V the day of the first exception, from 1.

    Source: Kupiec (1995), FEDS working paper 95-24, eq. 2.
    """
    free = xlog1py(day - 1, -1.0 / day) - np.log(day)
    return float(max(0.0, 2.0 * (free - np.log(rate) - xlog1py(day - 1, -rate))))


def first_exception_p(day: int, rate: float) -> float:
    """Return the exact p: the geometric probability of all first days whose LR is at least that of ``day``."""
    bound = first_exception_ratio(day, rate) * (1.0 - _TIES)
    middle = int(1.0 / rate)  # LR falls up to day 1/a and rises after it
    days, later = range(1, middle + 1), range(middle + 1, _FAR)
    early = bisect_left(days, True, key=lambda day: first_exception_ratio(day, rate) < bound)
    late = middle + 1 + bisect_left(later, True, key=lambda day: first_exception_ratio(day, rate) >= bound)
    return float(min(1.0, -np.expm1(xlog1py(early, -rate)) + np.exp(xlog1py(late - 1, -rate))))


def rate_from_first(day: int, confidence: float = 0.95) -> tuple[float, float]:
    """Return the exact interval (low, high) for the rate behind a first exception on ``day``: equal geometric tails."""
    tail = (1.0 - confidence) / 2.0
    low = -np.expm1(np.log1p(-tail) / day)
    high = -np.expm1(np.log(tail) / (day - 1)) if day > 1 else 1.0
    return float(low), float(high)


def _first_exception(sample: Sample, _: Settings) -> Answer:
    days, rate = sample.days, sample.nominal
    if days == 0:
        return NO_DAYS
    if sample.exceptions == 0:
        return Answer(missing="0 exceptions, needs 1", notes=(f"censored: the first exception comes after day {days}",))
    day = int(np.argmax(sample.hits)) + 1
    low, high = rate_from_first(day)
    early = day * rate < 1.0
    return Answer(
        statistic=first_exception_ratio(day, rate), p_value=first_exception_p(day, rate), law="exact",
        estimate=1.0 / day, low=low, high=high,
        direction=f"the first exception came {'earlier' if early else 'no earlier'} than the level implies",
        evidence="var-low" if early else "var-high",
        notes=(f"first exception on day {day} of {days}; size: the rate that this day alone implies",
               "p orders days by the likelihood ratio; later exceptions are not used"),
    )  # fmt: skip


_SOURCE = "Kupiec (1995), FEDS working paper 95-24, eq. 2"

TESTS = (SampleTest("first-exception", "how often", _SOURCE, _first_exception),)
