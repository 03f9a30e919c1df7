"""Write the data of `every-model.toml`: the S&P 500 series that the package arch ships, and an invented reported VaR.

Run as `python tests/studies/make_sp500.py`; the files lie beside this script and are not in the repository. P&L are
percent log returns. No bank reported the VaR: it is historical simulation over the last 250 returns, so that filter
"reported" has a scale.
"""

from pathlib import Path

import arch.data.sp500
import numpy as np
import pandas as pd

HERE = Path(__file__).parent
PNL, REPORTED = "sp500-pnl.csv", "sp500-reported.csv"
DESK, MODEL, LEVELS, PAST = "S&P 500", "HS-250", (0.975, 0.99), 250


def pnl_table() -> pd.DataFrame:
    """Return `date, desk, hypothetical` in percent, 5,030 days from 1999 to 2018."""
    returns = 100 * np.log(arch.data.sp500.load()["Adj Close"]).diff().dropna()
    return pd.DataFrame({"date": returns.index, "desk": DESK, "hypothetical": returns.to_numpy()})


def reported_table(pnl: pd.DataFrame) -> pd.DataFrame:
    """Return `date, desk, model, level, var, es`: the ceil(nq)-th smallest of 250 losses, the mean from there on."""
    losses = -pnl["hypothetical"].to_numpy()
    pasts = np.sort(np.lib.stride_tricks.sliding_window_view(losses[:-1], PAST), axis=1)
    rows = []
    for level in LEVELS:
        rank = int(np.ceil(PAST * level - 1e-9))
        rows.append(
            pd.DataFrame({
                "date": pnl["date"].to_numpy()[PAST:], "desk": DESK, "model": MODEL, "level": level,
                "var": pasts[:, rank - 1], "es": pasts[:, rank - 1 :].mean(axis=1),
            })
        )  # fmt: skip
    return pd.concat(rows, ignore_index=True)


def write(folder: Path, last_days: int | None = None) -> None:
    """Write both files into `folder`, whole or the last days of each."""
    pnl = pnl_table()
    pnl = pnl if last_days is None else pnl.tail(last_days)
    pnl.to_csv(folder / PNL, index=False)
    reported_table(pnl).to_csv(folder / REPORTED, index=False)


if __name__ == "__main__":
    write(HERE)
