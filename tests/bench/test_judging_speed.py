"""Time and peak memory of the default battery with 9,999 simulations, and their growth: printed, never asserted.

Desks x 8 models x 2 levels, with PIT, over all days. ``BENCH_DESKS`` sets the number of desks of the large run.
"""

import json
import os
import resource
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pandas as pd
from scipy.stats import t as student

from backtest.judging import battery
from tests.reference.datasets import garch_t

ROOT = Path(__file__).parents[2]
DESKS, DAYS = int(os.environ.get("BENCH_DESKS", "100")), 2500
MODELS, LEVELS = 8, (0.975, 0.99)


def tables(desks: int, length: int) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Return invented P&L and forecasts: the true law, by each model off by a factor of its own."""
    days, pnl, forecasts = pd.bdate_range("2014-01-01", periods=length), [], []
    for d in range(desks):
        losses, sigma = garch_t(length, d)
        pnl.append(pd.DataFrame({"date": days, "desk": f"desk {d}", "hypothetical": -losses}))
        for m in range(MODELS):
            for level in LEVELS:
                q = student.ppf(level, 5)
                depth = student.pdf(q, 5) / (1 - level) * (5 + q * q) / 4
                scale = sigma * (0.8 + 0.05 * m) * np.sqrt(3 / 5)
                pit = student.cdf(losses / scale, 5)
                forecasts.append(
                    pd.DataFrame({
                        "date": days, "desk": f"desk {d}", "model": "historical" if m == 0 else f"model {m}",
                        "level": level, "var": scale * q, "es": scale * depth, "sigma": scale, "shape": 0.2, "pit": pit,
                    })
                )  # fmt: skip
    return pd.concat(pnl, ignore_index=True), pd.concat(forecasts, ignore_index=True)


def measure(desks: int, length: int) -> dict[str, float]:
    """Judge the tables once; return seconds, CPU seconds, peak MiB of this process, and rows."""
    pnl, forecasts = tables(desks, length)
    before, cpu = time.perf_counter(), time.process_time()
    results = battery.judge_table(pnl, forecasts, simulations=9999)
    return {
        "seconds": time.perf_counter() - before,
        "cpu": time.process_time() - cpu,
        "peak": resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024,
        "rows": len(results),
    }


def in_a_process(desks: int, length: int) -> dict[str, float]:
    command = [sys.executable, "-m", "tests.bench.test_judging_speed", str(desks), str(length)]
    return json.loads(subprocess.run(command, cwd=ROOT, capture_output=True, text=True, check=True).stdout)


def said(desks: int, length: int, found: dict[str, float]) -> str:
    return (
        f"{desks} desks x {MODELS} models x {len(LEVELS)} levels x {length:,} days: {found['rows']:,.0f} results, "
        f"{found['seconds']:.1f} s ({found['cpu']:.1f} s of CPU), peak {found['peak']:,.0f} MiB"
    )


def test_judging_many_desks():
    found = in_a_process(DESKS, DAYS)
    print("\n" + said(DESKS, DAYS, found))
    assert found["rows"] > 5 * DESKS * MODELS * len(LEVELS)


def test_growth_with_desks_and_days():
    desks = {n: in_a_process(n, 1000) for n in (5, 10, 20)}
    days = {n: in_a_process(10, n) for n in (625, 1250, 2500)}
    for name, runs in (("desks", desks), ("days", days)):
        cpu = [run["cpu"] for run in runs.values()]
        slope = np.polyfit(np.log(list(runs)), np.log(cpu), 1)[0]
        each = ", ".join(f"{n} {seconds:.1f} s" for n, seconds in zip(runs, cpu, strict=True))
        print(f"\nCPU by {name}: {each}; log-log slope {slope:.2f}", end="")
    assert desks[20]["rows"] > desks[5]["rows"]


if __name__ == "__main__":
    print(json.dumps(measure(int(sys.argv[1]), int(sys.argv[2]))))
