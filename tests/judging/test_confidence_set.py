"""The model confidence set: against direct use of arch, known truth, and what it refuses."""

from dataclasses import replace

import numpy as np
import pytest
from arch.bootstrap import MCS

from backtest.judging.answers import Settings
from backtest.judging.battery import judge_table
from backtest.judging.confidence_set import TESTS, block_length, membership
from backtest.judging.nulls import generator
from backtest.judging.scores import fz0
from tests.reference.judging_tables import sample_of, tables

(CONFIDENCE_SET,) = TESTS
SETTINGS = Settings(0.05, 499, 3)
TRUE_VAR, TRUE_ES = 1.95996, 2.33780  # of N(0, 1) at 97.5%


def models(*factors, days=1500, seed=1):
    losses = np.random.default_rng(seed).standard_normal(days)
    found = [sample_of(losses, TRUE_VAR * f, 0.975, es=TRUE_ES * f) for f in factors]
    return [replace(s, model=f"model {place}") for place, s in enumerate(found)]


def wobbling(share, days=1500, seed=1):
    rng = np.random.default_rng(seed + 100)
    return np.exp(share * rng.standard_normal(days))


def test_it_is_arch_with_the_same_seed():
    samples = models(1.0, 1.1 * wobbling(0.1), 0.9, wobbling(0.15, seed=5))
    answers = CONFIDENCE_SET.judge(samples, SETTINGS)
    scores = np.column_stack([fz0(s.losses, s.var, s.es, s.level) for s in samples])
    rng = generator(3, "model confidence set", 0.975, 1500)
    direct = MCS(scores, 0.05, reps=499, block_size=block_length(1500), method="R", bootstrap="stationary", seed=rng)
    direct.compute()
    shares = direct.pvalues["Pvalue"].sort_index().to_numpy()
    assert len(set(shares)) > 2
    assert [a.p_value for a in answers] == pytest.approx((1 + 499 * shares) / 500)
    assert [a.direction.startswith("in") for a in answers] == [place in direct.included for place in range(4)]


@pytest.mark.parametrize("days", [100, 250, 500, 1000, 2500])
def test_blocks_are_long_enough(days):
    assert block_length(days) >= days ** (1 / 3)


def test_the_true_model_stays_and_far_ones_are_left_out():
    answers = CONFIDENCE_SET.judge(models(1.0, 2.0, 0.4), SETTINGS)
    assert answers[0].p_value == 1.0
    assert all(a.p_value <= 0.05 and a.direction.startswith("left out") for a in answers[1:])
    assert answers[0].high < 0.0 < min(a.low for a in answers[1:])  # the distance to the best other model
    assert "model 1" in answers[0].notes[0]
    assert all("model 0" in a.notes[0] for a in answers[1:])


def test_equally_good_models_stay_together():
    kept = 0
    for seed in range(60):
        pair = models(wobbling(0.1, 500, seed), wobbling(0.1, 500, seed + 1000), days=500, seed=seed)
        kept += all(a.p_value > 0.05 for a in CONFIDENCE_SET.judge(pair, replace(SETTINGS, simulations=199)))
    assert kept / 60 > 0.95 - 3 * np.sqrt(0.05 * 0.95 / 60)


def test_p_values_are_never_zero():
    scores = np.column_stack([np.random.default_rng(2).standard_normal(300), np.full(300, 50.0)])
    assert membership(scores, 99, np.random.default_rng(1)).tolist() == [1.0, 0.01]


def test_models_with_the_same_scores_stand_as_one():
    samples = models(1.0, 1.3, 1.0)
    answers = CONFIDENCE_SET.judge(samples, SETTINGS)
    assert answers[0].p_value == answers[2].p_value
    assert "same scores as model 0: they stand in the set as one" in answers[2].notes
    pair = CONFIDENCE_SET.judge(samples[:2], SETTINGS)
    assert [a.p_value for a in answers[:2]] == [a.p_value for a in pair]


@pytest.mark.parametrize(
    ("samples", "missing"),
    [
        (models(1.0), "needs a second model"),
        (models(1.0, 1.1, days=99), "needs 100 shared days, has 99"),
        (models(1.0, 1.0), "needs score differences that vary: model 0 and model 1"),
        (
            [sample_of(np.zeros(200), v, 0.975, es=v) for v in (1.0, 2.0)],
            "needs score differences that vary: model and model",
        ),
    ],
)
def test_what_it_cannot_judge_it_says(samples, missing):
    assert {a.missing for a in CONFIDENCE_SET.judge(samples, SETTINGS)} == {missing}


def test_each_model_has_one_row_a_kind_level_and_span_on_the_days_all_share():
    losses = {"A": np.random.default_rng(1).standard_t(5, 400)}
    pnl, forecasts = tables(losses, models=("historical", "bank", "third"), actual=True, var=2.0, es=2.8)
    late = forecasts[(forecasts["model"] != "third") | (forecasts["date"] > pnl["date"].iloc[49])]
    rows = judge_table(pnl, late, tests=["confidence-set"], spans=[250, "all"], simulations=199)
    assert len(rows) == 3 * 2 * 2 * 2
    assert {r.days for r in rows} == {250, 350}
    assert {r.against for r in rows} == {""}
    for level in (0.975, 0.99):
        assert max(r.p_value for r in rows if r.level == level and r.days == 350) == 1.0


def test_a_model_without_a_day_does_not_empty_the_set_of_the_others():
    losses = {"A": np.random.default_rng(1).standard_t(5, 400)}
    pnl, forecasts = tables(losses, models=("historical", "bank", "third"), levels=(0.99,), var=2.0, es=2.8)
    forecasts.loc[forecasts["model"] == "third", "var"] = np.nan
    rows = judge_table(pnl, forecasts, tests=["confidence-set"], simulations=199)
    assert [(r.model, r.days) for r in rows] == [("bank", 400), ("historical", 400), ("third", 0)]
    assert rows[2].phrase == "not tested: needs a second model"
