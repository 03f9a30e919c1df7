"""Running: evidence against a forecast that may be looked at every day.

An e-value has mean at most one if VaR is right (and ES not too low); capital that bets a share of itself on e-values
day by day grows only if they are larger. However often one looks, it reaches 20 for at most 1 correct model in 20
(Ville's inequality); it is never started anew.

The answer carries p = min(1, 1/largest value so far), law "exact": no approximation is in it, at any length and any
stopping time, and it is at most 5% exactly when 20 is reached, so that decision and phrase say what the mark "act"
says. It is a bound, usually far above the true chance; criteria and powers at a fixed length leave it out.
"""

from typing import Literal

import numpy as np
import numpy.typing as npt

from backtest.judging.answers import Answer, SampleTest, Settings
from backtest.judging.coverage import NO_DAYS
from backtest.judging.samples import Sample

Floats = npt.NDArray[np.float64]
Method = Literal["mixed", "past e-values", "past losses"]

METHODS: tuple[Method, ...] = ("mixed", "past e-values", "past losses")
LOOK, ACT = 10.0, 20.0
MARKS = "reaching 20 happens to at most 1 correct model in 20, however often one looks"
LARGEST = 1e300
"""Capital above this, and infinite capital in an answer, is written as this."""

_LARGEST_BET = 0.5
_EQUAL = 1e-12
_BLOCK = 128


def e_values(losses: Floats, var: Floats, es: Floats | None, level: float) -> Floats:
    """Return e-values, elementwise: hit/a for VaR alone (es None), else (L - VaR)^+/(a (ES - VaR)) for VaR and ES.

    Where ES equals VaR a loss beyond it has the value infinity (the forecast calls it impossible) and any other the
    value 1; where ES is below VaR, which no law allows, the value is infinity.
    Source: Wang, Wang and Ziegel, arXiv 2209.00991.
    """
    if es is None:
        return np.asarray((losses > var) / (1.0 - level))
    gap, excess = es - var, np.maximum(losses - var, 0.0)
    close = np.abs(gap) <= _EQUAL * np.abs(var)
    regular = (gap > 0.0) & ~close
    ordinary = excess / ((1.0 - level) * np.where(regular, gap, 1.0))
    return np.where(regular, ordinary, np.where(close & (excess == 0.0), 1.0, np.inf))


def capital(losses: Floats, var: Floats, es: Floats | None, level: float, method: Method = "mixed") -> Floats:
    """Return the capital at the end of each day, started at 1: float64[T], infinite from the first infinite e-value on.

    losses, var, es: float64[T] in order of time; es None: VaR alone. The share bet on a day is fixed the day before:
    sum of (e - 1)/sum of (e - 1)^2 over the past, within 0 and 1/2. "past e-values" takes them as they were,
    "past losses" with past losses set against today's forecast; "mixed" is the average of the two capitals.
    Source: Wang, Wang and Ziegel, arXiv 2209.00991 (their GREE, GREL and GREM).
    """
    values = e_values(losses, var, es, level)
    endless = np.isinf(values)
    values = np.where(endless, 1.0, values)
    logs = []
    if method != "past losses":
        logs.append(_log_capital(values, _bets(*_past_sums(values))))
    if method != "past e-values":
        logs.append(_log_capital(values, _bets(*_sums_today(losses, var, es, level))))
    average = np.logaddexp.reduce(logs, axis=0) - np.log(len(logs))
    path = np.where(average < np.log(LARGEST), np.exp(np.minimum(average, np.log(LARGEST))), LARGEST)
    return np.where(np.logical_or.accumulate(endless), np.inf, path)


def _past_sums(values: Floats) -> tuple[Floats, Floats]:
    """Return, for each day, the sums of e and e^2 over the days before."""
    before = np.concatenate([[0.0], values[:-1]])
    return np.cumsum(before), np.cumsum(before**2)


def _sums_today(losses: Floats, var: Floats, es: Floats | None, level: float) -> tuple[Floats, Floats]:
    """Return the same sums with past losses set against each day's forecast."""
    count, sums, squares = _past_excesses(losses, var)
    if es is None:
        return count / (1.0 - level), count / (1.0 - level) ** 2
    gap = es - var
    scale = (1.0 - level) * np.where(gap > _EQUAL * np.abs(var), gap, np.inf)  # elsewhere no bet matters
    return sums / scale, squares / scale**2


def _past_excesses(losses: Floats, var: Floats) -> tuple[Floats, Floats, Floats]:
    """Return, for each day, number, sum and sum of squares of L - VaR of the past losses beyond that day's VaR."""
    days, found = np.arange(len(losses)), np.zeros((3, len(losses)))
    large = np.flatnonzero(losses > var.min())  # no other loss is ever beyond
    for start in range(0, len(losses), _BLOCK):
        today = days[start : start + _BLOCK, None]
        past = large[large < today[-1]]
        excess = np.maximum(losses[past] - var[today], 0.0) * (past < today)
        found[:, start : start + _BLOCK] = (
            np.count_nonzero(excess, axis=1), excess.sum(axis=1), np.einsum("ij,ij->i", excess, excess)
        )  # fmt: skip
    return found[0], found[1], found[2]


def _bets(sums: Floats, squares: Floats) -> Floats:
    days = np.arange(len(sums))
    gain, spread = sums - days, squares - 2.0 * sums + days
    varies = spread > 1e-12 * np.maximum(days, 1)
    return np.clip(np.where(varies, gain / np.where(varies, spread, 1.0), 0.0), 0.0, _LARGEST_BET)


def _log_capital(values: Floats, bets: Floats) -> Floats:
    return np.cumsum(np.log1p(bets * (values - 1.0)))


def _e_process(sample: Sample, _: Settings) -> Answer:
    if sample.days == 0:
        return NO_DAYS
    of_var = capital(sample.losses, sample.var, None, sample.level)
    known = sample.on(~np.isnan(sample.es))
    if known.days == 0:
        return _answer(sample, of_var, "var-low", ("VaR alone",))
    path = capital(known.losses, known.var, known.es, known.level)
    alone = f"VaR alone: now {_text(of_var[-1])}, largest {_text(of_var.max())}"
    left_out, impossible = sample.days - known.days, int(np.count_nonzero(np.isinf(path)))
    notes: tuple[str, ...] = ("VaR and ES together", alone)
    if left_out:
        notes += (f"{left_out} days without ES left out",)
    if impossible:
        day = known.dates[len(path) - impossible]
        why = "a loss beyond VaR where ES equals VaR, or ES below VaR"
        notes += (f"infinite since {day}: {why}; written as {LARGEST:g}",)
    return _answer(known, path, "risk-low", notes)


def _answer(used: Sample, path: Floats, evidence: str, notes: tuple[str, ...]) -> Answer:
    largest, now = (min(float(value), LARGEST) for value in (path.max(), path[-1]))
    mark = "act: 20 was reached" if largest >= ACT else "look: 10 was reached" if largest >= LOOK else "below 10"
    return Answer(
        used=used, statistic=largest, p_value=min(1.0, 1.0 / largest), law="exact", estimate=now, direction=mark,
        evidence=evidence, notes=("statistic: largest value so far; size: value now", MARKS, *notes),
    )  # fmt: skip


def _text(value: float) -> str:
    return f"{value:.3g}"


TESTS = (SampleTest("e-process", "running", "Wang, Wang and Ziegel, arXiv 2209.00991", _e_process),)
