"""Process start to the result of `forecast()`, caches warm, one series: against the bare import of what it stands on.

Fresh processes in turn, five of each, medians; wall seconds are what the reach is about, CPU seconds beside them
since a busy machine stretches the first. Printed, never asserted.
"""

import os
import statistics
import subprocess
import sys
import time
from pathlib import Path
from typing import NamedTuple

from tests.reference.simulated_desks import simulated_pnl

ROOT, TIMES = Path(__file__).parents[2], 5
SERIES = "import pandas as pd; pnl = pd.read_csv({file!r}, parse_dates=['date'])"
CASES = {
    "bare import of numba, pandas, scipy.special": "import numba, pandas, scipy.special",
    "import backtest": "import backtest",
    "forecast(), one model, first day": f"{SERIES}; import backtest; "
    "print(len(backtest.forecast(pnl[:1000], ['conditional-evt'], window=999)))",
    "forecast(), default models, 250 days": f"{SERIES}; import backtest; print(len(backtest.forecast(pnl)))",
}


class Spent(NamedTuple):
    """Wall and CPU seconds of a process, from its start to its end."""

    wall: float
    cpu: float


def spent(code: str) -> Spent:
    before, start = os.times(), time.perf_counter()
    subprocess.run([sys.executable, "-c", code], cwd=ROOT, check=True, capture_output=True)
    after = os.times()
    cpu = after.children_user + after.children_system - before.children_user - before.children_system
    return Spent(time.perf_counter() - start, cpu)


def test_start_to_first_result(tmp_path):
    file = str(tmp_path / "pnl.csv")
    simulated_pnl(1, 1250).to_csv(file, index=False)
    codes = {case: code.format(file=file) for case, code in CASES.items()}
    for code in codes.values():
        spent(code)  # compiles, and warms every cache
    rounds = [[spent(code) for code in codes.values()] for _ in range(TIMES)]
    wall, cpu = ([statistics.median(part) for part in zip(*rows, strict=True)] for rows in split(rounds))
    print(f"\nload {os.getloadavg()[0]:.1f} on {os.cpu_count()} cores; medians of {TIMES} processes")
    for name, w, c in zip(codes, wall, cpu, strict=True):
        print(
            f"{name:45} {w:6.2f} s wall, reach {1.5 * wall[0] + 0.3:5.2f}; {c:5.2f} s CPU, 1.5 x bare import + 0.3 = "
            f"{1.5 * cpu[0] + 0.3:.2f}"
        )


def split(rounds: list[list[Spent]]) -> tuple[list[list[float]], list[list[float]]]:
    return [[s.wall for s in row] for row in rounds], [[s.cpu for s in row] for row in rounds]
