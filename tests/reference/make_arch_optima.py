"""Fit every window of three open series by arch, cold and warm, and store the optima in tests/data/arch_optima.parquet.

Run as `python tests/reference/make_arch_optima.py` from the top of the repository: about an hour of one core, spread
over the cores there are, linear algebra on one thread so that it can be repeated. Cold: arch's own starting values.
Warm: started from the day before's warm optimum, the first window from its cold one. arch is handed gains, so that the
extra term of its GJR acts on losses. Columns: series, model, window (number of its first loss), and cold and warm the
log likelihood, slack (the smallest of omega, alpha, alpha + gamma, beta and 1 - persistence: below 0 the answer is not
feasible, and may be too good), next-day sigma and arch's own flag (0 is success).
"""

import os
import sys
from concurrent.futures import ProcessPoolExecutor
from pathlib import Path

os.environ |= {"OMP_NUM_THREADS": "1", "OPENBLAS_NUM_THREADS": "1"}
sys.path.insert(0, str(Path(__file__).parent.parent.parent))

import arch
import numpy as np
import pandas as pd
from arch import arch_model

from tests.reference.datasets import DATA, bmw, dem2gbp, sp500

WINDOW = 1000
SERIES = {"sp500": lambda: sp500().to_numpy(), "bmw": lambda: bmw().to_numpy(), "dem2gbp": lambda: -dem2gbp()}
CONSTANT, AR1 = {"mean": "Constant"}, {"mean": "AR", "lags": 1}
MODELS = {
    "C-GARCH-normal": {**CONSTANT, "o": 0},
    "C-GARCH-t": {**CONSTANT, "o": 0, "dist": "t"},
    "AR1-GJR-t": {**AR1, "o": 1, "dist": "t"},
}


def slack(fit: object) -> float:
    """Return by how much the parameters keep the closest of their bounds."""
    p = fit.params
    alpha, gamma, beta = p["alpha[1]"], p.get("gamma[1]", 0.0), p["beta[1]"]
    return min(p["omega"], alpha, alpha + gamma, beta, 1.0 - alpha - gamma / 2 - beta)


def found(fit: object) -> tuple[float, float, float, int]:
    ahead = fit.forecast(horizon=1, reindex=False).variance.to_numpy()[-1, 0]
    return fit.loglikelihood, slack(fit), np.sqrt(ahead), fit.convergence_flag


def optima(series: str, model: str) -> pd.DataFrame:
    """Fit every window of one series by one model, cold and warm."""
    losses, rows, yesterday = SERIES[series](), [], None
    for i in range(len(losses) - WINDOW):
        window = arch_model(-losses[i : i + WINDOW], vol="GARCH", p=1, q=1, rescale=False, **MODELS[model])
        cold = window.fit(disp="off", show_warning=False)
        warm = cold if yesterday is None else window.fit(starting_values=yesterday, disp="off", show_warning=False)
        yesterday = warm.params.to_numpy()
        rows.append((series, model, i, *found(cold), *found(warm)))
    parts = [f"{way}_{what}" for way in ("cold", "warm") for what in ("loglik", "slack", "sigma", "flag")]
    return pd.DataFrame(rows, columns=["series", "model", "window", *parts])


def main() -> None:
    work = [(series, model) for model in reversed(MODELS) for series in SERIES]
    with ProcessPoolExecutor() as pool:
        tables = list(pool.map(optima, *zip(*work, strict=True)))
    table = pd.concat(tables, ignore_index=True).sort_values(["series", "model", "window"], ignore_index=True)
    table.attrs = {"arch": arch.__version__, "numpy": np.__version__, "window": WINDOW}
    table.astype({"series": "category", "model": "category"}).to_parquet(DATA / "arch_optima.parquet")


if __name__ == "__main__":
    main()
