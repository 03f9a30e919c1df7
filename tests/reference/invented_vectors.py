"""Invented vectors in long form: positions of each day under the moves of the days before it."""

import numpy as np
import pandas as pd


def long_vectors(
    pnl: pd.Series, targets: range, scenarios: int, positions: np.ndarray | None = None, desk: str = "desk"
) -> pd.DataFrame:
    """Return ``date, desk, scenario, pnl``: for the days at places ``targets``, the last ``scenarios`` moves before.

    ``pnl`` is that of positions of one; ``positions`` (one a day of ``pnl``) scale each day's vector.
    """
    days, values = pnl.index, pnl.to_numpy()
    held = np.ones(len(pnl)) if positions is None else positions
    parts = [
        pd.DataFrame(
            {
                "date": days[t],
                "desk": desk,
                "scenario": days[t - scenarios : t],
                "pnl": held[t] * values[t - scenarios : t],
            }
        )
        for t in targets
    ]
    return pd.concat(parts, ignore_index=True)
