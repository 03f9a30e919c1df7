"""A run with stated criteria, a previous run and estimation risk: what the record and the page say of them."""

import numpy as np
import pandas as pd
import pytest

from backtest import pipeline
from backtest.recording.run_folder import read_record
from backtest.study import read_study

pytestmark = pytest.mark.slow

STUDY = """
[review]
days = [250]
subject = "bank"
{review}
[data]
pnl = "pnl.csv"
reported = "reported.csv"
[forecast]
window = 250
models = ["historical"]
[judge]
simulations = 199
estimation_risk = {risk}
"""


@pytest.fixture
def folder(tmp_path):
    """Invented P&L of one desk, and a reported VaR that is far too low."""
    rng, days = np.random.default_rng(1), pd.bdate_range("2022-01-03", periods=600).strftime("%Y-%m-%d")
    pnl = pd.DataFrame({"date": days, "desk": "Alpha", "hypothetical": rng.standard_t(5, 600)})
    pnl.to_csv(tmp_path / "pnl.csv", index=False)
    reported = pnl[["date", "desk"]].assign(model="bank", level=0.99, var=1.0)
    reported.to_csv(tmp_path / "reported.csv", index=False)
    return tmp_path


def ran(folder, name, *, review="", risk="false"):
    path = folder / f"{name}.toml"
    path.write_text(STUDY.format(review=review, risk=risk), encoding="utf-8")
    made = pipeline.run(read_study(path)).folder
    return read_record(made), (made / pipeline.SUMMARY).read_text(encoding="utf-8")


def test_a_change_of_criteria_since_the_previous_run_is_reported(folder):
    first, page = ran(folder, "first")
    assert first.manifest["criteria"]["house_defaults"] is True
    assert "house defaults, replace with yours" in page
    stated = 'previous = "first-run"\n[review.criteria]\nvar_multiple_at_most = 9.0\n'
    second, page = ran(folder, "second", review=stated)
    assert [line.split(":")[0] for line in second.manifest["terms"]["changed"]] == ["criteria"]
    assert second.manifest["terms"]["sha256"] != first.manifest["terms"]["sha256"]
    multiples = [r.criteria.set_index("criterion")["answer"]["var_multiple_at_most"] for r in (first, second)]
    assert multiples == ["not met", "met"]
    assert "as stated in the study" in page


def test_estimation_risk_is_kept_shown_and_taken_up_again(folder):
    first, page = ran(folder, "risky", risk="true")
    ours = first.estimation_risk.set_index("model")
    assert set(ours.loc["historical", "law"]) == {"refitted"}
    assert ours.loc["historical", "p_refitted"].between(0, 1).all()
    assert ours.loc["bank", "note"].str.contains("not defined: this model cannot generate P&L").all()
    assert "Estimation risk" in page
    again, _ = ran(folder, "risky", risk="true")
    same = [c for c in first.estimation_risk if c not in ("seconds", "note")]
    pd.testing.assert_frame_equal(again.estimation_risk[same], first.estimation_risk[same])
    notes = again.estimation_risk.set_index("model").loc["historical", "note"]
    assert notes.str.contains("replicates kept from before: 199").all()
