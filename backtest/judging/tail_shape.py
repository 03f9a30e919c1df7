"""What shape: likelihood ratios of the normal scores of the PIT, of all days and of the tail alone."""

from dataclasses import replace
from functools import lru_cache

import numpy as np
import numpy.typing as npt
from scipy.special import chdtrc, chdtri, ndtri

from backtest.judging.answers import Answer, SampleTest, Settings
from backtest.judging.censored import Sums, Tail, implied_tail, likelihood_ratio, sums_of
from backtest.judging.nulls import generator, p_upper
from backtest.judging.pits import Pits, read_pits, simulated_tails
from backtest.judging.samples import Sample

Floats = npt.NDArray[np.float64]

FEWEST_DAYS = 5
SIMULATED_TO = 500
"""Longest sample whose LR(3) is simulated; beyond it chi-square holds its size (tests/judging measure it)."""
_BLOCK = 1_000_000


def berkowitz_ratio(scores: Floats) -> Floats:
    """Return LR of z_t = mu + rho z_(t-1) + e, e ~ N(0, s^2), against (0, 0, 1), from scores float64[..., T].

    Conditional on the first day, whose density is in neither likelihood. Infinite where the scores are constant.
    Source: Berkowitz (2001), Journal of Business and Economic Statistics 19, 465-474 (from memory).
    """
    x, y = scores[..., :-1], scores[..., 1:]
    n = y.shape[-1]
    square = np.einsum("...t,...t->...", y, y)
    mx, my = x.mean(axis=-1), y.mean(axis=-1)
    xx = np.einsum("...t,...t->...", x, x) - n * mx**2
    yy = square - n * my**2
    xy = np.einsum("...t,...t->...", x, y) - n * mx * my
    flat = xx <= 1e-12 * square
    rest = yy - np.where(flat, 0.0, xy**2 / np.where(flat, 1.0, xx))
    varies = rest > 1e-12 * square
    variance = np.where(varies, rest, 1.0) / n
    return np.where(varies, np.maximum(square - n - n * np.log(variance), 0.0), np.inf)


@lru_cache(maxsize=32)
def berkowitz_null(seed: int, length: int, simulations: int) -> Floats:
    """Simulate LR(3) of independent normal scores, block by block: float64[simulations]; no level enters."""
    rng, step = generator(seed, "normal scores", 0.0, length), max(1, _BLOCK // length)
    sizes = [min(step, simulations - start) for start in range(0, simulations, step)]
    return np.concatenate([berkowitz_ratio(rng.standard_normal((size, length))) for size in sizes])


def _berkowitz(sample: Sample, settings: Settings) -> Answer:
    pits = read_pits(sample)
    if pits.missing:
        return Answer(missing=pits.missing)
    used, scores = pits.used, np.asarray(ndtri(pits.values))
    if used.days < FEWEST_DAYS:
        missing = f"needs {FEWEST_DAYS} days with a PIT, has {used.days}"
        return Answer(used=used, missing=missing, notes=pits.notes)
    statistic = float(berkowitz_ratio(scores))
    if not np.isfinite(statistic):
        return Answer(used=used, missing="needs PITs that differ from one another", notes=pits.notes)
    if used.days <= SIMULATED_TO:
        law, p_value = "simulated", p_upper(berkowitz_null(settings.seed, used.days, settings.simulations), statistic)
    else:
        law, p_value = "asymptotic", max(float(chdtrc(3, statistic)), np.finfo(float).tiny)
    return replace(_of_scale(scores), used=used, statistic=statistic, p_value=p_value, law=law, evidence="shape",
                   notes=(*_of_scale(scores).notes, *pits.notes))  # fmt: skip


def _of_scale(scores: Floats) -> Answer:
    """Return the size: the standard deviation of the scores with its chi-square interval; 1 if right."""
    n, spread = len(scores), float(np.std(scores, ddof=1))
    low, high = (spread * float(np.sqrt((n - 1) / chdtri(n - 1, tail))) for tail in (0.025, 0.975))
    direction = "forecast too narrow" if low > 1.0 else "forecast too wide" if high < 1.0 else ""
    x, y = scores[:-1] - scores[:-1].mean(), scores[1:]
    within = float(x @ x)
    rho = f", slope on the day before {float(x @ y) / within:.3g}" if within > 1e-12 * float(scores @ scores) else ""
    notes = (
        "size: standard deviation of the normal scores, 1 if the forecast is right; interval as for independent ones",
        f"mean of the scores {scores.mean():.3g}{rho}",
    )
    return Answer(estimate=spread, low=low, high=high, direction=direction, notes=notes)


@lru_cache(maxsize=32)
def tail_ratio_null(seed: int, level: float, length: int, simulations: int) -> Floats:
    """Simulate the censored LR of independent uniform PITs: float64[simulations]."""
    tails = simulated_tails(seed, level, length, simulations)
    y = tails.scores - float(ndtri(level))
    return likelihood_ratio(Sums(length, tails.counts, tails.sums(y), tails.sums(y * y)), level)


def of_tail(pits: Pits) -> Answer:
    """Return the size of tests of the tail's shape: the ES that the fitted normal tail implies, and the side."""
    level = pits.used.level
    if not pits.beyond.any():
        return Answer(used=pits.used, evidence="tail-heavy", notes=("no PIT above the level: no size", *pits.notes))
    tail = implied_tail(sums_of(pits.scores, level, pits.used.days), level)
    if tail.multiple <= 0.0:
        few = "too few PITs above the level for a size: the fitted tail implies no positive ES"
        return Answer(used=pits.used, evidence="tail-heavy", notes=(few, *pits.notes))
    sided = "tail too thin" if tail.low > 1.0 else ""
    if tail.high is not None and tail.high < 1.0:
        sided = "tail too heavy"
    return Answer(
        used=pits.used, estimate=tail.multiple, low=tail.low, high=tail.high, direction=sided,
        evidence="tail-thin" if tail.multiple > 1.0 else "tail-heavy", notes=(*_words(tail, level), *pits.notes),
    )  # fmt: skip


def _words(tail: Tail, level: float) -> tuple[str, ...]:
    c = float(ndtri(level))
    return (
        "size: ES implied by the normal tail fitted to the scores above the level, as a multiple of the forecast's, "
        "on the scale of normal scores (the multiple in money if the forecast is normal about 0)",
        f"fitted mean {tail.mean:.3g}, scale {tail.scale:.3g} (0 and 1 if the forecast is right); "
        f"VaR multiple on that scale {(tail.mean + tail.scale * c) / c:.3g}",
        *(("no upper limit found below 20",) if tail.high is None else ()),
    )


def _berkowitz_tail(sample: Sample, settings: Settings) -> Answer:
    pits = read_pits(sample)
    if pits.missing:
        return Answer(missing=pits.missing)
    used = pits.used
    statistic = float(likelihood_ratio(sums_of(pits.scores, used.level, used.days), used.level)[0])
    null = tail_ratio_null(settings.seed, used.level, used.days, settings.simulations)
    answer = of_tail(pits)
    limit = ("statistic is the limit -2 T ln(level)",) * (not pits.beyond.any())
    return replace(answer, statistic=statistic, p_value=p_upper(null, statistic), law="simulated",
                   notes=(*answer.notes, *limit))  # fmt: skip


TESTS = (
    SampleTest("berkowitz", "what shape", "Berkowitz (2001), LR with three degrees of freedom", _berkowitz),
    SampleTest("berkowitz-tail", "what shape", "Berkowitz (2001), tail LR censored at the level", _berkowitz_tail),
)
