"""The package arch as reference: our likelihood is never lower, and where it is the same the forecast is the same."""

import numpy as np
import pytest

from backtest.kernels import garch, past, rolling
from tests.reference.datasets import sp500

MEANS = {"Constant": (past.CONSTANT_MEAN, [0, 2, 3, 4], 0), "AR": (past.AR1, [0, 1, 2, 3, 4], 1)}


@pytest.mark.slow
@pytest.mark.parametrize("mean", MEANS)
def test_two_hundred_spread_windows_of_the_sp500(mean):
    from arch import arch_model

    kind, free, lags = MEANS[mean]
    losses = sp500().to_numpy()
    pasts = np.ascontiguousarray(np.lib.stride_tricks.sliding_window_view(losses, 1000)[:-1])
    n = len(pasts)
    _, numbers, _, _ = rolling.roll_garch(
        pasts, np.arange(n), np.ones(n, bool), np.array(free), kind, garch.EWMA_75, False
    )
    gaps, sigmas = [], []
    for i in np.linspace(0, n - 1, 200).astype(int):
        fit = arch_model(pasts[i], mean=mean, lags=lags, vol="GARCH", p=1, q=1, rescale=False).fit(
            disp="off", show_warning=False
        )
        theirs = np.sqrt(fit.forecast(horizon=1, reindex=False).variance.to_numpy()[-1, 0])
        gaps.append(numbers[i, 0] - fit.loglikelihood)
        sigmas.append(abs(numbers[i, 2] / theirs - 1))
    gaps, sigmas = np.array(gaps), np.array(sigmas)
    same = np.abs(gaps) < 1e-6
    assert gaps.min() > -1e-6
    assert same.sum() > 100
    assert sigmas[same].max() < 2e-4
