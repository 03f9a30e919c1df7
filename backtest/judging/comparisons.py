"""Which is better, asked in two more ways: knowing the day before, and in both directions.

Natural use of the second: an old and a new version of the reported model side by side.
"""

from dataclasses import replace

import numpy as np
import numpy.typing as npt
from scipy.special import stdtr

from backtest.judging.answers import Answer, PairTest, Settings
from backtest.judging.phrases import p_text
from backtest.judging.ranking import compare_scores, mean_difference
from backtest.judging.samples import Sample
from backtest.judging.scores import half_homogeneous

Floats = npt.NDArray[np.float64]

LONG_ENOUGH = 1000
"""Days from which the asymptotic laws of score differences are about right; below it the note says they are rough."""
ROLLING = "needs forecasts from windows of fixed length; a growing window is outside this law"
_SINGULAR = 1e-12


def giacomini_white(differences: Floats) -> tuple[float, float] | None:
    """Return the Wald statistic and its chi2(2) p for score differences float64[T]; None where they do not vary enough.

    Null: no difference is expected given the day before. With Z = (d_t, d_(t-1) d_t) over n = T - 1 days it is n
    mean(Z)' (mean Z Z')^-1 mean(Z). Source: Giacomini and White (2006), Econometrica 74, one-step test with instruments
    1 and the lagged difference.
    """
    if len(differences) < 3:
        return None
    now = differences[1:]
    products = np.column_stack([now, now * differences[:-1]])
    size = np.sqrt(np.mean(products**2, axis=0))
    if not np.all(size > 0.0):
        return None
    scaled = products / size
    mean, second = scaled.mean(axis=0), scaled.T @ scaled / len(now)
    if 1.0 - second[0, 1] ** 2 < _SINGULAR:
        return None
    statistic = float(len(now) * mean @ np.linalg.solve(second, mean))
    return statistic, float(np.exp(-0.5 * statistic))  # the upper tail of chi2 with 2 degrees of freedom


def one_sided(statistic: float, days: int) -> tuple[float, float]:
    """Return the p of "the first is at least as good" and of "the second is at least as good": t(T - 1), one-sided.

    Source: Nolde and Ziegel (2017), comparative backtests; their law is the normal one (from memory).
    """
    return float(stdtr(days - 1, -statistic)), float(stdtr(days - 1, statistic))


def _roughness(days: int) -> tuple[str, ...]:
    return (f"{days} days: the asymptotic law is rough below {LONG_ENOUGH:,}",) * (days < LONG_ENOUGH)


def _giacomini_white(ours: Sample, theirs: Sample, _: Settings) -> Answer:
    answer, found, series = compare_scores(ours, theirs)
    if found is None:
        return answer
    wald = giacomini_white(series)
    if wald is None:
        return replace(answer, missing="needs score differences that vary from day to day")
    slope = float(np.polyfit(series[:-1], series[1:], 1)[0])
    clear = found.low is not None and found.high is not None and not found.low <= 0.0 <= found.high
    notes = (
        *answer.notes, f"instruments: 1 and the difference of the day before (slope {slope:.3g})",
        "rejects where a difference can be foreseen, even if the mean difference is nil", ROLLING,
        *_roughness(ours.days),
    )  # fmt: skip
    evidence = answer.evidence if clear else "unequal"
    return replace(answer, statistic=wald[0], p_value=wald[1], law="asymptotic", evidence=evidence, notes=notes)


def _zone(first: float, second: float, threshold: float) -> str:
    """Return the verdict in words from the p of "this at least as good" and of "the other at least as good"."""
    if first <= threshold:
        return "this model at least as good: rejected"
    return "the other at least as good: rejected" if second <= threshold else "neither rejected"


def _three_zone(ours: Sample, theirs: Sample, settings: Settings) -> Answer:
    answer, found, _series = compare_scores(ours, theirs)
    if found is None or found.statistic is None:
        return answer
    first, second = one_sided(found.statistic, ours.days)
    half = settings.significance / 2.0
    notes = (
        *answer.notes,
        f"p of 'this model at least as good' {p_text(first)}, of 'the other at least as good' {p_text(second)}",
        f"each direction at {100 * half:g}%, so that equal models leave the middle in at most "
        f"{100 * settings.significance:g} of 100 reviews; p is twice the smaller",
        *_other_score(ours, theirs, half), *_roughness(ours.days),
    )  # fmt: skip
    return replace(
        answer, statistic=found.statistic, p_value=min(1.0, 2.0 * min(first, second)), law="asymptotic",
        direction=_zone(first, second, half), notes=notes,
    )  # fmt: skip


def _other_score(ours: Sample, theirs: Sample, threshold: float) -> tuple[str, ...]:
    """Say the verdict by the half-homogeneous score, where both models have a positive ES every day."""
    if not all((s.es > 0.0).all() for s in (ours, theirs)):
        return ()
    scores = [half_homogeneous(s.losses, s.var, s.es, s.level) for s in (ours, theirs)]
    found = mean_difference(scores[0] - scores[1])
    if found.statistic is None:
        return ()
    zone = _zone(*one_sided(found.statistic, ours.days), threshold)
    return (f"by the half-homogeneous score: {zone} (t {found.statistic:.3g})",)


TESTS = (
    PairTest("giacomini-white", "which is better", "Giacomini and White (2006), Econometrica 74", _giacomini_white),
    PairTest("three-zone", "which is better", "Nolde and Ziegel (2017), comparative backtests", _three_zone),
)
