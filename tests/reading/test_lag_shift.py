"""The remark on a one-day shift of VaR: fires on shifted series, not on correct ones, and knows its limits."""

import numpy as np
import pytest
from scipy.stats import spearmanr

from backtest.reading.shift import lag_correlations, likely_shift
from tests.reference.invented_extract import reactive_series

SEEDS = range(20)


def garch_series(n: int, seed: int) -> tuple[np.ndarray, np.ndarray]:
    """Return P&L of GARCH(1,1)-t5 (alpha .08, beta .90) and its true 99% VaR up to a constant."""
    rng = np.random.default_rng(seed)
    pnl, sigma, variance = np.empty(n), np.empty(n), 1.0
    for t in range(n):
        sigma[t] = np.sqrt(variance)
        pnl[t] = sigma[t] * rng.standard_t(5) * np.sqrt(3 / 5)
        variance = 0.02 + 0.08 * pnl[t] ** 2 + 0.90 * variance
    return pnl, 2.6 * sigma


def historical_var(pnl: np.ndarray, window: int) -> np.ndarray:
    """Return the plain historical-simulation 99% VaR of each day from the ``window`` days before; NaN at first."""
    var = np.full(len(pnl), np.nan)
    past = np.lib.stride_tricks.sliding_window_view(pnl, window)[:-1]
    var[window:] = -np.quantile(past, 0.01, axis=1)
    return var


def verdicts(shift: int, days: int, make: object) -> list[int | None]:
    """Return the verdict per seed with VaR moved ``shift`` rows later (negative: earlier, onto the day computed)."""
    found = []
    for seed in SEEDS:
        pnl, var = make(days + 1, seed)  # type: ignore[operator]
        moved = np.roll(var, shift)[1:-1]
        found.append(likely_shift(*lag_correlations(pnl[1:-1], moved)))
    return found


def test_correlations_are_spearmans_of_change_and_scaled_size() -> None:
    pnl, var = reactive_series(300, 1)
    found, days = lag_correlations(pnl, var)
    change, size = var[2:] / var[1:-1] - 1, np.abs(pnl) / var
    expected = [spearmanr(change, size[2 - k : len(size) - k]).statistic for k in range(3)]
    np.testing.assert_allclose(found, expected, atol=1e-12)
    assert days == 298


@pytest.mark.parametrize("make", [reactive_series, garch_series])
@pytest.mark.parametrize("days", [250, 1000])
def test_a_reactive_var_is_told_apart_in_every_case(make: object, days: int) -> None:
    assert set(verdicts(0, days, make)) == {None}
    assert set(verdicts(-1, days, make)) == {0}
    assert set(verdicts(1, days, make)) == {2}


def test_positions_that_move_var_and_pnl_together_are_no_shift() -> None:
    for seed in SEEDS:
        rng = np.random.default_rng(seed)
        size = np.exp(rng.normal(0, 0.5, 1000))
        assert likely_shift(*lag_correlations(size * rng.normal(size=1000), 2.33 * size)) is None


def test_a_correct_historical_simulation_is_not_accused() -> None:
    for seed in SEEDS:
        pnl, _ = garch_series(1250, seed)
        assert likely_shift(*lag_correlations(pnl, historical_var(pnl, 250))) is None


def test_noise_in_var_is_no_shift() -> None:
    for seed in SEEDS:
        rng = np.random.default_rng(seed)
        assert likely_shift(*lag_correlations(rng.standard_t(5, 1000), np.exp(rng.normal(0, 0.1, 1000)))) is None


def test_a_constant_var_and_a_short_history_say_nothing() -> None:
    pnl, var = reactive_series(90, 3)
    assert likely_shift(*lag_correlations(pnl, np.full(90, 2.0))) is None
    assert likely_shift(*lag_correlations(pnl[:-1], var[1:])) is None
