"""One examination that every test of the PIT sits, on tables that hold a PIT."""

import pickle

import numpy as np
import pandas as pd
import pytest
from scipy import stats

from backtest.judging.battery import judge_table
from backtest.judging.phrases import EVIDENCE, NO_EVIDENCE, SEEN, UNSEEN
from tests.reference.judging_tables import tables

KEYS = (
    "es-zones", "du-escanciano-conditional", "multinomial-nass", "berkowitz", "berkowitz-tail", "spectral-window",
    "spectral-probit",
)  # fmt: skip
EVERY = pytest.mark.parametrize("key", KEYS)
ASKED = {"simulations": 199, "seed": 4, "spans": [250, "all"]}
LEVEL = 0.975
VAR, ES = stats.norm.ppf(LEVEL), stats.norm.pdf(stats.norm.ppf(LEVEL)) / (1 - LEVEL)
RNG_LOSSES = np.random.default_rng(0).standard_normal((2, 300))
EXTREMES = {
    "usual": RNG_LOSSES[0], "quiet": np.full(300, -1.0), "all beyond": np.full(300, 9.0), "zero": np.zeros(300),
    "one quiet day": np.zeros(1), "one loss": np.full(1, 40.0), "six days": np.array([0.1, 3.0, -0.2, 0.4, 2.5, 0.3]),
    "beyond, and different": 2.5 + np.abs(RNG_LOSSES[1]),
}  # fmt: skip


def judged(key, losses, *, scale=1.0, pit=None, **more):
    """Judge losses under a standard normal forecast, all in units of ``scale``."""
    pit = stats.norm.cdf(losses) if pit is None else pit
    made = {"var": VAR * scale, "es": ES * scale, "sigma": scale, "pit": pit}
    return judge_table(*tables({"A": losses * scale}, levels=(LEVEL,), **made), tests=[key], **{**ASKED, **more})


@EVERY
@pytest.mark.parametrize("losses", list(EXTREMES.values()), ids=list(EXTREMES))
def test_answers_are_finite_and_agree_with_themselves(key, losses):
    for row in judged(key, losses):
        numbers = [row.statistic, row.p_value, row.estimate, row.low, row.high, row.could_see]
        assert all(n is None or (isinstance(n, float) and np.isfinite(n)) for n in numbers)
        assert (row.p_value is None) == (row.decision == "not tested") == (row.law is None)
        assert row.phrase in {*EVIDENCE.values(), NO_EVIDENCE, SEEN, UNSEEN} or row.phrase.startswith("not tested: ")
        if row.p_value is not None:
            assert 0.0 < row.p_value <= 1.0
            assert row.phrase.startswith("evidence") == (row.p_value <= 0.05)
        if row.low is not None and row.estimate is not None:
            assert row.low <= row.estimate
            assert row.high is None or row.estimate <= row.high


@EVERY
@pytest.mark.parametrize("scale", [8.0, 3.7])
def test_the_unit_of_money_changes_nothing(key, scale):
    for plain, scaled in zip(judged(key, RNG_LOSSES[0]), judged(key, RNG_LOSSES[0], scale=scale), strict=True):
        assert (plain.statistic, plain.p_value) == (scaled.statistic, scaled.p_value)
        assert plain.phrase == scaled.phrase
        for name in ("estimate", "low", "high"):
            expected = getattr(plain, name)
            found = getattr(scaled, name)
            assert found == (None if expected is None else pytest.approx(expected, rel=1e-9))


@EVERY
def test_order_of_rows_and_repetition_change_nothing_and_results_pickle(key):
    losses = RNG_LOSSES[0]
    pnl, forecasts = tables({"A": losses}, levels=(LEVEL,), var=VAR, es=ES, pit=stats.norm.cdf(losses))
    plain = judge_table(pnl, forecasts, tests=[key], **ASKED)
    shuffled = judge_table(pnl.sample(frac=1, random_state=1), forecasts.sample(frac=1, random_state=2),
                           tests=[key], **ASKED)  # fmt: skip
    assert pickle.loads(pickle.dumps(plain)) == plain == shuffled


@EVERY
def test_a_desk_is_judged_alike_alone_and_in_company(key):
    first, second = RNG_LOSSES
    both = pd.concat([tables({d: x}, levels=(LEVEL,), var=VAR, es=ES, pit=stats.norm.cdf(x))[1]
                      for d, x in (("A", first), ("B", second))])  # fmt: skip
    pnl = tables({"A": first, "B": second}, levels=(LEVEL,), var=VAR)[0]
    company = [r for r in judge_table(pnl, both, tests=[key], **ASKED) if r.desk == "A"]
    alone = judge_table(pnl[pnl["desk"] == "A"], both[both["desk"] == "A"], tests=[key], **ASKED)
    assert [(r.statistic, r.p_value, r.estimate, r.note) for r in company] == [
        (r.statistic, r.p_value, r.estimate, r.note) for r in alone
    ]


@EVERY
def test_without_a_pit_it_is_not_tested(key):
    assert {r.phrase for r in judged(key, RNG_LOSSES[0], pit=np.nan)} == {"not tested: needs pit"}


@EVERY
def test_days_without_a_pit_are_left_out_and_said(key):
    pit = stats.norm.cdf(RNG_LOSSES[0])
    pit[[5, 280]] = np.nan
    whole = judged(key, RNG_LOSSES[0], pit=pit)
    assert {r.days for r in whole} == {249, 298}
    assert all("days without a PIT, left out: " in r.note for r in whole)


@EVERY
def test_every_day_far_beyond_is_evidence_and_none_is_never_a_pass(key):
    for row in judged(key, EXTREMES["beyond, and different"]):
        assert row.decision == "rejected"
    for row in judged(key, EXTREMES["quiet"]):
        assert "pass" not in row.phrase
        if key == "du-escanciano-conditional":
            assert row.phrase == "not tested: 0 exceptions, needs 1"
        elif key != "berkowitz":  # constant PITs have no regression
            assert row.p_value is not None


@EVERY
def test_a_right_forecast_is_seldom_rejected_and_a_wrong_one_often(key):
    """The oracle and its negative control: 40 desks of 500 days with the true law, and with a third of its sigma."""
    rng, pnl, forecasts = np.random.default_rng(21), [], []
    for desk in range(40):
        z = rng.standard_normal(500)
        for name, factor in (("right", 1.0), ("wrong", 3.0)):
            one = tables({f"{name} {desk}": z * factor}, models=("m",), levels=(LEVEL,), var=VAR, es=ES,
                         pit=stats.norm.cdf(z * factor))  # fmt: skip
            pnl.append(one[0])
            forecasts.append(one[1])
    rows = judge_table(pd.concat(pnl), pd.concat(forecasts), tests=[key], simulations=999)
    rejected = dict.fromkeys(("right", "wrong"), 0)
    for row in rows:
        rejected[row.desk.split()[0]] += row.decision == "rejected"
    assert rejected["right"] <= 7  # Bin(40, .05) is larger in fewer than 1 of 500 such samples
    assert rejected["wrong"] >= 37
