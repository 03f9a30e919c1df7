"""Power of a test by asking it: the share of simulated reviews in which its shown p is at or below the significance."""

from dataclasses import replace
from functools import lru_cache

import numpy as np
import numpy.typing as npt

from backtest.judging.alternatives import reviews_of
from backtest.judging.answers import SampleTest, Settings
from backtest.judging.nulls import p_upper
from backtest.judging.power_table import Seen


def rejections(
    test: SampleTest, alternative: str, level: float, length: int, settings: Settings, *, reviews: int, days: int
) -> Seen:
    """Count the reviews of ``length`` days that the test rejects under a named alternative.

    ``reviews`` paths of ``days`` days are simulated (see alternatives.reviews_of) from the seed of the settings; so are
    the laws behind simulated p-values, ``settings.simulations`` replicates, one set for all reviews. A review in which
    the test gives no p-value is not rejected.
    """
    drawn = reviews_of(alternative, level, length, reviews=reviews, days=days, seed=settings.seed)
    answers = (test.judge(sample, settings).p_value for sample in drawn)
    rejected = sum(p is not None and p <= settings.significance for p in answers)
    return Seen(rejected, reviews, settings.simulations)


def beyond_right(
    test: SampleTest, alternative: str, level: float, length: int, settings: Settings, *, reviews: int, days: int
) -> Seen:
    """Count the same for a test too slow to simulate a law for every review, large statistics being extreme.

    One law stands for all: the statistic in as many reviews of right forecasts.
    """
    right = _statistics(test, "right", level, length, settings, reviews, days)
    found = _statistics(test, alternative, level, length, settings, reviews, days)
    known = right[~np.isnan(right)]
    rejected = sum(p_upper(known, float(value)) <= settings.significance for value in found[~np.isnan(found)])
    return Seen(rejected, reviews, len(known))


@lru_cache(maxsize=2)
def _statistics(
    test: SampleTest, alternative: str, level: float, length: int, settings: Settings, reviews: int, days: int
) -> npt.NDArray[np.float64]:
    drawn = reviews_of(alternative, level, length, reviews=reviews, days=days, seed=settings.seed)
    quick = replace(settings, simulations=1)  # the p-value is thrown away
    return np.array([test.judge(sample, quick).statistic for sample in drawn], dtype=np.float64)
