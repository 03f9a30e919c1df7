"""The battery: keys, addresses, spans, and one examination that every test sits."""

import pickle
from dataclasses import replace
from functools import cache

import numpy as np
import pandas as pd
import pytest

from backtest.errors import DataError, StudyError
from backtest.judging.battery import DEFAULT, TESTS, judge_table, resolve
from backtest.judging.phrases import EVIDENCE, NO_EVIDENCE, SEEN, UNSEEN
from backtest.records import RESULT_COLUMNS, results_table
from tests.reference.judging_tables import tables

SIGMA = np.exp(0.5 * np.sin(np.arange(300) / 25))
ALONE = {"tests": tuple(TESTS), "simulations": 199, "seed": 4, "spans": [250, "all"]}
RULED = {**ALONE, "subject": "bank", "firm": "B", "rules": "basel-mar32"}


def desks(*names, seed=0, scale=1.0):
    rng = np.random.default_rng(seed)
    return {name: scale * SIGMA * rng.standard_t(5, 300) for name in names}


def judged(losses=None, *, asked=RULED, scale=1.0, **more):
    losses = desks("A", "B", scale=scale) if losses is None else losses
    days = len(next(iter(losses.values())))
    measures = {
        "var": 2.2 * scale * SIGMA[:days],
        "es": 3.1 * scale * SIGMA[:days],
        "sigma": 1.2 * scale * SIGMA[:days],
    }
    return judge_table(*tables(losses, actual=True, **measures), **{**asked, **more})


def of(results, key):
    return [r for r in results if r.test == key]


EVERY = pytest.mark.parametrize("key", tuple(TESTS))


@cache
def everything():
    """Every test asked at once of the invented desks."""
    return judged()


@EVERY
def test_every_desk_model_kind_level_and_span_has_its_row(key):
    rows = of(everything(), key)
    per_model = 2 * 2 * 2 * 2  # desks, kinds, levels, spans
    between = dict.fromkeys(("diebold-mariano", "giacomini-white", "three-zone"), per_model)
    expected = ({"basel-zone": 1} | between).get(key, 2 * per_model)
    assert len(rows) == expected
    assert len({(r.desk, r.model, r.pnl_kind, r.level, r.days) for r in rows}) == expected


@EVERY
def test_p_lies_in_the_unit_interval_and_phrase_agrees_with_decision(key):
    known = {*EVIDENCE.values(), NO_EVIDENCE, SEEN, UNSEEN}
    for row in of(everything(), key):
        if key == "basel-zone":
            assert row.p_value is None
            continue
        assert row.phrase in known or row.phrase.startswith("not tested: ")
        assert (row.p_value is None) == (row.decision == "not tested") == (row.law is None)
        if row.p_value is not None:
            assert 0.0 < row.p_value <= 1.0
            assert row.decision == ("rejected" if row.p_value <= 0.05 else "not rejected")
            assert row.phrase.startswith("evidence") == (row.decision == "rejected")
        if row.low is not None and row.high is not None:
            assert row.low <= row.estimate <= row.high


@EVERY
@pytest.mark.parametrize("losses", [None, {"A": np.full(300, -1.0)}, {"A": np.full(300, 9.0)}, {"A": np.zeros(1)}])
def test_numbers_are_finite_or_absent(key, losses):
    for row in judged(losses, tests=[key]):
        numbers = [getattr(row, name) for name in ("statistic", "p_value", "estimate", "low", "high", "could_see")]
        assert all(n is None or (isinstance(n, float) and np.isfinite(n)) for n in numbers)


MONEY = ("estimate", "low", "high")


def same(first, second, *, money=1.0, tolerance=0.0):
    for name in RESULT_COLUMNS:
        if name in ("from", "to"):
            continue
        a, b = getattr(first, name), getattr(second, name)
        if isinstance(a, float) and isinstance(b, float):
            b = b / money if name in MONEY and "in the unit of the P&L" in first.note else b
            assert a == pytest.approx(b, rel=tolerance, abs=tolerance), name
        elif name != "note":
            assert a == b, name


