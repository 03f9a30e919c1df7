"""P&L of many simulated desks (invented), for benches of time and memory."""

import numpy as np
import pandas as pd

OMEGA, ALPHA, BETA, WARM_UP = 0.02, 0.08, 0.90, 500


def simulated_pnl(desks: int, days: int, seed: int = 1) -> pd.DataFrame:
    """Return the long P&L table of independent desks, GARCH(1,1) with normal innovations on weekdays from 2010 on.

    With normal z the variance is h(t+1) = omega + (alpha z(t)^2 + beta) h(t): all desks are run at once.
    """
    rng = np.random.default_rng(seed)
    z = rng.standard_normal((WARM_UP + days, desks))
    h, losses = np.ones(desks), np.empty_like(z)
    for t in range(len(z)):
        losses[t] = np.sqrt(h) * z[t]
        h = OMEGA + (ALPHA * z[t] ** 2 + BETA) * h
    dates = pd.bdate_range("2010-01-04", periods=days)
    names = [f"desk {d:03}" for d in range(desks)]
    return pd.DataFrame({
        "date": np.tile(dates, desks), "desk": np.repeat(names, days), "hypothetical": -losses[WARM_UP:].T.ravel(),
    })  # fmt: skip
