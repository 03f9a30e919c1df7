"""The four cells, the scoreboard, the list of desks across desks, the terms and the criteria on the page."""

from dataclasses import replace

import pandas as pd
import pytest

from backtest.judging import four_cells as judging
from backtest.judging.across_desks import HOLM, NEITHER, STEP_UP
from backtest.judging.criteria import MET
from backtest.reporting import open_points, parts
from backtest.reporting.book import Book
from backtest.reporting.drawn import scope_of
from backtest.reporting.sentences import six_sentences
from backtest.reporting.view import summary_view
from tests.reference.invented_record import FIRM, LEVELS, SUBJECT, invented_record


@pytest.fixture(scope="module")
def record():
    """The invented record with four models for the four cells."""
    made = invented_record()
    copies = {"filtered-historical": ("historical", 1.02), "unconditional-evt": ("conditional-evt", 0.97)}
    rows = [made.forecasts]
    for name, (like, size) in copies.items():
        own = made.forecasts[made.forecasts["model"] == like].assign(model=name)
        rows.append(own.assign(var=own["var"] * size, es=own["es"] * size))
    forecasts = pd.concat(rows, ignore_index=True)
    return replace(made, four_cells=judging.four_cells(made.pnl, forecasts, levels=LEVELS))


def decided(record, **effects):
    """The record with decisions of the parts as after 1,824 days."""
    table = record.four_cells.copy()
    chosen = table["part"] == "effect"
    table["days"] = 1824
    table.loc[chosen, ["p_value", "share", "share_low", "share_high"]] = [0.02, 60.0, 40.0, 80.0]
    table.loc[chosen, "decision"] = [effects.get(name, "no evidence") for name in table.loc[chosen, "name"]]
    return replace(record, four_cells=table)


def desk(record, name=FIRM):
    return next(d for d in summary_view(record).desks if d.name == name)


def test_every_cell_and_effect_of_the_record_is_on_the_page(record):
    firm = desk(record)
    kept = record.four_cells.query("desk == @FIRM and pnl_kind == 'hypothetical'")
    cells, effects = firm.parts
    wanted = [
        (f"{r.level * 100:g}%", r.name, r.exceptions) for r in kept.query("part == 'cell'").itertuples(index=False)
    ]
    assert [(r[0], r[3], int(r[4].split(" ")[0])) for r in cells.rows] == wanted
    assert [r[8] for r in cells.rows] == [f"{v:,.3f}" for v in kept.query("part == 'cell'")["score"]]
    assert [r[1] for r in effects.rows] == list(kept.query("part == 'effect'")["name"])
    assert all(r[2].count(" to ") == 1 for r in effects.rows)
    assert "FZ0 (no unit), a mean, lower is better" in cells.note


def test_without_days_enough_the_sizes_stand_and_there_is_no_decision(record):
    firm = desk(record)
    assert all("No decision: 499 shared days, needs 1,000." in words for words in firm.parts_words)
    assert {(r[5], r[6]) for r in firm.parts[1].rows} == {("–", "no decision: 499 shared days, needs 1,000")}
    assert "Filter and tail" not in six_sentences(record)[3]


@pytest.mark.parametrize(
    ("filters", "tail", "words"),
    [
        (parts.GAINS, "no evidence", "The filter gains beyond chance; the tail cannot be told from nothing."),
        (parts.GAINS, parts.GAINS, "The filter and the tail gain beyond chance."),
        (parts.GAINS, parts.LOSES, "The filter gains beyond chance; the tail loses beyond chance."),
        ("no evidence", "no evidence", "The filter and the tail cannot be told from nothing."),
    ],
)
def test_the_sentence_says_whether_it_is_the_filter_or_the_tail(record, filters, tail, words):
    assert words in desk(decided(record, filter=filters, tail=tail)).parts_words[1]


def test_the_words_of_a_decision_are_those_judging_writes():
    found = [judging._decision(gain, 0.01, 1824, 0.05) for gain in (0.1, -0.1)]
    assert found == [parts.GAINS, parts.LOSES]


