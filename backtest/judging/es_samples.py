"""What the tests of ES share: the days they can use, assumed shapes, simulated exceptions, size, and the answer."""

from collections.abc import Callable
from dataclasses import replace

import numpy as np
import numpy.typing as npt

from backtest.judging.answers import Answer, Settings
from backtest.judging.multiples import sufficient_es_multiple
from backtest.judging.nulls import (
    ASSUMED_SHAPE,
    OTHER_SHAPES,
    Exceedances,
    exceedances,
    excess_of_mean_one,
    excesses_of_shape,
)
from backtest.judging.phrases import p_text
from backtest.judging.pits import NEAREST, kept_inside
from backtest.judging.samples import Sample

Floats = npt.NDArray[np.float64]

_UNUSABLE_SHARE = 0.05


def usable(sample: Sample, *, sigma: bool = False) -> tuple[Sample, str, tuple[str, ...]]:
    """Return the days a test of ES can use, what is missing if it cannot be asked, and what was left out."""
    for name in ("es", "sigma") if sigma else ("es",):
        if np.all(np.isnan(getattr(sample, name))):
            return sample, f"needs {name}", ()
    known = sample.on(~np.isnan(sample.es) & ~(sigma & np.isnan(sample.sigma)))
    if known.days == 0:
        return sample, "needs es and sigma on the same days", ()
    good = (known.es > known.var) & (known.es > 0.0) & ~(known.shape >= 1.0) & ~(sigma & (known.sigma <= 0.0))
    used, bad = known.on(good), int(np.count_nonzero(~good))
    what = "positive ES above VaR" + (", sigma above 0" if sigma else "")
    if bad > _UNUSABLE_SHARE * known.days:
        return used, f"needs {what} (and a tail shape below 1), {bad} of {known.days} days are not so", ()
    notes = (f"{sample.days - known.days} days without {'ES or sigma' if sigma else 'ES'} left out",) * (
        known.days < sample.days
    )
    return used, "", notes + (f"{bad} days without {what} left out",) * (bad > 0)


def usable_with_pit(sample: Sample) -> tuple[Sample, str, tuple[str, ...]]:
    """Return the same, on days whose PIT is known, with the PIT kept off 0 and 1 and what was clipped said."""
    used, missing, notes = usable(sample)
    if missing:
        return used, missing, notes
    known = ~np.isnan(used.pit)
    if not known.any():
        return used, "needs pit", notes
    if not known.all():
        notes = (*notes, f"{int(np.count_nonzero(~known))} days without PIT left out")
    used = used.on(known)
    pit, clipped = kept_inside(used.pit)
    notes += (f"{clipped} PITs clipped to {NEAREST:g} from 0 or 1",) * (clipped > 0)
    repeated = len(np.unique(pit)) < len(pit) - max(clipped - 1, 0)
    notes += ("PITs repeat: ranks, whose law is coarser than the uniform one simulated",) * repeated
    return replace(used, pit=pit), "", notes


def of_size(used: Sample, settings: Settings) -> Answer:
    """Return the effect size the tests share: the multiple of the ES that would have sufficed."""
    size = sufficient_es_multiple(used.losses, used.es, used.level, settings.seed)
    # Never "too high": with tails heavier than the interval assumes its upper end is too low.
    direction = "ES too low" if size.low is not None and size.low > 1.0 else ""
    return Answer(
        used=used, estimate=size.estimate, low=size.low, high=size.high, direction=direction,
        notes=("size: the multiple of this ES that would have sufficed",),
    )  # fmt: skip


def shapes_or(used: Sample, assumed: float) -> Floats | float:
    """Return the forecast's shapes, the assumed one where it has none; one number where no day has its own."""
    lacking = np.isnan(used.shape)
    return assumed if lacking.all() else np.where(lacking, assumed, used.shape)


def assumption(used: Sample, p_at: Callable[[float], float]) -> tuple[str, ...]:
    """Return what was assumed about tail shapes, with the p at others beside it; ``p_at`` gives p at a shape."""
    lacking = int(np.count_nonzero(np.isnan(used.shape)))
    if not lacking:
        return ("excesses simulated with the forecast's own GPD shape",)
    beside = ", ".join(f"{p_text(p_at(shape))} at shape {shape:g}" for shape in OTHER_SHAPES)
    return (f"GPD shape {ASSUMED_SHAPE:g} assumed on {lacking} of {used.days} days; p {beside}",)


def simulated_excesses(sample: Sample, shapes: Floats | float, settings: Settings) -> tuple[Exceedances, Floats]:
    """Return simulated exceptions of N paths and, for each, its excess in units of ES - VaR (mean one)."""
    where = (settings.seed, sample.level, sample.days, settings.simulations)
    drawn = exceedances(*where)
    if isinstance(shapes, float):
        return drawn, excesses_of_shape(*where, shapes)
    return drawn, excess_of_mean_one(drawn.exponentials, shapes[drawn.days])


def simulated_answer(
    used: Sample,
    settings: Settings,
    observed: float,
    null: Callable[[Floats | float], Floats],
    p_of: Callable[[Floats, float], float],
    said: tuple[str, ...],
) -> Answer:
    """Return the answer whose p is ``p_of(null(shapes), observed)``, with the size, the notes and what was assumed.

    ``null`` simulates the statistic given GPD shapes, ``p_of`` is one of nulls.p_lower, p_upper, p_doubled.
    """

    def p_at(assumed: float) -> float:
        return p_of(null(shapes_or(used, assumed)), observed)

    size = of_size(used, settings)
    notes = (*size.notes, *said, *assumption(used, p_at))
    return replace(size, statistic=observed, p_value=p_at(ASSUMED_SHAPE), law="simulated", notes=notes)