@EVERY
@pytest.mark.parametrize("scale", [8.0, 3.7])
def test_scaling_pnl_and_forecasts_changes_nothing_but_money(key, scale):
    for plain, scaled in zip(of(everything(), key), judged(scale=scale, tests=[key]), strict=True):
        same(plain, scaled, money=scale, tolerance=1e-9)


@EVERY
def test_order_of_desks_and_rows_changes_nothing(key):
    pnl, forecasts = tables(desks("A", "B"), actual=True, var=2.2 * SIGMA, es=3.1 * SIGMA, sigma=1.2 * SIGMA)
    plain = judge_table(pnl, forecasts, **{**RULED, "tests": [key]})
    shuffled = judge_table(pnl.sample(frac=1, random_state=1), forecasts.sample(frac=1, random_state=2),
                           **{**RULED, "tests": [key]})  # fmt: skip
    assert plain == shuffled


@EVERY
def test_a_desk_is_judged_alike_alone_and_in_company(key):
    alone = judged({"B": desks("A", "B")["B"]}, tests=[key])
    ours = [replace(r, decision_across_desks="") for r in of(everything(), key) if r.desk == "B"]
    assert ours == alone  # one desk has no others to be picked out of


@EVERY
def test_asked_alone_or_with_others_the_answer_is_the_same(key):
    assert of(everything(), key) == judged(tests=[key])


@EVERY
def test_same_seed_same_answer_and_results_pickle(key):
    first = judged(tests=[key])
    assert pickle.loads(pickle.dumps(first)) == first == judged(tests=[key])


@EVERY
def test_zero_exceptions_are_never_a_pass(key):
    quiet = {"B": -np.abs(desks("B")["B"]) - 0.1}
    for row in judged(quiet, tests=[key]):
        assert row.exceptions == 0
        assert "pass" not in row.phrase
        if key in ("christoffersen-independence", "mcneil-frey"):
            assert row.phrase.startswith("not tested: 0 exceptions, needs")
        elif key in ("binomial", "kupiec", "acerbi-szekely-2"):
            assert row.p_value is not None


@EVERY
def test_all_exceptions(key):
    for row in judged({"B": 20.0 + np.abs(desks("B")["B"])}, tests=[key]):
        assert row.exceptions == row.days
        if key in ("binomial", "kupiec", "christoffersen-coverage", "acerbi-szekely-2"):
            assert row.decision == "rejected"
            assert row.phrase.endswith("is too low")


@EVERY
@pytest.mark.parametrize("loss", [0.0, 50.0])
def test_a_single_day(key, loss):
    for row in judged({"B": np.array([loss])}, tests=[key]):
        assert row.days == 1
        assert row.exceptions == (loss > 0)
        assert row.decision in ("rejected", "not rejected", "not tested")


@EVERY
def test_days_without_var_or_pnl_are_not_judged_by_statistics(key):
    pnl, forecasts = tables(desks("B"), var=2.2 * SIGMA, es=3.1 * SIGMA, sigma=1.2 * SIGMA, levels=(0.99,))
    gaps = pnl["date"].iloc[[100, 101, 200]]
    holes = forecasts.assign(var=forecasts["var"].mask(forecasts["date"].isin(gaps[:2])))
    pnl.loc[pnl["date"] == gaps.iloc[2], "hypothetical"] = np.nan
    for row in judge_table(pnl, holes, **{**RULED, "tests": [key], "spans": ["all"]}):
        assert row.days == (250 if key == "basel-zone" else 297)


