"""Standard errors of quantile and shortfall where the tail is a normal, t or skewed t law.

Fitted location and scale of a normal law: delta method with the sample's own third and fourth moments, so that they
hold where losses are not normal. Fitted t laws: delta method with the observed information. A standard normal law, and
a shape that was fitted with the filter, have no error here.
"""

import numpy as np

from backtest.forecasting.filters import Filtered
from backtest.forecasting.tail_laws import read_laws
from backtest.kernels.information import STEP, law_information


def law_errors(filtered: Filtered, laws: np.ndarray, kind: str, levels: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return the standard errors (n, L) of quantile and shortfall, in residual units; NaN where there is no answer.

    ``laws`` (n, 4: mode, scale, nu, lambda): those of the block's tails, of ``kind`` "normal", "t" or "skew-t".
    """
    shape = (len(laws), len(levels))
    quantile, shortfall = np.zeros(shape), np.zeros(shape)
    normal = np.isinf(laws[:, 2])
    if not filtered.law and normal.any():
        quantile[normal], shortfall[normal] = normal_errors(filtered.residuals[normal], laws[normal], levels)
    fitted = ~normal & ~_with_the_filter(filtered, kind)
    if fitted.any():
        samples = np.ascontiguousarray(filtered.residuals[fitted])
        quantile[fitted], shortfall[fitted] = student_errors(
            samples, laws[fitted], levels, filtered.law != "", kind == "skew-t"
        )
    return quantile, shortfall


def _with_the_filter(filtered: Filtered, kind: str) -> np.ndarray:
    given = filtered.law == kind and len(filtered.shape) > 0
    return ~np.isnan(filtered.shape[:, 0]) if given else np.zeros(len(filtered.residuals), dtype=bool)


def normal_errors(samples: np.ndarray, laws: np.ndarray, levels: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return the standard errors (n, L) of mean + z sd and mean + D sd, D = phi(z)/(1 - q), of each row of a sample.

    Variance of mean + a sd over m days: sd^2 (1 + a skewness + a^2 (kurtosis - 1)/4)/m.
    """
    mean, spread = laws[:, 0, None], laws[:, 1, None]
    z = np.divide(samples - mean, spread, out=np.zeros_like(samples), where=spread > 0.0)
    third, fourth = (z**3).mean(axis=1)[:, None], (z**4).mean(axis=1)[:, None]
    standard = np.array([[0.0, 1.0, np.inf, 0.0]])
    depths = read_laws(standard, levels)
    parts = (np.maximum(1.0 + a * third + 0.25 * a * a * (fourth - 1.0), 0.0) for a in depths)
    quantile, shortfall = (spread * np.sqrt(part / samples.shape[1]) for part in parts)
    return quantile, shortfall


def student_errors(
    samples: np.ndarray, laws: np.ndarray, levels: np.ndarray, standard: bool, skewed: bool
) -> tuple[np.ndarray, np.ndarray]:
    """Return the standard errors (n, L) of t and skewed t laws fitted to ``samples`` (n, m) by likelihood.

    ``standard``: the shape alone was fitted. NaN where the information is not positive definite, as at a bound.
    """
    free = [i for i in range(4) if (i >= 2 or not standard) and (i < 3 or skewed)]
    information, sides = law_information(samples, laws, standard)
    information = information[:, free][:, :, free]
    regular = np.isfinite(information).all(axis=(1, 2))
    information[~regular] = np.eye(len(free))
    regular &= np.linalg.eigvalsh(information)[:, 0] > 0.0
    information[~regular] = np.eye(len(free))
    covariance = np.linalg.inv(information)
    around = sides[:, free].reshape(-1, 4)
    out = []
    for read in read_laws(around, levels):
        slope = np.diff(read.reshape(len(laws), len(free), 2, len(levels)), axis=2)[:, :, 0] / (2.0 * STEP)
        variance = np.einsum("nal,nab,nbl->nl", slope, covariance, slope)
        out.append(np.where(regular[:, None], np.sqrt(np.maximum(variance, 0.0)), np.nan))
    return out[0], out[1]
