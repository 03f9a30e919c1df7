"""How deep: tests of the size of losses beyond VaR.

Where the forecast is no full distribution, the law is simulated from exceedances (see nulls). Effect size of both:
the multiple of the ES that would have sufficed.

Sides: mcneil-frey is one-sided, as published: large means ES too low. acerbi-szekely-2 is defined at zero exceptions
too, where it may be evidence of VaR or ES too high; its p is therefore twice the smaller of the two one-sided p, as in
``binomial``, and the one-sided p for too low, P(Z* <= Z), stands in the note.
"""

from dataclasses import replace

import numpy as np
import numpy.typing as npt

from backtest.judging.answers import Answer, SampleTest, Settings
from backtest.judging.es_samples import assumption, of_size, shapes_or, simulated_excesses, usable
from backtest.judging.nulls import ASSUMED_SHAPE, excess_blocks, generator, p_doubled, p_lower, p_upper
from backtest.judging.phrases import p_text
from backtest.judging.samples import Sample

Floats = npt.NDArray[np.float64]

FEWEST_EXCEPTIONS = 5
_DRAWS_AT_ONCE = 2_000_000


def residual_statistic(residuals: Floats) -> float:
    """Return t = mean/(s/sqrt n) of residuals float64[n], n >= 2, ddof 1; nan where they do not vary.

    Source: McNeil and Frey (2000), section 4.3.
    """
    n, spread = len(residuals), float(np.std(residuals, ddof=1))
    varies = spread > 1e-12 * float(np.max(np.abs(residuals)))
    return float(np.mean(residuals) / (spread / np.sqrt(n))) if varies else np.nan


