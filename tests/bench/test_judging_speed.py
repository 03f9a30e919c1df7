"""Time and peak memory of judging 8 desks x 8 models x 2 levels x 2 spans with 9,999 simulations: printed only."""

import json
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
DESKS, MODELS, LEVELS, SPANS, DAYS = 8, 8, (0.975, 0.99), (250, "all"), 2000


def tables() -> tuple[pd.DataFrame, pd.DataFrame]:
    """Return invented P&L and forecasts: the true law, by each model off by a factor of its own."""
    days, pnl, forecasts = pd.bdate_range("2018-01-01", periods=DAYS), [], []
    for d in range(DESKS):
        losses, sigma = garch_t(DAYS, d)
        pnl.append(pd.DataFrame({"date": days, "desk": f"desk {d}", "hypothetical": -losses}))
        for m in range(MODELS):
            for level in LEVELS:
                q = student.ppf(level, 5)
                depth = student.pdf(q, 5) / (1 - level) * (5 + q * q) / 4
                scale = sigma * (0.8 + 0.05 * m) * np.sqrt(3 / 5)
                forecasts.append(
                    pd.DataFrame({
                        "date": days, "desk": f"desk {d}", "model": "historical" if m == 0 else f"model {m}",
                        "level": level, "var": scale * q, "es": scale * depth, "sigma": scale, "shape": 0.2,
                    })
                )  # fmt: skip
    return pd.concat(pnl, ignore_index=True), pd.concat(forecasts, ignore_index=True)


def measure() -> dict[str, float]:
    """Judge the tables once; return seconds, CPU seconds, peak MiB of this process, and rows."""
    pnl, forecasts = tables()
    before, cpu = time.perf_counter(), time.process_time()
    results = battery.judge_table(pnl, forecasts, spans=SPANS, simulations=9999)
    return {
        "seconds": time.perf_counter() - before,
        "cpu": time.process_time() - cpu,
        "peak": resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024,
        "rows": len(results),
    }


def test_judging_eight_desks_by_eight_models():
    command = [sys.executable, "-m", "tests.bench.test_judging_speed"]
    said = subprocess.run(command, cwd=ROOT, capture_output=True, text=True, check=True)
    found = json.loads(said.stdout)
    samples = DESKS * MODELS * len(LEVELS) * len(SPANS)
    print(
        f"\njudging {samples} samples, {found['rows']:,} results, 9,999 simulations: {found['seconds']:.1f} s "
        f"({found['cpu']:.1f} s of CPU), peak {found['peak']:.0f} MiB"
    )
    assert found["rows"] > 6 * samples


if __name__ == "__main__":
    print(json.dumps(measure()))
