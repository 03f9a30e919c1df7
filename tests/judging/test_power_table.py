"""The shipped table of simulated power, how results look it up, and the lines of ``tailmark power``."""

import numpy as np
import pytest
from scipy import stats

from backtest.errors import StudyError
from backtest.judging.alternatives import ALTERNATIVES
from backtest.judging.answers import SampleTest, Settings, dress
from backtest.judging.battery import TESTS
from backtest.judging.phrases import SEEN, UNSEEN
from backtest.judging.power_lines import power_lines
from backtest.judging.power_table import AGAINST, LENGTHS, LEVELS, could_see, power_table
from tests.reference.judging_tables import sample_of

KEYS = [key for key, test in TESTS.items() if isinstance(test, SampleTest)]
BINOMIAL = TESTS["binomial"]


@pytest.mark.parametrize("key", KEYS)
def test_every_test_of_one_model_has_all_its_cells(key):
    """A test without rows: run ``python -m backtest.judging.write_power --missing``."""
    cells = {cell for cell in power_table() if cell[0] == key}
    assert cells == {(key, level, days, a) for level in LEVELS for days in LENGTHS for a in ALTERNATIVES}


def test_no_row_is_of_a_test_that_is_no_more():
    assert {cell[0] for cell in power_table()} <= set(KEYS)


def test_power_is_a_share_of_enough_reviews():
    for seen in power_table().values():
        assert 0 <= seen.rejected <= seen.reviews
        assert seen.reviews >= 100


# exact two-sided power at twice the nominal rate, computed apart from the table by enumeration in test_power.py; the
# tolerance is four standard errors of 400 reviews
@pytest.mark.parametrize("level", LEVELS)
@pytest.mark.parametrize("days", LENGTHS)
def test_the_table_agrees_with_the_exact_power_of_the_count(level, days):
    counts = np.arange(days + 1)
    p = 2 * np.minimum(stats.binom.sf(counts - 1, days, 1 - level), stats.binom.cdf(counts, days, 1 - level))
    exact = stats.binom.pmf(counts, days, 2 * (1 - level))[p <= 0.05].sum()
    seen = power_table()["binomial", level, days, "rate-x2"]
    assert seen.share == pytest.approx(exact, abs=4 * np.sqrt(exact * (1 - exact) / seen.reviews) + 1e-9)


@pytest.mark.parametrize(("days", "used"), [(125, 125), (249, 125), (250, 250), (999, 750), (2500, 2500), (9000, 2500)])
def test_the_largest_length_not_above_the_span_is_used(days, used):
    share, note = could_see("binomial", "how often", 0.99, days, 0.05)
    assert share == power_table()["binomial", 0.99, used, "sigma-20"].share
    assert note == f"power at {used} days against: sigma understated by 20%"


@pytest.mark.parametrize("question", AGAINST)
def test_each_question_has_its_own_alternative(question):
    share, note = could_see("binomial", question, 1 - 0.025, 500, 0.05)  # a level as computed
    assert share == power_table()["binomial", 0.975, 500, AGAINST[question]].share
    assert note.endswith(ALTERNATIVES[AGAINST[question]].words)


@pytest.mark.parametrize(
    ("asked", "note"),
    [
        (("binomial", "how often", 0.99, 124, 0.05), "power not simulated below 125 days"),
        (("binomial", "how often", 0.95, 500, 0.05), "power not simulated at this level"),
        (("binomial", "how often", 0.99, 500, 0.01), "power not simulated at significance 0.01"),
        (("binomial", "how often", 0.99, 500, 0.05, False), "power not simulated for this variant"),
        (("no-such-test", "how often", 0.99, 500, 0.05), "power not simulated for this test"),
        (("diebold-mariano", "which is better", 0.99, 500, 0.05), ""),
    ],
)
def test_power_that_was_not_simulated_is_absent_and_says_why(asked, note):
    assert could_see(*asked) == (None, note)


