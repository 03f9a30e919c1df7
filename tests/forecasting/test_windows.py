import numpy as np
import pandas as pd
import pytest

from backtest.forecasting.windows import BLOCK_DAYS, plan, weekday_numbers
from backtest.kernels.rolling import RUN_DAYS


def known(losses, days=None, known_on=None) -> pd.DataFrame:
    days = pd.bdate_range("2020-01-06", periods=len(losses)) if days is None else pd.to_datetime(days)
    return pd.DataFrame(
        {"date": days, "known_on": days if known_on is None else pd.to_datetime(known_on), "loss": losses}
    )


def calendar(first="2020-01-06", periods=12) -> np.ndarray:
    return pd.bdate_range(first, periods=periods).to_numpy().astype("datetime64[D]")


def all_pasts(p) -> np.ndarray:
    return np.concatenate([p.pasts(rows) for rows in p.blocks()])


def test_the_past_of_a_day_is_the_last_w_losses_before_it():
    p = plan(known(np.arange(12.0)), calendar(), 5)
    pasts = all_pasts(p)
    assert p.targets[0] == calendar()[5]
    assert pasts[0].tolist() == [0, 1, 2, 3, 4]
    assert pasts[-1].tolist() == [6, 7, 8, 9, 10]
    assert (p.origins < p.targets).all()
    assert p.origins[0] == calendar()[4]


def test_a_day_without_pnl_keeps_its_forecast_and_enters_no_past():
    losses = np.arange(12.0)
    losses[7] = np.nan
    p = plan(known(losses), calendar(), 5)
    assert calendar()[7] in p.targets
    at = list(p.targets).index(calendar()[8])
    assert all_pasts(p)[at].tolist() == [2, 3, 4, 5, 6]
    assert p.origins[at] == calendar()[6]


def test_a_restated_value_is_learnt_only_once_known():
    days = list(pd.bdate_range("2020-01-06", periods=12))
    table = known([*np.arange(12.0), 100.0], [*days, days[3]], [*days, days[6]])
    p = plan(table, calendar(), 5)
    pasts = dict(zip(p.targets, all_pasts(p), strict=True))
    assert 100.0 not in pasts[calendar()[6]]  # known in the evening of that day
    assert pasts[calendar()[7]].tolist() == [2, 100, 4, 5, 6]
    assert len(p.targets) == 7


def test_a_value_first_known_late_is_missing_until_then():
    days = list(pd.bdate_range("2020-01-06", periods=12))
    learnt = [*days]
    learnt[4] = days[8]
    p = plan(known(np.arange(12.0), days, learnt), calendar(), 5)
    pasts = dict(zip(p.targets, all_pasts(p), strict=True))
    assert pasts[calendar()[8]].tolist() == [2, 3, 5, 6, 7]
    assert pasts[calendar()[9]].tolist() == [4, 5, 6, 7, 8]


def test_a_desk_shorter_than_the_window_has_no_target():
    p = plan(known(np.arange(4.0)), calendar(periods=4), 5)
    assert len(p.targets) == 0
    assert p.blocks() == []


def test_blocks_lie_on_a_fixed_grid_of_weekday_numbers():
    days = calendar("2018-01-01", 900)
    p = plan(known(np.arange(900.0), days), days, 100)
    for rows in p.blocks():
        assert len(set(p.places[rows] // BLOCK_DAYS)) == 1
    assert sum(rows.stop - rows.start for rows in p.blocks()) == len(p.targets)
    assert BLOCK_DAYS % RUN_DAYS == 0


def test_weekday_numbers_step_by_one_over_a_weekend():
    friday, monday = weekday_numbers(np.array(["2020-01-10", "2020-01-13"], dtype="datetime64[D]"))
    assert monday == friday + 1


@pytest.mark.parametrize("every", [1, 5, 21])
def test_recalibration_follows_the_grid_and_starts_each_block(every):
    days = calendar("2018-01-01", 900)
    p = plan(known(np.arange(900.0), days), days, 100)
    for rows in p.blocks():
        places, refits = p.places[rows], p.refits(rows, every)
        assert refits[0]
        for i in range(1, len(places)):
            assert refits[i] == (places[i] // every != places[i - 1] // every)
