"""Second implementations of the tests of ES: plain and slow, written apart from the package."""

import numpy as np
from scipy import integrate, optimize, special, stats

from tests.reference.judging_laws import es_t


def right_forecasts(nu: float, level: float) -> tuple[float, float]:
    """Return VaR and ES of a Student t (or, nu infinite, a standard normal) loss."""
    if nu == np.inf:
        var = float(stats.norm.ppf(level))
        return var, float(stats.norm.pdf(var) / (1 - level))
    return float(stats.t.ppf(level, nu)), es_t(nu, level)


def tail_losses(rng: np.random.Generator, nu: float, level: float, shape: tuple[int, int]) -> np.ndarray:
    """Return losses of t or normal law beyond VaR, and 0 on every day without exception."""
    exceeded = rng.random(shape) < 1 - level
    chances = rng.random(int(exceeded.sum())) * (1 - level)
    losses = np.zeros(shape)
    losses[exceeded] = stats.norm.isf(chances) if nu == np.inf else stats.t.isf(chances, nu)
    return losses


def gpd_quantile(chance: np.ndarray, var: float, es: float, xi: float, level: float) -> np.ndarray:
    """Return the loss passed with a chance, of a GPD tail with this VaR, ES and shape."""
    relative = chance / (1 - level)
    beta = (es - var) * (1 - xi)
    return var - beta * np.log(relative) if xi == 0 else var + beta * (relative**-xi - 1) / xi


def z3_day_by_day(pit: np.ndarray, var: np.ndarray, es: np.ndarray, shapes: np.ndarray, level: float) -> float:
    """Return Z3 with each day's own quantiles and the expectation of each order statistic by quadrature."""
    days = len(pit)
    count = int(np.floor(days * (1 - level) + 1e-9))
    worst, total = np.sort(1 - pit)[:count], 0.0
    for v, e, xi in zip(var, es, shapes, strict=True):
        expected = 0.0
        for j in range(1, count + 1):
            law = stats.beta(j, days - j + 1)
            expected += integrate.quad(
                lambda s, law=law, v=v, e=e, xi=xi: law.pdf(s) * gpd_quantile(s, v, e, xi, level), 0, 1, limit=200
            )[0]
        total += gpd_quantile(worst, v, e, xi, level).sum() / expected
    return 1 - total / days


def two_sided_plain(losses: np.ndarray, var: np.ndarray, es: np.ndarray, level: float) -> float:
    """Return T mean(V)' Omega^-1 mean(V) from the V of every day."""
    hit = losses > var
    v = np.stack([1 - level - hit, var - es + hit * (losses - var) / (1 - level)])
    mean, omega = v.mean(axis=1), v @ v.T / len(losses)
    return float(len(losses) * mean @ np.linalg.solve(omega, mean))


def one_sided_plain(losses: np.ndarray, var: np.ndarray, es: np.ndarray, level: float) -> float:
    hit = losses > var
    v1, v2 = 1 - level - hit, var - es + hit * (losses - var) / (1 - level)
    t = [np.sqrt(len(losses)) * v.mean() / np.sqrt((v**2).mean()) for v in (-v1, v2)]
    return float(max(t))


def general_plain(losses: np.ndarray, var: np.ndarray, es: np.ndarray, sigma: np.ndarray, level: float) -> float:
    """Return the general statistic from h_t = ((ES - VaR)/(1 - level), 1)/sigma times V_t on every day."""
    hit = losses > var
    v1, v2 = 1 - level - hit, var - es + hit * (losses - var) / (1 - level)
    q = ((es - var) / (1 - level) * v1 + v2) / sigma
    return float(len(losses) * q.mean() ** 2 / (q**2).mean())


def quantile_loss(losses: np.ndarray, fit: np.ndarray, level: float) -> float:
    return float(np.sum((losses - fit) * (level - (losses < fit))))


def quantile_line_by_programme(losses: np.ndarray, x: np.ndarray, level: float) -> np.ndarray:
    """Return the fitted quantile line from a linear programme."""
    days = len(losses)
    cost = np.concatenate([np.zeros(2), np.full(days, level), np.full(days, 1 - level)])
    equal = np.hstack([np.ones((days, 1)), x[:, None], np.eye(days), -np.eye(days)])
    bounds = [(None, None)] * 2 + [(0, None)] * (2 * days)
    found = optimize.linprog(cost, A_eq=equal, b_eq=losses, bounds=bounds)
    return np.asarray(found.x[0] + found.x[1] * x)


def fz0_line(losses: np.ndarray, fit: np.ndarray, es: np.ndarray, level: float) -> np.ndarray:
    """Return the ES line that minimises FZ0 given the VaR line, by Nelder and Mead."""

    def loss(line: np.ndarray) -> float:
        e = line[0] + line[1] * es
        if np.any(e <= 0):
            return np.inf
        return float(np.mean((fit + np.maximum(losses - fit, 0) / (1 - level)) / e + np.log(e)))

    options = {"xatol": 1e-10, "fatol": 1e-14, "maxiter": 5000, "maxfev": 5000}
    return np.asarray(optimize.minimize(loss, [0.0, 1.0], method="Nelder-Mead", options=options).x)


def expected_worst_power(days: int, place: int, xi: float) -> float:
    """Return E s^(-xi) of the ``place``-th smallest of ``days`` uniforms."""
    return float(np.exp(special.betaln(place - xi, days - place + 1) - special.betaln(place, days - place + 1)))