def judged(days: int, level: float = 0.99) -> object:
    sample = sample_of(np.zeros(days), level=level)
    settings = Settings(0.05, 99, 1)
    return dress(BINOMIAL.judge(sample, settings), sample, BINOMIAL, settings)


def test_a_result_carries_its_power_and_the_phrase_follows_it():
    weak, strong = judged(250), power_table()["binomial", 0.975, 1000, "sigma-20"].share
    assert weak.could_see == power_table()["binomial", 0.99, 250, "sigma-20"].share < 0.8 < strong
    assert weak.phrase == UNSEEN
    assert "power at 250 days against: sigma understated by 20%" in weak.note
    hits = np.arange(1000) % 40 == 0
    sample = sample_of(np.where(hits, 2.0, 0.0), level=0.975)
    settings = Settings(0.05, 99, 1)
    assert dress(BINOMIAL.judge(sample, settings), sample, BINOMIAL, settings).phrase == SEEN


def test_a_result_without_a_p_carries_no_power():
    empty = judged(0)
    assert (empty.p_value, empty.could_see) == (None, None)


def test_the_table_of_lines_has_every_test_and_marks_its_alternative():
    lines = power_lines(250, 0.99)
    assert max(map(len, lines)) <= 100
    for key in KEYS:
        (row,) = [line for line in lines if line[11:].split()[:1] == [key]]
        assert row.startswith(TESTS[key].question)
        assert row.count("*") == (TESTS[key].question in AGAINST)
        cells = row[11:].split()[1:]
        assert len(cells) == len(ALTERNATIVES)


def test_one_test_is_told_in_words():
    lines = power_lines(250, 0.99, "binomial")
    share = power_table()["binomial", 0.99, 250, "sigma-20"].share
    assert f"  sigma understated by 20%: rejects in {100 * share:.0f} of 100 such reviews (could_see)" in lines
    assert not any("kupiec" in line for line in lines)


def test_a_length_between_two_says_which_is_used():
    assert power_lines(300, 0.975)[0] == (
        "Simulated power at 97.5%, 250 days (the table's largest length not above 300 days)."
    )


@pytest.mark.parametrize(("days", "level"), [(100, 0.99), (500, 0.95)])
def test_off_the_grid_only_exact_rows_are_printed(days, level):
    first, _, *exact = power_lines(days, level)
    assert first.startswith(f"No simulated power at {100 * level:g}%, {days} days")
    assert exact[0].startswith("Exact")
    assert len(exact) == 4


# from the tables of the binomial law: at 2% P(X >= 7) = 0.24 (two-sided) and P(X >= 6) = 0.38 (one-sided)
def test_exact_rows_are_the_binomial_law():
    two_sided, one_sided = power_lines(250, 0.99)[-2:]
    assert two_sided.split()[-3] == "8"
    assert two_sided.split()[-2] == "24"
    assert one_sided.split()[-2] == "38"


@pytest.mark.parametrize(
    ("arguments", "place"),
    [((0, 0.99), "--days"), ((250, 99), "--level"), ((250, 0.5), "--level"), ((250, 0.99, "binomal"), "--test")],
)
def test_what_cannot_be_asked_is_refused(arguments, place):
    with pytest.raises(StudyError) as caught:
        power_lines(*arguments)
    assert caught.value.place == place


@pytest.mark.parametrize(("lags", "known"), [(1, True), (4, False)])
def test_power_of_dynamic_quantile_is_that_of_one_lag(lags, known):
    hits = np.arange(500) % 50 == 0
    sample = sample_of(np.where(hits, 9.0, 0.0), var=2.0 + np.sin(np.arange(500)), level=0.975)
    settings, test = Settings(0.05, 99, 1, lagged_hits=lags), TESTS["dynamic-quantile"]
    result = dress(test.judge(sample, settings), sample, test, settings)
    assert result.p_value is not None
    assert (result.could_see is not None) == known
    assert ("not simulated for this variant" in result.note) != known
