"""The first result does not wait for libraries it does not need: seen in a fresh process."""

import json
import subprocess
import sys
from pathlib import Path

HEAVY = ("arch", "scipy.stats", "matplotlib")
FORECAST = """
import json, sys
import numpy as np, pandas as pd
import backtest
rng = np.random.default_rng(1)
pnl = pd.Series(rng.standard_normal(303), index=pd.bdate_range("2020-01-01", periods=303))
models = ["historical", "garch-normal", "conditional-evt", {also}]
found = backtest.forecast(pnl, models, window=300)
assert len(found) == 3 * len(models) * 2 and found["var"].notna().all()
print(json.dumps([m for m in {heavy} if m in sys.modules]))
"""


def loaded(also: str) -> list[str]:
    code = FORECAST.format(also=also, heavy=HEAVY)
    found = subprocess.run(
        [sys.executable, "-c", code], cwd=Path(__file__).parents[2], capture_output=True, text=True, check=True
    )
    return json.loads(found.stdout)


def test_a_forecast_loads_no_heavy_library():
    assert loaded("") == []


def test_a_model_that_stands_on_arch_is_seen_to_load_it():
    also = "{'name': 'arch', 'filter': 'library:ARCH', 'tail': 'normal', 'recalibrate_days': 250}"
    assert "arch" in loaded(also)
