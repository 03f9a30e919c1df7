"""Time of one generalized Pareto fit by maximum likelihood, 100 exceedances, against scipy.stats: printed only.

Both sides in this process by its CPU time. Ours: 4,000 samples, the rolled kernel that the engine calls, every fit
begun without a guess, so that its time also holds finding the threshold and reading one quantile; the median of five.
The reference: `scipy.stats.genpareto.fit(y, floc=0)` on every fortieth sample. What is asserted is that no likelihood
of ours is below scipy's by more than 1e-6.
"""

import statistics
import time

import numpy as np
from scipy.stats import genpareto

from backtest.kernels.gpd import BY_ML, FITTED, roll_gpd

SAMPLES, EXCEEDANCES, EVERY = 4000, 100, 40
SHAPES = (0.0, 0.1, 0.2, 0.4)


def exceedances() -> np.ndarray:
    """Return samples (n, 100) of generalized Pareto laws of four shapes in turn, scale 1.3."""
    rng = np.random.default_rng(1)
    shapes = np.resize(SHAPES, (SAMPLES, 1))
    return genpareto.rvs(shapes, scale=1.3, size=(SAMPLES, EXCEEDANCES), random_state=rng)


def fitted(y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Return our shape and scale (n, 2) and status (n): the threshold is a zero that joins each sample."""
    samples = np.column_stack([y, np.zeros(len(y))])
    runs = np.arange(len(y))  # every row a run of its own: no fit starts from the one before
    _, _, tail, status = roll_gpd(samples, np.array([0.99]), EXCEEDANCES, runs, 1, BY_ML)
    return tail[:, :2], status


def seconds(y: np.ndarray) -> float:
    start = time.process_time()
    fitted(y)
    return time.process_time() - start


def test_the_same_likelihood_at_what_speed():
    y = exceedances()
    ours, status = fitted(y)  # compiles, and warms the cache
    each = statistics.median(seconds(y) for _ in range(5)) / SAMPLES

    some = range(0, SAMPLES, EVERY)
    start = time.process_time()
    theirs = np.array([genpareto.fit(y[i], floc=0)[::2] for i in some])
    other = (time.process_time() - start) / len(some)

    assert (status == FITTED).all()
    gain = np.array([loglik(y[i], ours[i]) - loglik(y[i], theirs[j]) for j, i in enumerate(some)])
    assert gain.min() > -1e-6
    print(
        f"\nGPD fit, {EXCEEDANCES} exceedances: ours {1e6 * each:.1f} us, scipy {1e6 * other:,.0f} us, ratio "
        f"{other / each:,.0f} (reach 1,000); {len(some)} compared, likelihood above scipy's by "
        f"{gain.min():.1e} to {gain.max():.1e}, by more than 1e-6 in {(gain > 1e-6).sum()}"
    )


def loglik(y: np.ndarray, law: np.ndarray) -> float:
    return float(genpareto.logpdf(y, law[0], scale=law[1]).sum())