def bootstrap_p(residuals: Floats, simulations: int, rng: np.random.Generator) -> float:
    """Return the one-sided bootstrap p of mean zero: (1 + #{t* >= t})/(B + 1), resampling centred residuals.

    residuals: float64[n], n >= 2. Source: Efron and Tibshirani (1993), p. 224, as used by McNeil and Frey (2000).
    """
    observed, centred, n = residual_statistic(residuals), residuals - residuals.mean(), len(residuals)
    larger, step = 0, max(1, _DRAWS_AT_ONCE // n)
    for start in range(0, simulations, step):
        picks = rng.integers(0, n, size=(min(step, simulations - start), n))
        drawn = centred[picks]
        larger += int(np.count_nonzero(_t(drawn.sum(axis=1), (drawn**2).sum(axis=1), n) >= observed))
    return (1 + larger) / (simulations + 1)


def _t(sums: Floats, squares: Floats, n: int) -> Floats:
    """Return the t of many samples of size n from sums and sums of squares; without spread infinite by sign."""
    means = sums / n
    variances = np.maximum(squares - n * means**2, 0.0) / (n - 1)
    flat = variances <= 1e-14 * squares / n
    error = np.sqrt(np.where(flat, 1.0, variances) / n)
    infinite = np.where(means > 0.0, np.inf, np.where(means < 0.0, -np.inf, 0.0))
    return np.asarray(np.where(flat, infinite, means / error))


def residual_null(scales: Floats, shapes: Floats, level: float, length: int, settings: Settings) -> Floats:
    """Simulate the t of McNeil-Frey residuals given which days are exceptions: float64[simulations].

    scales: (ES - VaR)/sigma on the n exception days; shapes: GPD shapes there. Given an exception, its residual
    (L - ES)/sigma is scale (W - 1), W the GPD excess of mean one; the days themselves carry nothing about severity.
    """
    sums = squares = np.zeros(settings.simulations)
    for part, excesses in excess_blocks(settings.seed, level, length, settings.simulations, shapes):
        centred, scale = excesses - 1.0, scales[part]
        sums, squares = sums + scale @ centred, squares + scale**2 @ centred**2
    return _t(sums, squares, len(scales))


def z2(losses: Floats, var: Floats, es: Floats, level: float) -> float:
    """Return Z2 = 1 - sum of L/ES over exceptions / (T (1 - level)): 0 expected, negative means ES understated.

    Source: Acerbi and Szekely (2014), their second statistic, in loss convention. No exception gives 1.
    """
    beyond = losses > var
    return float(1.0 - np.sum(losses[beyond] / es[beyond]) / (len(losses) * (1.0 - level)))


def z2_null(sample: Sample, shapes: Floats | float, settings: Settings) -> Floats:
    """Simulate Z2 from exceedances along the path of forecasts: float64[simulations].

    shapes: the GPD shape, one for all days or float64[T]; every day needs ES > VaR and ES > 0.
    """
    drawn, excesses = simulated_excesses(sample, shapes, settings)
    # a simulated exception adds L*/ES = VaR/ES + (1 - VaR/ES) W, W of mean one
    ratio = sample.var / sample.es
    total = drawn.sums(np.ones(len(drawn.days)), ratio) + drawn.sums(excesses, 1.0 - ratio)
    return 1.0 - total / (sample.days * sample.nominal)


def _mcneil_frey(sample: Sample, settings: Settings) -> Answer:
    used, missing, notes = usable(sample, sigma=True)
    if missing:
        return Answer(missing=missing)
    size, n = of_size(used, settings), used.exceptions
    tail = used.on(used.hits)
    residuals = (tail.losses - tail.es) / tail.sigma
    statistic = residual_statistic(residuals) if n > 1 else np.nan
    answer = replace(size, statistic=None if np.isnan(statistic) else statistic, evidence="es-low")
    if n < FEWEST_EXCEPTIONS:
        return replace(answer, missing=f"{n} exceptions, needs {FEWEST_EXCEPTIONS}", notes=size.notes + notes)
    if np.isnan(statistic):
        return replace(answer, missing="needs residuals that differ from one another", notes=size.notes + notes)
    return _mcneil_frey_p(answer, used, residuals, settings, notes)


def _mcneil_frey_p(
    answer: Answer, used: Sample, residuals: Floats, settings: Settings, notes: tuple[str, ...]
) -> Answer:
    tail, observed = used.on(used.hits), residual_statistic(residuals)
    scales = (tail.es - tail.var) / tail.sigma

    def p_at(assumed: float) -> float:
        shapes = np.broadcast_to(shapes_or(tail, assumed), scales.shape)
        return p_upper(residual_null(scales, shapes, used.level, used.days, settings), observed)

    rng = generator(settings.seed, "residual bootstrap", used.level, used.days)
    boot = f"bootstrap p of Efron and Tibshirani {p_text(bootstrap_p(residuals, settings.simulations, rng))}"
    said = (
        *answer.notes,
        "one-sided: large means ES too low",
        boot,
        *assumption(tail, p_at),
        *notes,
    )
    return replace(answer, p_value=p_at(ASSUMED_SHAPE), law="simulated", notes=said)


def _acerbi_szekely_2(sample: Sample, settings: Settings) -> Answer:
    used, missing, notes = usable(sample)
    if missing:
        return Answer(missing=missing)
    observed = z2(used.losses, used.var, used.es, used.level)
    null = z2_null(used, shapes_or(used, ASSUMED_SHAPE), settings)

    def p_at(assumed: float) -> float:
        return p_doubled(z2_null(used, shapes_or(used, assumed), settings), observed)

    size = of_size(used, settings)
    said = (
        *size.notes, "negative: ES understated; joint test of VaR and ES",
        f"p is twice the smaller tail; one-sided p for too low {p_text(p_lower(null, observed))}",
        *assumption(used, p_at), *notes,
    )  # fmt: skip
    side = "risk-low" if p_lower(null, observed) <= p_upper(null, observed) else "risk-high"
    p_value = p_doubled(null, observed)
    return replace(size, statistic=observed, p_value=p_value, law="simulated", evidence=side, notes=said)


TESTS = (
    SampleTest("mcneil-frey", "how deep", "McNeil and Frey (2000), section 4.3", _mcneil_frey),
    SampleTest("acerbi-szekely-2", "how deep", "Acerbi and Szekely (2014), second statistic", _acerbi_szekely_2),
)
