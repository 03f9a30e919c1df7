"""The package arch as reference: our likelihood is never lower, and where it is the same the forecast is the same."""

import numpy as np
import pytest

from backtest.kernels import garch
from backtest.kernels import parameters as P
from tests.reference.datasets import sp500

MEANS = {"Constant": (P.CONSTANT_MEAN, 0), "AR": (P.AR1, 1)}


@pytest.mark.slow
@pytest.mark.parametrize("mean", MEANS)
def test_two_hundred_spread_windows_of_the_sp500(mean):
    from arch import arch_model

    kind, lags = MEANS[mean]
    losses = sp500().to_numpy()
    pasts = np.ascontiguousarray(np.lib.stride_tricks.sliding_window_view(losses, 1000)[:-1])
    n = len(pasts)
    found = garch.roll(pasts, np.arange(n), np.ones(n, bool), garch.member(kind, P.EWMA_75))
    gaps, sigmas = [], []
    for i in np.linspace(0, n - 1, 200).astype(int):
        fit = arch_model(pasts[i], mean=mean, lags=lags, vol="GARCH", p=1, q=1, rescale=False).fit(
            disp="off", show_warning=False
        )
        theirs = np.sqrt(fit.forecast(horizon=1, reindex=False).variance.to_numpy()[-1, 0])
        gaps.append(found.loglik[i] - fit.loglikelihood)
        sigmas.append(abs(found.sigma[i] / theirs - 1))
    gaps, sigmas = np.array(gaps), np.array(sigmas)
    same = np.abs(gaps) < 1e-6
    assert gaps.min() > -1e-6
    assert same.sum() > 100
    assert sigmas[same].max() < 2e-4
