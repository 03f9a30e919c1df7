"""Seconds and peak memory of forecasting many simulated desks x 2,500 days, two models, two workers: printed.

Peak resident memory of fresh processes, above that of the process that has imported the package. A first kernel call
costs some 60 MiB once, whatever is forecast (numba's compiler is made ready): the process with one target day shows
it. Desks: BENCH_DESKS, 50 where it is not set; `BENCH_DESKS=500 python -m pytest tests/bench/test_memory.py -q -s` is
the long one, a few minutes.
"""

import json
import os
import resource
import subprocess
import sys
import time
from pathlib import Path

import backtest
from tests.reference.simulated_desks import simulated_pnl

ROOT, DESKS, DAYS = Path(__file__).parents[2], int(os.environ.get("BENCH_DESKS", "50")), 2500
MODELS, WINDOW, LEVELS = ("historical", "conditional-evt"), 1000, (0.975, 0.99)


def peak() -> float:
    """Return the peak resident memory of this process in MiB."""
    unit = 2**20 if sys.platform == "darwin" else 2**10
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / unit


def measure(desks: int, days: int, workers: int) -> dict[str, float]:
    """Forecast once; return seconds, CPU seconds, rows, and MiB of peak memory: imported, above it, of the result."""
    imported, pnl = peak(), simulated_pnl(desks, days)
    start, cpu = time.perf_counter(), time.process_time()
    found = backtest.forecast(pnl, MODELS, LEVELS, WINDOW, workers=workers)
    return {
        "seconds": time.perf_counter() - start, "cpu": time.process_time() - cpu, "rows": len(found),
        "missing": int(found[["var", "es"]].isna().sum().sum()), "imported": imported, "above": peak() - imported,
        "result": found.memory_usage(deep=True).sum() / 2**20,
    }  # fmt: skip


def measured(desks: int, days: int, workers: int) -> dict[str, float]:
    command = [sys.executable, "-m", "tests.bench.test_memory", str(desks), str(days), str(workers)]
    return json.loads(subprocess.run(command, cwd=ROOT, capture_output=True, text=True, check=True).stdout)


def test_many_desks_by_two_workers():
    measured(1, WINDOW + 1, 1)  # compiles, and warms the cache
    start, one, many = measured(1, WINDOW + 1, 1), measured(1, DAYS, 1), measured(DESKS, DAYS, 2)
    assert many["rows"] == DESKS * len(MODELS) * len(LEVELS) * (DAYS - WINDOW)
    assert many["missing"] == 0
    print(
        f"\n{DESKS} desks x {DAYS:,} days, {len(MODELS)} models, two workers, {many['rows']:,} rows: "
        f"{many['seconds']:.1f} s, {many['cpu']:.1f} s of CPU (load {os.getloadavg()[0]:.1f}, {os.cpu_count()} cores)"
        f"\npeak memory above the imported process ({many['imported']:.0f} MiB): {many['above']:.0f} MiB, "
        f"{many['above'] / DESKS:.1f} a desk (reach 60); one desk {one['above']:.0f}, of which the first kernel call "
        f"{start['above']:.0f}; the result holds {many['result']:.0f} MiB"
    )
    if DESKS > 1:
        print(f"each further desk: {(many['above'] - one['above']) / (DESKS - 1):.1f} MiB")


if __name__ == "__main__":
    print(json.dumps(measure(*map(int, sys.argv[1:]))))