@EVERY
def test_a_desk_without_any_shared_day_has_rows_that_say_so(key):
    pnl, forecasts = tables(desks("A", "B"), var=2.2 * SIGMA, es=3.1 * SIGMA, sigma=1.2 * SIGMA)
    rows = judge_table(pnl[pnl["desk"] == "A"], forecasts, **{**RULED, "tests": [key]})
    empty = [r for r in rows if r.desk == "B"]
    assert empty
    assert all(r.phrase.startswith("not tested: ") and r.p_value is None for r in empty)


def test_default_answers_each_question_once_and_the_rule():
    assert resolve("default").keys == DEFAULT
    assert DEFAULT == (
        "binomial", "dynamic-quantile", "christoffersen-independence", "es-zones", "berkowitz-tail",
        "acerbi-szekely-2", "mcneil-frey", "diebold-mariano", "basel-zone",
    )  # fmt: skip


def test_by_default_tests_of_es_depend_on_whether_a_pit_is_known():
    losses = desks("A", "B")
    measures = {"var": 2.2 * SIGMA, "es": 3.1 * SIGMA, "sigma": 1.2 * SIGMA}
    with_pit, without_pit = {"es-zones", "berkowitz-tail"}, {"acerbi-szekely-2", "mcneil-frey"}
    for pit, expected, others in ((np.linspace(0, 1, 300), with_pit, without_pit), (np.nan, without_pit, with_pit)):
        rows = judge_table(*tables(losses, pit=pit, **measures), simulations=199)
        asked = {r.test for r in rows}
        assert expected <= asked
        assert not others & asked
    named = judge_table(*tables(losses, **measures), tests=["es-zones"], simulations=199)
    assert {r.phrase for r in named} == {"not tested: needs pit"}


def test_unknown_test_gets_the_near_miss():
    with pytest.raises(StudyError, match="Did you mean 'kupiec'"):
        resolve(["binomial", "kupeic"])


def test_keys_are_kept_in_order_and_once():
    assert resolve(["kupiec", "binomial", "kupiec"]).keys == ("kupiec", "binomial")


def test_results_make_the_table_of_results_csv():
    table = results_table(judged(tests=["binomial"]))
    assert list(table.columns) == list(RESULT_COLUMNS)
    assert len(table) == 32


def test_models_are_compared_with_the_subject_or_else_with_historical():
    with_subject = of(everything(), "diebold-mariano")
    assert {(r.model, r.against) for r in with_subject} == {("historical", "bank")}
    without = judged(asked=ALONE, tests=["diebold-mariano"])
    assert {(r.model, r.against) for r in without} == {("bank", "historical")}


def test_without_a_reference_model_the_comparison_says_so():
    pnl, forecasts = tables(desks("A"), models=("mine",), var=2.0)
    (row,) = judge_table(pnl, forecasts[forecasts["level"] == 0.99], tests=["diebold-mariano"])
    assert row.phrase == "not tested: needs a model to compare with: the reported one under review, or 'historical'"


def test_spans_count_business_days_up_to_the_cut_off():
    pnl, forecasts = tables(desks("A"), var=2.0, models=("historical",), levels=(0.99,))
    cut = pnl["date"].iloc[199].to_datetime64()
    rows = judge_table(pnl, forecasts, tests=["kupiec"], spans=[50, 250, "all"], as_of=cut)
    assert [r.days for r in rows] == [50, 200, 200]
    assert {r.last for r in rows} == {str(pnl["date"].iloc[199].date())}
    calendar = pd.bdate_range("2020-01-01", periods=400).to_numpy()
    (row,) = judge_table(pnl, forecasts, tests=["kupiec"], spans=[250], calendar=calendar,
                         as_of=calendar[-1])  # fmt: skip
    assert row.days == 150  # 400 calendar days, P&L on the first 300: the last 250 hold 150 of them


def test_only_one_day_forecasts_are_judged():
    pnl, forecasts = tables(desks("A"), var=2.0, models=("historical",), levels=(0.99,))
    ten = forecasts.assign(horizon=10, var=9.0)
    both = pd.concat([forecasts.assign(horizon=1), ten])
    assert judge_table(pnl, both, tests=["kupiec"]) == judge_table(pnl, forecasts, tests=["kupiec"])


