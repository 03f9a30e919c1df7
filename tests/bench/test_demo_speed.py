"""Wall time and peak memory of the demo with a warm cache, and the time of a first compilation: printed."""

import os
import resource
import subprocess
import sys
import time
from pathlib import Path

from backtest.forecasting.models import NAMED
from tests.reference.datasets import garch_t, pnl_series

ROOT = Path(__file__).parents[2]
GIBIBYTE = 1024


def measured(*arguments: object, **environment: str) -> tuple[float, float, float]:
    """Run this module as a script; return wall and CPU seconds, imports included, and its peak memory in MiB."""
    start = time.perf_counter()
    said = subprocess.run(
        [sys.executable, "-m", "tests.bench.test_demo_speed", *map(str, arguments)],
        cwd=ROOT, env=os.environ | environment, capture_output=True, text=True, check=True,
    )  # fmt: skip
    cpu, peak = map(float, said.stdout.splitlines()[-1].split())
    return time.perf_counter() - start, cpu, peak


def test_the_demo_with_a_warm_cache(tmp_path):
    measured("demo", tmp_path / "first")
    seconds, cpu, peak = measured("demo", tmp_path / "second")
    assert (tmp_path / "second" / "summary.html").is_file()
    print(f"\ndemo, warm cache, {os.cpu_count()} cores: {seconds:.1f} s ({cpu:.1f} s of CPU), peak {peak:.0f} MiB")
    assert peak < GIBIBYTE


def test_a_first_compilation(tmp_path):
    cold, cpu, _ = measured("models", TAILMARK_CACHE=str(tmp_path / "cache"))
    assert list((tmp_path / "cache").rglob("*.nbi"))
    warm, _, _ = measured("models", TAILMARK_CACHE=str(tmp_path / "cache"))
    print(f"\nall named models, three days, empty cache: {cold:.1f} s ({cpu:.1f} s of CPU); then {warm:.1f} s")


if __name__ == "__main__":
    import backtest

    if sys.argv[1] == "demo":
        backtest.run(backtest.read_study(ROOT / "data_demo" / "study.toml"), sys.argv[2])
    else:
        backtest.forecast(pnl_series(garch_t(1003, 1)[0]), models=list(NAMED))
    print(time.process_time(), resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024)