def test_the_first_page_says_the_shares_after_the_gain_where_there_is_a_decision(record):
    why = six_sentences(decided(record, filter=parts.GAINS))[3]
    gain = record.four_cells.query(
        "desk == @FIRM and level == 0.99 and pnl_kind == 'hypothetical' and name == 'filter and tail'"
    ).iloc[0]
    assert f"Filter and tail together gain {gain['gain']:.3g}".replace("-", "−") in why
    assert (
        "in FZ0 at 99%: the filter brings 60.0% (40.0% to 80.0%) and the tail brings 60.0% (40.0% to 80.0%, cannot be "
        "told from nothing)."
    ) in why


def test_a_gain_near_nothing_is_not_divided(record):
    made = decided(record)
    made = replace(made, four_cells=made.four_cells.assign(share=None, share_low=None, share_high=None))
    assert "in FZ0 at 99%, too close to nothing to be divided." in six_sentences(made)[3]


def test_a_missing_cell_is_said_and_has_no_table():
    firm = desk(invented_record())
    lacking = "not tested: needs filtered-historical, unconditional-evt"
    assert firm.parts_words == (f"At 97.5%: {lacking} at 97.5%.", f"At 99%: {lacking} at 99%.")
    assert firm.parts == ()


def test_every_number_of_the_scoreboard_is_one_of_the_record(record):
    board = desk(record).scoreboard
    kept = record.scoreboard.query("desk == @FIRM and pnl_kind == 'hypothetical'")
    assert [r[1] for r in board.rows[:3]] == [SUBJECT, "historical", "conditional-evt"]
    for row in board.rows:
        own = kept[(kept["model"] == row[1]) & (kept["level"] == float(row[0].removesuffix("%")) / 100)].iloc[0]
        assert row[2] == f"{own['exceptions']} ({own['days'] * (1 - own['level']):.1f})"
        assert row[3] == str(own["longest_run"])
        assert row[4] == f"EUR {own['average_var'] / 1e6:.2f} m"
        assert float(row[8]) == pytest.approx(own["fz0"], abs=5e-4)


def test_a_remark_of_the_scoreboard_names_its_models(record):
    board = record.scoreboard.copy()
    board.loc[board["model"] == SUBJECT, "note"] = "no ES on 499 of 499 days: no joint score"
    board.loc[board["model"] == SUBJECT, ["fz0", "half_homogeneous"]] = None
    made = desk(replace(record, scoreboard=board)).scoreboard
    assert made.note.endswith(f"{SUBJECT} at 97.5% and {SUBJECT} at 99%: no ES on 499 of 499 days: no joint score.")
    assert made.rows[0][8:] == ("–", "–")


def across(record, **words):
    table = record.results.copy()
    for name, word in words.items():
        rows = (table["desk"] == name.replace("_", " ")) & (table["test"] == "binomial") & (table["model"] == SUBJECT)
        table.loc[rows, "decision_across_desks"] = word
    return replace(record, results=table)


def test_the_list_is_ordered_by_what_is_rejected_across_desks_with_the_firm_first(record):
    index = summary_view(across(record, Firm=NEITHER, NA=STEP_UP, New_desk=HOLM)).index
    assert [(r[0], r[-2]) for r in index.rows] == [
        (FIRM, "alone only"), ("New desk", "Holm"), ("NA", "Benjamini-Hochberg"),
    ]  # fmt: skip
    assert index.note.startswith(
        "99% count rejected alone: 3 of 3 desks, by chance at most 0.15; across desks: 2 by Benjamini-Hochberg, 1 by "
        "Holm."
    )


def test_the_sections_and_links_follow_the_order_of_the_list(record):
    view = summary_view(across(record, Firm=NEITHER, NA=NEITHER, New_desk=HOLM))
    assert [d.name for d in view.desks] == [r[0] for r in view.index.rows] == [FIRM, "New desk", "NA"]
    assert tuple(d.anchor for d in view.desks) == view.index.links


