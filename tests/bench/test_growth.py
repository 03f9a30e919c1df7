"""How time grows with days and with desks, and what a second worker gives: printed; that it changes nothing: asserted.

Growth by this process's CPU time, one worker, medians of three: a slope of 1 is linear. Two workers by wall time, which
means something only where two cores are free: the load is printed beside.
"""

import os
import statistics
import time
from collections.abc import Callable, Sequence

import numpy as np
import pandas as pd
from pandas.testing import assert_frame_equal

import backtest
from tests.reference.simulated_desks import simulated_pnl

MODELS, WINDOW = ("historical", "conditional-evt"), 500
DAYS, DESKS, SHARED = (500, 1000, 2000, 4000), (1, 2, 4, 8), 8


def forecast(pnl: pd.DataFrame, workers: int = 1) -> pd.DataFrame:
    return backtest.forecast(pnl, MODELS, window=WINDOW, workers=workers)


def median_seconds(work: Callable[[], object], clock: Callable[[], float], times: int = 3) -> float:
    def once() -> float:
        start = clock()
        work()
        return clock() - start

    return statistics.median(once() for _ in range(times))


def slope(sizes: Sequence[int], seconds: Sequence[float]) -> float:
    return float(np.polyfit(np.log(sizes), np.log(seconds), 1)[0])


def grown(name: str, sizes: Sequence[int], tables: Sequence[pd.DataFrame]) -> None:
    """Print the seconds by size and the slope of their logarithms; the work is asserted to grow as it should."""
    rows = [len(forecast(pnl)) for pnl in tables]
    assert [r / rows[0] for r in rows] == [s / sizes[0] for s in sizes]
    found = [median_seconds(lambda pnl=pnl: forecast(pnl), time.process_time) for pnl in tables]
    listed = ", ".join(f"{size:,}: {s:.2f} s" for size, s in zip(sizes, found, strict=True))
    print(
        f"\n{name}: {listed} of CPU; slope {slope(sizes, found):.2f}, of the last doubling "
        f"{slope(sizes[-2:], found[-2:]):.2f} (1 is linear)"
    )


def test_time_by_forecast_days():
    grown("forecast days, one desk", DAYS, [simulated_pnl(1, WINDOW + days) for days in DAYS])


def test_time_by_desks():
    grown("desks of 1,000 forecast days", DESKS, [simulated_pnl(desks, WINDOW + 1000) for desks in DESKS])


def test_two_workers_give_the_same_forecasts_sooner():
    pnl = simulated_pnl(SHARED, 2500)
    assert_frame_equal(forecast(pnl), forecast(pnl, workers=2), check_exact=True)
    one, two = (median_seconds(lambda n=n: forecast(pnl, n), time.perf_counter, 5) for n in (1, 2))
    print(
        f"\n{SHARED} desks x 2,500 days, {len(MODELS)} models: one worker {one:.2f} s, two {two:.2f} s, "
        f"ratio {one / two:.2f} (reach 1.6; load {os.getloadavg()[0]:.1f} on {os.cpu_count()} cores), bit-identical"
    )
