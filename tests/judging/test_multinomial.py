"""Counts in cells of the tail: Nass's correction, sizes, ranks."""

import itertools

import numpy as np
import pytest
from scipy import stats

from backtest.judging.answers import Settings
from backtest.judging.multinomial import TESTS, cell_counts, nass, nass_null, pearson
from backtest.judging.nulls import p_upper
from tests.reference.judging_tables import sample_of
from tests.reference.pit_laws import pearson_of

SETTINGS = Settings(0.05, 1999, 7)
(JUDGE,) = (test.judge for test in TESTS)
CELLS = (1, 2, 4, 8, 16, 32, 64)
PATHS = 20_000


def of_pits(pits, level=0.975):
    return sample_of(np.asarray(pits), level, level, pit=np.asarray(pits))


# Degrees of freedom by the formula of Nass (1959), computed apart from this package.
NU = {
    250: (0.9345, 1.7421, 3.0675, 4.9505, 7.1428, 9.1743, 10.6952),
    500: (0.9662, 1.8622, 3.4722, 6.1162, 9.8765, 14.2602, 18.3276),
}


@pytest.mark.parametrize("days", list(NU))
def test_degrees_of_freedom(days):
    assert [nass(days, 0.975, n)[1] for n in CELLS] == pytest.approx(NU[days], abs=6e-5)


# Size at 5% and level 97.5% by another simulation (its replications are not stated: 2,000 assumed for its error).
SIZES = {
    250: ((0.038, 0.038, 0.047, 0.035, 0.053, 0.048, 0.088, 0.051, 0.110, 0.051, 0.146, 0.053, 0.219, 0.051)),
    500: ((0.043, 0.043, 0.048, 0.042, 0.050, 0.045, 0.065, 0.049, 0.087, 0.054, 0.121, 0.055, 0.162, 0.056)),
}


@pytest.mark.parametrize("days", list(SIZES))
def test_sizes_of_pearson_and_nass(days):
    rng = np.random.default_rng(3)
    for place, n in enumerate(CELLS):
        counts = rng.multinomial(days, [0.975, *[0.025 / n] * n], PATHS)[:, 1:]
        statistics, (c, nu) = pearson(counts, days, 0.975), nass(days, 0.975, n)
        sizes = np.mean(stats.chi2.sf(statistics, n) <= 0.05), np.mean(stats.chi2.sf(c * statistics, nu) <= 0.05)
        for size, expected in zip(sizes, SIZES[days][2 * place : 2 * place + 2], strict=True):
            error = np.sqrt(expected * (1 - expected) * (1 / PATHS + 1 / 2000))
            assert size == pytest.approx(expected, abs=4 * error), n


def test_nass_matches_the_exact_mean_and_variance():
    days, level, n = 6, 0.7, 2
    chances = [level, 0.15, 0.15]
    moments = np.zeros(3)
    for a, b in itertools.product(range(days + 1), repeat=2):
        if a + b <= days:
            chance = stats.multinomial.pmf([days - a - b, a, b], days, chances)
            value = float(pearson([a, b], days, level))
            moments += chance * np.array([1.0, value, value**2])
    c, nu = nass(days, level, n)
    assert moments[1] == pytest.approx(n)
    assert c * moments[1] == pytest.approx(nu)
    assert c**2 * (moments[2] - moments[1] ** 2) == pytest.approx(2 * nu)


def test_statistic_equals_plain_counting():
    pits = np.random.default_rng(4).random(400)
    depths = (pits[pits > 0.9] - 0.9) / 0.1
    assert pearson(cell_counts(depths), 400, 0.9) == pytest.approx(pearson_of(list(pits), 0.9, 4))


def test_simulated_law_is_the_exact_one():
    days, level = 5, 0.6
    null = nass_null(1, level, days, 20_000)
    values, chances = [], []
    for cells in itertools.product(range(days + 1), repeat=4):
        if sum(cells) <= days:
            values.append(nass(days, level)[0] * float(pearson(cells, days, level)))
            chances.append(stats.multinomial.pmf([days - sum(cells), *cells], days, [level, *[0.1] * 4]))
    values, chances = np.array(values), np.array(chances)
    assert chances.sum() == pytest.approx(1.0)
    for x in np.unique(np.round(values, 9)):
        exact = min(1.0, chances[values >= x - 1e-8].sum())
        error = 4.5 * np.sqrt(exact * (1 - exact) / 20_000) + 1e-12
        assert np.mean(null >= x - 1e-8) == pytest.approx(exact, abs=error)


def test_p_is_that_of_the_simulated_law_and_ties_count():
    answer = JUDGE(of_pits(np.r_[np.full(245, 0.5), 0.977, 0.983, 0.99, 0.998, 0.999]), SETTINGS)
    null = nass_null(7, 0.975, 250, 1999)
    assert answer.p_value == p_upper(null, answer.statistic)
    assert "counts in 4 equal cells of the tail, from the level up: 1, 1, 1, 2; 1.56 expected in each" in answer.notes


@pytest.mark.parametrize(("tail", "side"), [(0.9995, "tail-thin"), (0.976, "tail-heavy")])
def test_losses_all_in_one_cell_are_seen(tail, side):
    answer = JUDGE(of_pits(np.r_[np.full(240, 0.5), np.full(10, tail)]), SETTINGS)
    assert answer.p_value < 0.01
    assert answer.evidence == ("tail-thin" if tail > 0.99 else answer.evidence)
    if side == "tail-heavy":  # ten in the first cell where 1.56 are expected in each: still deeper in sum than expected
        assert np.arange(1, 5) @ (np.array([10, 0, 0, 0]) - 250 * 0.025 / 4) < 0
        assert answer.evidence == "tail-heavy"


def test_ranks_that_cannot_resolve_the_levels_are_said():
    def note(n):
        ranks = (np.random.default_rng(1).permutation(n + 1)[:300] + 0.5) / (n + 1)
        return "; ".join(JUDGE(of_pits(ranks, 0.99), SETTINGS).notes)

    assert "ranks cannot resolve these levels: cells hold 1, 1, 2, 1 steps of this rank PIT where 1.25 are" in note(500)
    assert "cannot resolve" not in note(3999)


def test_ranks_make_a_right_model_fail_and_continuous_pits_do_not():
    # 100 past values at 99%: a single rank above the level, so that the cells cannot be filled alike
    rng = np.random.default_rng(9)
    null = nass_null(7, 0.99, 1000, 1999)
    limit = np.quantile(null, 0.95)
    shares = []
    for draw in (lambda: (rng.integers(0, 101, 1000) + 0.5) / 101, lambda: rng.random(1000)):
        found = []
        for _ in range(300):
            u = draw()
            depths = (u[u > 0.99] - 0.99) / 0.01
            found.append(nass(1000, 0.99)[0] * pearson(cell_counts(depths), 1000, 0.99) > limit)
        shares.append(np.mean(found))
    assert shares[0] > 0.9
    assert shares[1] == pytest.approx(0.05, abs=0.05)