def test_one_desk_has_nothing_across_desks(record):
    results = record.results[record.results["desk"] == FIRM]
    alone = replace(record, results=results)
    assert scope_of(Book(alone)) is not None
    assert "Across desks, 99%" not in summary_view(alone).index.header


def test_the_words_across_desks_are_those_judging_writes():
    assert (open_points.HOLM, open_points.STEP_UP) == (HOLM, STEP_UP)


def terms(record, **more):
    kept = {"sha256": "d9c1932aef69" + "0" * 52, "values": {}} | more
    return summary_view(replace(record, manifest=record.manifest | {"terms": kept}))


def test_the_hash_of_the_terms_is_a_fact_of_the_first_page(record):
    view = terms(record)
    assert [f.text for f in view.facts if f.label.startswith("Terms fixed")] == [
        "d9c1932aef69; no previous review named"
    ]
    assert [f.text for f in view.terms] == ["d9c1932aef69" + "0" * 52, "none named"]


def test_a_change_since_the_previous_review_is_named_on_the_first_page_and_spelt_out_below(record):
    lines = ["lagged_hits: 1 before, 4 now", "significance: 0.05 before, 0.1 now"]
    view = terms(record, previous_run="0f1e", changed=lines)
    assert next(f.text for f in view.facts if f.label.startswith("Terms fixed")) == (
        "d9c1932aef69; changed since the previous review: lagged hits and significance"
    )
    assert [f.text for f in view.terms][1:] == [
        "run 0f1e", "lagged hits: 1 before, 4 now; significance: 0.05 before, 0.1 now",
    ]  # fmt: skip


def test_the_same_terms_as_before_say_so(record):
    view = terms(record, previous_run="0f1e", changed=[])
    assert view.terms[-1].text == "nothing but the cut-off"
    assert next(f.text for f in view.facts if f.label.startswith("Terms fixed")).endswith("review: nothing")


def test_criteria_of_two_tests_with_the_same_answer_are_one_row_that_names_both(record):
    rows = record.criteria[(record.criteria["desk"] == FIRM) & (record.criteria["criterion"] == "clustering")]
    one = rows[(rows["level"] == 0.99) & (rows["pnl_kind"] == "hypothetical")].assign(answer=MET)
    both = pd.concat([one.assign(note="dynamic-quantile"), one], ignore_index=True)
    table = desk(replace(record, criteria=both)).criteria
    assert [(r[5], r[6], r[7]) for r in table.rows] == [
        ("11.5 points [−2.0 to 24.0]", "met", "Dynamic quantile; Christoffersen, independence")
    ]


def with_test(record, test, like="christoffersen-independence", models=("historical", "conditional-evt")):
    own = record.results[(record.results["test"] == like) & record.results["model"].isin(models)]
    return replace(record, results=pd.concat([record.results, own.assign(test=test, p_value=0.4321)]))


def test_challengers_have_a_column_of_p_for_every_question_asked(record):
    header = desk(record).challengers[0].header
    assert header[4:-2] == ("Count p", "Independence p", "McNeil-Frey p")
    more = with_test(with_test(with_test(record, "dynamic-quantile"), "es-zones"), "berkowitz-tail")
    table = desk(more).challengers[0]
    assert table.header[4:-2] == ("Count p", "Dynamic quantile p", "ES zones p", "Tail p")
    assert {r[5:8] for r in table.rows} == {("0.43", "0.43", "0.43")}


def test_a_model_without_pit_stands_in_the_column_of_depth_with_the_test_that_it_has(record):
    table = desk(with_test(record, "es-zones", models=("historical",))).challengers[0]
    assert table.header[6] == "ES zones, else other, p"
    assert table.note.endswith("In that column McNeil-Frey p of conditional-evt.")
    shown = {r[0]: r[6] for r in table.rows if r[1] == "97.5%"}
    assert shown["historical"] == "0.43"
    assert shown["conditional-evt"] != "0.43"
