"""Small invented P&L and forecasts tables for tests of judging."""

import numpy as np
import pandas as pd

from backtest.judging.samples import Sample


def business_days(count: int, start: str = "2020-01-01") -> pd.DatetimeIndex:
    return pd.bdate_range(start, periods=count).astype("datetime64[us]")


def hits_on(days: int, places: list[int]) -> np.ndarray:
    """Return bool hits of ``days`` days from places counted from 1."""
    hits = np.zeros(days, dtype=bool)
    hits[np.array(places, dtype=int) - 1] = True
    return hits


def sample_of(losses: np.ndarray, var: object = 1.0, level: float = 0.99, **measures: object) -> Sample:
    """Return a sample from losses and forecasts (numbers or arrays); what is not given is unknown."""
    days = len(losses)

    def full(value: object) -> np.ndarray:
        return np.broadcast_to(np.asarray(value, dtype=float), (days,)).copy()

    dates = business_days(max(days, 1))[:days].to_numpy().astype("datetime64[D]")
    known = {name: full(measures.get(name, np.nan)) for name in ("es", "sigma", "shape", "pit")}
    return Sample("desk", "model", "hypothetical", level, dates, np.asarray(losses, dtype=float), full(var), **known)


def sample_of_hits(hits: np.ndarray, level: float = 0.99) -> Sample:
    return sample_of(np.where(hits, 2.0, 0.0), level=level)


def tables(
    losses: dict[str, np.ndarray],
    *,
    models: tuple[str, ...] = ("historical", "bank"),
    levels: tuple[float, ...] = (0.975, 0.99),
    actual: bool = False,
    **measures: object,
) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Return P&L and forecasts of desks with given losses; the second model's VaR is a tenth larger, and so on.

    ``measures``: var and, if given, es, sigma, shape, pit, the same at every level, numbers or arrays.
    """
    pnl, forecasts = [], []
    for desk, values in losses.items():
        dates = business_days(len(values))
        frame = pd.DataFrame({"date": dates, "desk": desk, "hypothetical": -values})
        pnl.append(frame.assign(actual=-0.9 * values) if actual else frame)
        for place, model in enumerate(models):
            for level in levels:
                given = {name: np.asarray(values, dtype=float) for name, values in measures.items()}
                scaled = {k: v if k in ("shape", "pit") else v * (1 + 0.1 * place) for k, v in given.items()}
                forecasts.append(pd.DataFrame({"date": dates, "desk": desk, "model": model, "level": level, **scaled}))
    return pd.concat(pnl, ignore_index=True), pd.concat(forecasts, ignore_index=True)
