"""Joint regression of VaR and ES on their forecasts, many samples at once.

Loss: Fissler and Ziegel's with logarithm (FZ0), [v + (L - v)^+/a]/e + log e. Minimised in two steps: v by quantile
regression (each strictly consistent loss has the same true line), then e given v. An error of v enters e only at
second order (the derivative of v + E(L - v)^+/a vanishes at the true VaR), so e has the law of the joint minimiser to
first order: Dimitriadis and Bayer (2019), Electronic Journal of Statistics 13; Barendse (2020) (both from memory).
"""

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]

_HALVINGS = 40
_ROUNDS = 30
_SETTLED = 1e-11
_FLOOR = 0.05
_ROUNDING = 1e-9


def quantile_line(losses: Floats, regressor: Floats, level: float) -> Floats:
    """Return the fitted ``level`` quantile of each sample on (1, regressor): losses float64[n, T], fit float64[n, T].

    Given a slope the best constant is a quantile of the residuals; the slope is found by bisection of the subgradient,
    which falls in it. The regressor must vary.
    """
    paths, days = losses.shape
    x = (regressor - regressor.mean()) / regressor.std()
    place = int(np.ceil(days * level - _ROUNDING)) - 1
    high = 10.0 * np.max(np.abs(losses), axis=1, initial=0.0) + 1e-300
    low, at = -high, np.zeros(paths)
    for _ in range(_HALVINGS):
        at = (low + high) / 2.0
        residuals = losses - at[:, None] * x
        constant = np.partition(residuals, place, axis=1)[:, place, None]
        on, above = residuals == constant, residuals > constant
        share = days * (1.0 - level) - above.sum(axis=1)  # the quantile's own day takes up the rest of the mass
        rising = above @ x + share * (on @ x) / on.sum(axis=1) > 0.0
        low, high = np.where(rising, at, low), np.where(rising, high, at)
    return np.asarray(constant + at[:, None] * x)


def es_line(losses: Floats, var: Floats, es: Floats, level: float) -> tuple[Floats, Floats]:
    """Return constant and slope of ES on (1, ES forecast), and their robust covariance, for each sample.

    losses: float64[n, T]; var, es: forecasts float64[T], es > 0, both varying. Returns float64[n, 2], float64[n, 2, 2].
    Fisher scoring from the forecast itself; a fitted ES below a twentieth of its forecast counts as that much in the
    weights, so that the loss stays defined. Covariance: sandwich with each day's own score.
    """
    fit = quantile_line(losses, var, level)
    target = fit + np.maximum(losses - fit, 0.0) / (1.0 - level)  # its conditional mean is the ES
    unit = float(np.mean(es))
    target, x = target / unit, es / unit  # all in units of the mean forecast
    line = np.tile([0.0, 1.0], (len(losses), 1))
    for _ in range(_ROUNDS):
        before, fitted = line, _fitted(line, x)
        scores = np.stack([np.sum(target / fitted**2, axis=1), (target / fitted**2) @ x], axis=1)
        line = np.linalg.solve(_products(fitted**-2.0, x), scores[:, :, None])[:, :, 0]
        if np.max(np.abs(line - before)) < _SETTLED:
            break
    fitted = _fitted(line, x)
    inverse = np.linalg.inv(_products(fitted**-2.0, x))
    residuals = target - line[:, :1] - line[:, 1:] * x
    covariance = inverse @ _products(residuals**2 / fitted**4, x) @ inverse
    scale = np.array([unit, 1.0])
    return line * scale, covariance * np.outer(scale, scale)


def _fitted(line: Floats, x: Floats) -> Floats:
    return np.maximum(line[:, :1] + line[:, 1:] * x, _FLOOR * x)


def _products(weights: Floats, x: Floats) -> Floats:
    """Return the weighted sums of (1, x)'(1, x): weights float64[n, T] to float64[n, 2, 2]."""
    sums = weights @ np.stack([np.ones_like(x), x, x, x * x], axis=1)
    return np.asarray(sums.reshape(-1, 2, 2))


def wald(line: Floats, covariance: Floats, expected: Floats) -> Floats:
    """Return (line - expected)' covariance^-1 (line - expected) of each sample: float64[n]."""
    apart = line - expected
    return np.asarray(np.einsum("ni,ni->n", apart, np.linalg.solve(covariance, apart[:, :, None])[:, :, 0]))
