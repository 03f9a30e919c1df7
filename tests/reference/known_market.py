"""Reviews of a market in which every null is exactly true, and p-values whose ties are broken at random."""

import sys
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import replace

import numpy as np

from backtest.judging import counts, coverage, first_exception, graded, independence, nulls
from backtest.judging.alternatives import reviews_of
from backtest.judging.samples import Sample


def right_reviews(level: float, length: int, *, reviews: int, days: int, seed: int) -> Iterator[Sample]:
    """Yield reviews of right forecasts whose losses beyond VaR are GPD, as tests simulate exceedances.

    The GARCH path, its VaR, ES and PIT are those of alternatives.py; only the size of a loss beyond VaR is drawn anew
    from its PIT, by the GPD with the forecast's shape that reproduces VaR and ES (a t5 tail does so in its first two
    moments only).
    """
    for sample in reviews_of("right", level, length, reviews=reviews, days=days, seed=seed):
        beyond, xi = sample.pit > level, sample.shape
        share = np.where(beyond, (1.0 - sample.pit) / (1.0 - level), 1.0)
        excess = (sample.es - sample.var) * (1.0 - xi) / xi * (share**-xi - 1.0)
        yield replace(sample, losses=np.where(beyond, sample.var + excess, sample.losses))


@contextmanager
def ties_broken(rng: np.random.Generator) -> Iterator[None]:
    """Let every p of judging break ties at random, as Dufour (2006) does: exact at any level, for size studies only.

    Each function that counts ties as extreme is replaced wherever judging has imported it.
    """
    swaps = _randomised(rng)
    modules = [m for name, m in sys.modules.items() if name.startswith("backtest.judging")]
    modules.remove(graded)  # it looks for its own points with the exact tails
    places = [(m, name, value) for m in modules for name, value in vars(m).items() if id(value) in swaps]
    try:
        for module, name, value in places:
            setattr(module, name, swaps[id(value)])
        yield
    finally:
        for module, name, value in places:
            setattr(module, name, value)


def _randomised(rng: np.random.Generator) -> dict[int, object]:
    def lower(null: np.ndarray, observed: float) -> float:
        tied = np.abs(null - observed) <= 1e-9 * abs(observed)
        below = np.count_nonzero((null < observed) & ~tied)
        return float((below + rng.random() * (np.count_nonzero(tied) + 1)) / (len(null) + 1))

    def upper(null: np.ndarray, observed: float) -> float:
        return lower(-null, -observed)

    def doubled(null: np.ndarray, observed: float) -> float:
        p = lower(null, observed)
        return 2.0 * min(p, 1.0 - p)

    def two_sided(count: int, days: int, rate: float) -> float:
        here = counts.at_most(count, days, rate) - counts.at_most(count - 1, days, rate)
        p = counts.at_most(count - 1, days, rate) + rng.random() * here
        return 2.0 * min(p, 1.0 - p)

    def kupiec_p(count: int, days: int, rate: float) -> float:
        ratios, weights = coverage._kupiec_law(days, rate)
        beyond = weights[ratios > ratios[count] * (1.0 + 1e-9)].sum()
        tied = weights[np.abs(ratios - ratios[count]) <= 1e-9 * ratios[count]].sum()
        return float(beyond + rng.random() * tied)

    old_tail = independence.tail

    def tail(law: tuple[np.ndarray, np.ndarray], observed: float) -> float:
        values, tails = law
        place = int(np.searchsorted(values, observed * (1.0 + 1e-9) + 1e-12, side="right"))
        beyond = float(tails[place]) if place < len(tails) else 0.0
        return beyond + rng.random() * (old_tail(law, observed) - beyond)

    old_tails = graded.tails

    def tails(*sum_of_grades: float) -> tuple[float, float]:
        low, high = old_tails(*sum_of_grades)
        p = low - rng.random() * max(0.0, low + high - 1.0)  # the two tails share the atom
        return p, 1.0 - p

    old_first = first_exception.first_exception_p

    def first(day: int, rate: float) -> float:
        return old_first(day, rate) - rng.random() * rate * (1.0 - rate) ** (day - 1)

    swaps = (
        (nulls.p_lower, lower),
        (nulls.p_upper, upper),
        (nulls.p_doubled, doubled),
        (counts.two_sided, two_sided),
        (coverage.kupiec_p, kupiec_p),
        (old_tail, tail),
        (old_tails, tails),
        (old_first, first),
    )
    return {id(old): new for old, new in swaps}
