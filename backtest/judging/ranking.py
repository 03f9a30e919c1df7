"""Which is better: the difference of two models' scores on the days they share."""

from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt
from scipy.special import stdtr, stdtrit

from backtest.judging.answers import Answer, PairTest, Settings
from backtest.judging.samples import Sample
from backtest.judging.scores import score_together

Floats = npt.NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class MeanDifference:
    """A mean score difference with its 95% interval, statistic and two-sided p; None where the series does not vary."""

    mean: float
    low: float | None
    high: float | None
    statistic: float | None
    p_value: float | None


def newey_west_lag(days: int) -> int:
    """Return floor(4 (T/100)^(2/9)), the lag used for every long-run variance here."""
    return int(np.floor(4.0 * (days / 100.0) ** (2.0 / 9.0)))


def long_run_variance(series: Floats) -> float:
    """Return the Newey-West long-run variance of a series float64[T]: Bartlett weights, autocovariances over T."""
    centred, days = series - series.mean(), len(series)
    total = float(centred @ centred)
    lag = min(newey_west_lag(days), days - 1)
    for j in range(1, lag + 1):
        total += 2.0 * (1.0 - j / (lag + 1.0)) * float(centred[j:] @ centred[:-j])
    return total / days


def small_sample_factor(days: int, horizon: int = 1) -> float:
    """Return sqrt((T + 1 - 2h + h(h - 1)/T)/T) of Harvey, Leybourne and Newbold (1997)."""
    return float(np.sqrt((days + 1 - 2 * horizon + horizon * (horizon - 1) / days) / days))


def mean_difference(differences: Floats) -> MeanDifference:
    """Test that score differences float64[T] have mean zero: Diebold-Mariano t with the small-sample factor, t(T - 1).

    Sources: Diebold and Mariano (1995); Harvey, Leybourne and Newbold (1997).
    """
    days, mean = len(differences), float(np.mean(differences))
    scale = float(np.max(np.abs(differences)))
    variance = long_run_variance(differences) if days > 1 else 0.0
    if variance <= (1e-12 * scale) ** 2:
        return MeanDifference(mean, None, None, None, None)
    error = float(np.sqrt(variance / days)) / small_sample_factor(days)
    half = float(stdtrit(days - 1, 0.975)) * error
    return MeanDifference(
        mean, mean - half, mean + half, mean / error, 2.0 * float(stdtr(days - 1, -abs(mean) / error))
    )


def shared_days(*samples: Sample) -> list[Sample]:
    """Return samples of the same desk, kind and level cut to the days they all have."""
    dates = samples[0].dates
    for sample in samples[1:]:
        dates = np.intersect1d(dates, sample.dates, assume_unique=True)
    return [sample.on(np.isin(sample.dates, dates)) for sample in samples]


def compare_scores(ours: Sample, theirs: Sample) -> tuple[Answer, MeanDifference | None, Floats]:
    """Return size and words that comparisons share (no p yet), the mean difference, and its series float64[T].

    Both samples are on the same days. Negative differences favour ``ours``. Without a p to be had the difference is
    None and the answer says what is missing.
    """
    if ours.days < 2:
        return Answer(used=ours, missing=f"needs 2 shared days, has {ours.days}"), None, np.empty(0)
    scored = score_together([ours, theirs])
    series = scored.scores[0] - scored.scores[1]
    found = mean_difference(series)
    better = found.mean < 0.0
    direction = ("lower" if better else "higher") + f" {scored.name} score than {theirs.model}"
    unit = "in the unit of the P&L" if scored.name == "tick" else "no unit"
    notes = [f"size: mean difference of the {scored.name} score ({unit}), negative favours this model", scored.note,
             f"exceptions on shared days {ours.exceptions} against {theirs.exceptions}",
             f"Newey-West lag {newey_west_lag(ours.days)}"]  # fmt: skip
    answer = Answer(
        used=ours, estimate=found.mean, low=found.low, high=found.high, evidence="better" if better else "worse",
        direction=direction if found.mean else "the same score", notes=tuple(n for n in notes if n),
    )  # fmt: skip
    if found.p_value is None:
        return replace(answer, missing="needs score differences that vary"), None, series
    return answer, found, series


def _diebold_mariano(ours: Sample, theirs: Sample, _: Settings) -> Answer:
    answer, found, _series = compare_scores(ours, theirs)
    if found is None:
        return answer
    return replace(answer, statistic=found.statistic, p_value=found.p_value, law="asymptotic")


TESTS = (
    PairTest(
        "diebold-mariano",
        "which is better",
        "Diebold and Mariano (1995); Harvey, Leybourne and Newbold (1997); score Patton, Ziegel and Chen (2019), eq. 6",
        _diebold_mariano,
    ),
)
