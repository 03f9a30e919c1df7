"""Coverage of the interval for the multiple of ES that would have sufficed: oracle and negative control."""

import numpy as np
import pytest
from scipy import stats

from backtest.judging.multiples import sufficient_es_multiple
from tests.reference.judging_laws import es_t

LAWS = {"normal": np.inf, "t5": 5, "t3": 3}


def drawn(nu, level, shape, seed):
    """Losses with the right ES, so that the true multiple is 1."""
    rng = np.random.default_rng(seed)
    if nu == np.inf:
        return rng.standard_normal(shape), float(stats.norm.pdf(stats.norm.ppf(level)) / (1 - level))
    return rng.standard_t(nu, shape), es_t(nu, level)


def coverage(nu, level, days, samples):
    losses, es = drawn(nu, level, (samples, days), days)
    found = [sufficient_es_multiple(row, np.full(days, es), level, 1) for row in losses]
    return np.mean([multiple.low <= 1.0 <= multiple.high for multiple in found])


def bootstrap_coverage(nu, level, days, samples, resamples=499):
    """The percentile bootstrap over days, plain, where days (1 - level) is a whole number."""
    losses, es = drawn(nu, level, (samples, days), days)
    rng, top, inside = np.random.default_rng(1), round(days * (1 - level)), 0
    for row in losses:
        again = np.sort(rng.choice(row, (resamples, days)), axis=1)[:, -top:].mean(axis=1) / es
        low, high = np.quantile(again, [0.025, 0.975])
        inside += low <= 1.0 <= high
    return inside / samples


@pytest.mark.parametrize("law", ["normal", "t5"])
def test_coverage_at_250_days(law):
    error = 3 * np.sqrt(0.05 * 0.95 / 1000)
    assert 0.95 - error <= coverage(LAWS[law], 0.99, 250, 1000) <= 0.99


@pytest.mark.slow
@pytest.mark.parametrize("level", [0.975, 0.99])
@pytest.mark.parametrize("days", [250, 500, 1000])
@pytest.mark.parametrize(("law", "least", "most"), [("normal", 0.94, 0.98), ("t5", 0.95, 0.96), ("t3", 0.93, 0.95)])
def test_coverage_is_as_stated(law, least, most, days, level):
    # the ranges are those of the docstring and the note; a measurement is off by up to three standard errors
    error = 3 * np.sqrt(0.05 * 0.95 / 4000)
    assert least - error <= coverage(LAWS[law], level, days, 4000) <= most + error


@pytest.mark.slow
@pytest.mark.parametrize(("level", "days"), [(0.975, 200), (0.99, 200), (0.99, 500)])
def test_negative_control_the_percentile_bootstrap_falls_short(level, days):
    assert bootstrap_coverage(5, level, days, 600) < 0.90