def test_a_desk_called_na_is_a_desk():
    assert {r.desk for r in judged({"NA": desks("A")["A"]}, tests=["kupiec"])} == {"NA"}


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (lambda p, f: (p.drop(columns="hypothetical"), f), "column 'hypothetical' is missing"),
        (lambda p, f: (p, f.rename(columns={"var": "VaR"})), "column 'var' is missing"),
        (lambda p, f: (p, f.assign(level=99.0)), "a level is not between 0.5 and 1, found 99.0"),
        (lambda p, f: (pd.concat([p, p.iloc[:1]]), f), "the same date x desk stands twice"),
        (lambda p, f: (p, pd.concat([f, f.iloc[:1]])), "the same date x desk x model x level stands twice"),
        (lambda p, f: (p.iloc[:0], f), "the table has no rows"),
        (lambda p, f: (p, f.assign(var=np.inf)), "an infinite value, found inf"),
        (lambda p, f: (p, f.assign(var="2,0")), "column 'var' does not hold numbers"),
        (lambda p, f: (p, f.assign(var=1j)), "column 'var' does not hold numbers"),
        (lambda p, f: (p, f.assign(var=True)), "column 'var' does not hold numbers"),
        (lambda p, f: (p.assign(date=p["date"].astype(str)), f), "column 'date' does not hold dates"),
        (lambda p, f: (p, f.assign(desk=None)), "column 'desk' has an empty cell"),
        (lambda p, f: (p, f.assign(horizon=10)), "no one-day forecasts"),
    ],
)
def test_tables_that_cannot_be_used_are_refused(change, message):
    pnl, forecasts = change(*tables(desks("A"), var=2.0))
    with pytest.raises(DataError, match=message):
        judge_table(pnl, forecasts, tests=["kupiec"])


@pytest.mark.parametrize(
    "spans", [[0], [-5], [2.5], ["everything"], [True], [None], [250, 250], ["all", "all"], 250, "all"]
)
def test_spans_that_are_none_are_refused(spans):
    with pytest.raises(StudyError, match=r"^days: "):
        judge_table(*tables(desks("A"), var=2.0), spans=spans)


@pytest.mark.parametrize(
    ("options", "place"),
    [
        ({"simulations": 98}, "simulations"),
        ({"simulations": 999.0}, "simulations"),
        ({"simulations": True}, "simulations"),
        ({"seed": -1}, "seed"),
        ({"seed": "1"}, "seed"),
        ({"significance": 0}, "significance"),
        ({"significance": 0.5}, "significance"),
        ({"significance": float("nan")}, "significance"),
        ({"significance": "5%"}, "significance"),
        ({"tests": None}, "judge.tests"),
        ({"tests": 5}, "judge.tests"),
        ({"tests": [None]}, "judge.tests"),
        ({"tests": [["kupiec"]]}, "judge.tests"),
    ],
)
def test_settings_that_cannot_be_used_are_refused(options, place):
    with pytest.raises(StudyError) as caught:
        judge_table(*tables(desks("A"), var=2.0), **options)
    assert caught.value.place == place


@pytest.mark.parametrize("table", [None, [1.0], "forecasts.csv"])
def test_what_is_no_table_of_forecasts_is_refused(table):
    with pytest.raises(DataError, match="forecasts table: not a table"):
        judge_table(tables(desks("A"), var=2.0)[0], table, tests=["kupiec"])


def test_var_that_is_not_positive_is_judged_by_counts():
    pnl, forecasts = tables(desks("A"), var=-0.5, es=0.5, sigma=1.0, models=("historical",), levels=(0.99,))
    rows = judge_table(pnl, forecasts, simulations=199)
    assert of(rows, "binomial")[0].p_value is not None
    assert of(rows, "acerbi-szekely-2")[0].p_value is not None  # ES is positive and above VaR
