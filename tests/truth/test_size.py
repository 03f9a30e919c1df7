"""Size: how often each test rejects right forecasts at 5%, shown p and p with ties broken at random.

``python -m pytest tests/truth -q -s`` prints the table. Truth: tests/reference/known_market.py.
"""

from dataclasses import replace

import numpy as np
import pytest
from scipy import stats

from backtest.judging.answers import SampleTest, Settings
from backtest.judging.battery import TESTS
from backtest.judging.independence import independence_ratio, transitions
from backtest.judging.samples import Sample
from tests.reference.known_market import right_reviews, ties_broken

NOMINAL, SIMULATIONS, LAWS = 0.05, 499, 8
LENGTHS, LEVELS, REVIEWS = (250, 500, 1000), (0.975, 0.99), 1000
FEWER = dict.fromkeys(("duration-weibull", "berkowitz-tail", "spectral-probit", "e-process"), 400)
REGRESSIONS = {"bayer-dimitriadis-intercept": 499, "bayer-dimitriadis-auxiliary": 99}
"""Tests that take long: simulations of their laws; 200 reviews, at 97.5% only; they have no ties."""
OF_ALL = ("duration-gmm", "du-escanciano-conditional")
"""Tests whose law includes reviews without enough exceptions: such a review is one that is not rejected."""
AT_MOST = ("e-process",)
"""Tests that reject less often than the level says: this one allows for a look every day."""
KEYS = [key for key, test in TESTS.items() if isinstance(test, SampleTest)]
ERRORS = 3.5
"""Standard errors allowed."""


def reviews(level: float, length: int, number: int) -> list[Sample]:
    return list(right_reviews(level, length, reviews=number, days=max(LENGTHS), seed=11))


def judged(key: str, samples: list[Sample], simulations: int = SIMULATIONS) -> np.ndarray:
    """Return the p of every review, nan where not tested.

    Eight independent sets of random numbers stand behind the laws, so that the error of one set averages out.
    """
    judge, n = TESTS[key].judge, len(samples)
    p = [judge(s, Settings(NOMINAL, simulations, seed=i * LAWS // n)).p_value for i, s in enumerate(samples)]
    found = np.array(p, dtype=float)
    return np.where(np.isnan(found), 1.0, found) if key in OF_ALL else found


def rejected(p: np.ndarray) -> float:
    """Return the share of tested reviews that are rejected."""
    return float(np.mean(p[~np.isnan(p)] <= NOMINAL))


def error(p: np.ndarray, simulations: int = SIMULATIONS) -> float:
    """Return the standard error of that share at the nominal size, the simulated laws' own included."""
    tested = max(int(np.count_nonzero(~np.isnan(p))), 1)
    return float(np.sqrt(NOMINAL * (1 - NOMINAL) * (1 / tested + 1 / (simulations * LAWS))))


def too_often(p: np.ndarray, simulations: int = SIMULATIONS) -> bool:
    return rejected(p) > NOMINAL + ERRORS * error(p, simulations)


def off(p: np.ndarray, simulations: int = SIMULATIONS) -> bool:
    return abs(rejected(p) - NOMINAL) > ERRORS * error(p, simulations)


def both(key: str, level: float, length: int) -> tuple[np.ndarray, np.ndarray]:
    """Return the shown and the randomised p of every review."""
    if key in REGRESSIONS:
        shown = judged(key, reviews(level, length, 200), REGRESSIONS[key])
        return shown, shown
    samples = reviews(level, length, FEWER.get(key, REVIEWS))
    with ties_broken(np.random.default_rng(5)):
        broken = judged(key, samples)
    return judged(key, samples), broken


@pytest.fixture(scope="module", autouse=True)
def _heading():
    print(f"\nRejected right forecasts, nominal {NOMINAL:.0%}: p as shown / ties broken at random (reviews tested)")
    columns = (f"{f'{100 * level:g}%, {days} days':>20}" for level in LEVELS for days in LENGTHS)
    print(f"{'':<28}" + "".join(columns), end="")


@pytest.mark.parametrize("key", KEYS)
def test_right_forecasts_are_rejected_as_often_as_the_level_says(key):
    print(f"\n{key:<28}", end="", flush=True)
    wrong, simulations = [], REGRESSIONS.get(key, SIMULATIONS)
    for level in LEVELS[:1] if key in REGRESSIONS else LEVELS:
        for length in LENGTHS:
            shown, broken = both(key, level, length)
            cell = f"{100 * rejected(shown):.1f} / {100 * rejected(broken):.1f} ({np.count_nonzero(~np.isnan(shown))})"
            print(f"{cell:>20}", end="", flush=True)
            wrong += [(level, length, "shown", rejected(shown))] * too_often(shown, simulations)
            if key not in AT_MOST:
                wrong += [(level, length, "ties broken", rejected(broken))] * off(broken, simulations)
    assert wrong == []


# negative controls: the same yardstick on p-values from a wrong law


def dynamic_quantile(sample: Sample, lags: int) -> float:
    """Return the statistic of Engle and Manganelli (2004) with a constant, lagged hits and VaR, plainly."""
    centred = sample.hits - sample.nominal
    rows = len(centred) - lags
    columns = [
        np.ones(rows),
        sample.var[lags:],
        *(sample.hits[lags - j - 1 : len(centred) - j - 1] for j in range(lags)),
    ]
    X, h = np.column_stack(columns).astype(float), centred[lags:]
    fitted = X @ np.linalg.lstsq(X, h, rcond=None)[0]
    return float(h @ fitted / (sample.nominal * sample.level))


def test_chi_square_for_dynamic_quantile_with_four_lags_is_seen_to_reject_too_often():
    # METHODS: chi-square size at 99%: 0.167 at 500 days, 0.104 at 1000 (computed apart)
    p = np.array([stats.chi2.sf(dynamic_quantile(s, 4), 6) for s in reviews(0.99, 500, REVIEWS)])
    assert too_often(p)
    assert rejected(p) == pytest.approx(0.167, abs=0.04)


def test_chi_square_for_independence_is_seen_to_reject_too_rarely():
    p = np.array([stats.chi2.sf(independence_ratio(*transitions(s.hits)), 1) for s in reviews(0.99, 500, REVIEWS)])
    assert not too_often(p)
    assert off(p)
    assert rejected(p) == pytest.approx(0.015, abs=0.015)


def test_a_wrong_level_is_seen_by_the_yardstick():
    wrong = [replace(sample, level=0.985) for sample in reviews(0.975, 1000, 200)]
    assert too_often(judged("binomial", wrong))
