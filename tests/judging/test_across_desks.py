"""Many desks: adjusted p-values against an independent implementation, families, and what is left alone."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from statsmodels.stats.multitest import multipletests

from backtest.judging.across_desks import (
    HOLM,
    NEITHER,
    STEP_UP,
    benjamini_hochberg,
    holm,
    span_places,
    with_decisions,
)
from tests.reference.results import result

P = st.lists(st.floats(0.0001, 1.0), min_size=1, max_size=30).map(np.array)


@pytest.mark.parametrize(("ours", "method"), [(holm, "holm"), (benjamini_hochberg, "fdr_bh")])
@given(p=P)
def test_adjusted_p_values_are_those_of_statsmodels(ours, method, p):
    np.testing.assert_allclose(ours(p), multipletests(p, method=method)[1], rtol=1e-12)


def decided(*ps, **more):
    rows = [result(desk=f"D{i}", p_value=p, **more) for i, p in enumerate(ps)]
    return [r.decision_across_desks for r in with_decisions(rows, span_places(rows), 0.05)]


def test_a_small_p_survives_holm_a_middling_one_only_the_step_up():
    # Holm: .01 x 4 = .04, then .02 x 3 = .06; Benjamini-Hochberg: .02 x 4 / 2 = .04, .03 x 4 / 3 = .04
    assert decided(0.01, 0.02, 0.03, 0.9) == [HOLM, STEP_UP, STEP_UP, NEITHER]


def test_one_desk_alone_and_rows_without_p_are_left_empty():
    assert decided(0.001) == [""]
    assert decided(0.001, None, 0.9) == [HOLM, "", NEITHER]


def test_another_test_changes_no_decision():
    rows = [result(desk="A", p_value=0.03), result(desk="B", p_value=0.9)]
    others = [result(desk=d, p_value=0.9, question=q, test="t") for d in "AB" for q in ("when", "how deep")]
    alone = with_decisions(rows, span_places(rows), 0.10)
    both = with_decisions([*rows, *others], span_places([*rows, *others]), 0.10)
    assert [r.decision_across_desks for r in alone] == [r.decision_across_desks for r in both[:2]] == [HOLM, NEITHER]


def test_the_second_row_of_the_same_test_is_the_second_span():
    rows = [result(), result(days=500), result(test="kupiec"), result(desk="B")]
    assert span_places(rows) == [0, 1, 0, 0]
