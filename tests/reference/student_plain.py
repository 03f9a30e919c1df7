"""The t laws written plainly, from Hansen (1994, International Economic Review 35), equations 10 to 13, of the loss."""

import numpy as np
from scipy.stats import t as student


def constants(nu: float, skew: float) -> tuple[float, float, float]:
    """Hansen's a, b and c."""
    c = np.exp(student.logpdf(0, nu)) * np.sqrt(nu / (nu - 2))
    a = 4 * skew * c * (nu - 2) / (nu - 1)
    return a, np.sqrt(1 + 3 * skew**2 - a**2), c


def hansen(z: np.ndarray, nu: float, skew: float) -> np.ndarray:
    """Log-density of the law of zero mean and unit variance."""
    a, b, c = constants(nu, skew)
    y = (b * z + a) / np.where(z < -a / b, 1 - skew, 1 + skew)
    return np.log(b * c) - 0.5 * (nu + 1) * np.log1p(y**2 / (nu - 2))


def two_piece(x: np.ndarray, mode: float, tau: float, nu: float, skew: float) -> np.ndarray:
    """Log-density of Student's t, stretched by 1 + skew above the mode and by 1 - skew below it."""
    side = tau * np.where(x >= mode, 1 + skew, 1 - skew)
    return student.logpdf((x - mode) / side, nu) - np.log(tau)


def standard_law(nu: float, skew: float) -> np.ndarray:
    """Mode, scale, nu, lambda of the law of zero mean and unit variance."""
    a, b, _ = constants(nu, skew)
    return np.array([-a / b, np.sqrt((nu - 2) / nu) / b, nu, skew])
