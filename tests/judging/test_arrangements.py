"""Random arrangements: every one equally likely."""

from collections import Counter
from itertools import combinations

import numpy as np
import pytest
from scipy import stats

from backtest.judging.arrangements import placements


@pytest.mark.parametrize("count", [1, 2, 3, 4, 5])
def test_all_arrangements_are_equally_likely(count):
    drawn = np.concatenate(list(placements(3, 6, count, 20_000)))
    assert drawn.shape == (20_000, count)
    seen = Counter(map(tuple, drawn.tolist()))
    assert set(seen) == set(combinations(range(6), count))  # distinct, ascending, none left out
    assert stats.chisquare(list(seen.values())).pvalue > 1e-4


def test_negative_control_the_check_sees_days_drawn_with_a_preference():
    rng = np.random.default_rng(0)
    tilted = Counter(np.minimum(rng.integers(0, 7, 20_000), 5).tolist())  # the last day twice as likely
    assert stats.chisquare(list(tilted.values())).pvalue < 1e-4


def test_blocks_hold_together_and_repeat():
    first, again = (list(placements(3, 2500, 400, 3000)) for _ in range(2))
    assert len(first) > 1
    assert sum(map(len, first)) == 3000
    assert all(np.array_equal(a, b) for a, b in zip(first, again, strict=True))
    assert all((np.diff(block, axis=1) > 0).all() for block in first)
