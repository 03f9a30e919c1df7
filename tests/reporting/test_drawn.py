from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

from backtest.reporting.book import Book
from backtest.reporting.drawn import main_bridge, often, rule_count, scope_of, size, when
from backtest.reporting.open_points import flagged, person
from tests.reference.invented_record import DATES, FIRM, SUBJECT, invented_record


def test_counts_of_the_first_page_are_those_of_results_log_and_losses():
    record = invented_record()
    book = Book(record)
    scope = scope_of(book)
    counts = {c.name: c.exceptions for c in often(book, scope).counts}
    log = record.exceptions[(record.exceptions["desk"] == FIRM) & (record.exceptions["date"] >= DATES[-250])]
    assert counts == {k: int(log[f"exception_{k}_0.99"].sum()) for k in ("hypothetical", "actual")}
    facts = when(book, scope)
    assert facts.exceptions == int(log["exception_hypothetical_0.975"].sum())
    assert facts.days == 250


def test_most_exceptions_lie_in_the_shortest_run_of_business_days():
    book = Book(invented_record())
    facts = when(book, scope_of(book))
    log = book.record.exceptions
    hits = log.loc[(log["desk"] == FIRM) & log["exception_hypothetical_0.975"] & (log["date"] >= DATES[-250]), "date"]
    places = np.searchsorted(DATES, hits.to_numpy())
    wanted = int(np.ceil(0.75 * len(places)))
    widths = [b - a + 1 for a in places for b in places if ((places >= a) & (places <= b)).sum() >= wanted]
    assert (facts.inside, facts.width) == (wanted, min(widths))


def test_sizes_and_bridge_are_those_of_the_record():
    book = Book(invented_record())
    scope = scope_of(book)
    row = book.record.results.query(
        "desk == 'Firm' and model == 'HS-250' and test == 'sufficient-var-multiple' and level == 0.975 and days == 250 "
        "and pnl_kind == 'hypothetical'"
    ).iloc[0]
    facts = size(book, scope).var
    assert (facts.estimate, facts.low, facts.high) == (row["estimate"], row["low"], row["high"])
    kept = book.record.bridge.query("desk == 'Firm' and level == 0.99")
    bridge = main_bridge(book, scope)
    assert [s.exceptions for s in bridge.steps] == list(kept["exceptions"])
    assert [s.average_var for s in bridge.steps] == list(kept["average_var"])


def test_what_needs_a_person_is_counted_from_the_record():
    book = Book(invented_record())
    facts = person(book, scope_of(book))
    assert (facts.forecasts, facts.fallbacks, facts.remarks) == (2000, 6, 3)
    assert facts.unforecast == ("New desk",)
    assert facts.short == (("New desk", 131),)


MAIN = f"desk == '{FIRM}' and model == '{SUBJECT}' and days == 250 and decision == 'rejected'"


def addresses(found):
    return sorted((r.test, r.level, r.kind, r.p) for r in found)


def test_no_rejection_of_the_firm_over_the_main_span_is_left_out():
    book = Book(invented_record())
    scope = scope_of(book)
    kept = book.record.results.query(MAIN)
    every = sorted(kept[["test", "level", "pnl_kind", "p_value"]].itertuples(index=False, name=None))
    shown = [("binomial", 0.99, c.name, c.p) for c in often(book, scope).counts if c.rejected]
    dates = when(book, scope)
    shown += [("christoffersen-independence", 0.975, "hypothetical", dates.p)] * dates.rejected
    more = [*addresses(often(book, scope).more), *addresses(dates.more), *addresses(size(book, scope).more)]
    assert len(more) > 4
    assert sorted(shown + more) == every


def test_a_second_test_of_the_count_is_named_only_where_the_first_does_not_reject():
    record = invented_record()
    table = record.results.copy()
    second = table[table["test"] == "binomial"].assign(test="kupiec", p_value=0.04, decision="rejected")
    table.loc[(table["test"] == "binomial") & (table["pnl_kind"] == "actual"), "decision"] = "not rejected"
    book = Book(replace(record, results=pd.concat([table, second], ignore_index=True)))
    found = [r for r in often(book, scope_of(book)).more if r.test == "kupiec"]
    assert [(r.level, r.kind) for r in found] == [(0.975, "actual"), (0.99, "actual")]


def test_even_spacing_counts_the_gaps_between_as_many_exceptions():
    book = Book(invented_record())
    facts = when(book, scope_of(book))
    evenly = np.arange(facts.exceptions) * facts.days / facts.exceptions
    assert facts.even == pytest.approx(evenly[facts.inside - 1] - evenly[0] + 1)


def test_statuses_that_are_no_fallback_are_counted_part_by_part():
    record = invented_record()
    statuses = {"ok": 90, "no reaction; second mode near": 3, "second mode near": 4, "fallback: x; no reaction": 2}
    manifest = record.manifest | {"fallbacks": {"forecasts": 99, "fallbacks": 2, "by_status": statuses}}
    assert flagged(Book(replace(record, manifest=manifest))) == (("second mode near", 7), ("no reaction", 5))


def test_desks_whose_count_is_rejected_are_those_of_the_results():
    book = Book(invented_record())
    counts = person(book, scope_of(book)).counts
    kept = book.record.results.query(
        f"test == 'binomial' and level == 0.99 and pnl_kind == 'hypothetical' and model == '{SUBJECT}'"
    ).drop_duplicates("desk")
    assert set(counts.rejected) == set(kept.loc[kept["decision"] == "rejected", "desk"])
    assert (counts.desks, counts.by_chance) == (3, pytest.approx(0.15))


def with_review(record, **settings):
    study = record.manifest["study"]
    return replace(record, manifest=record.manifest | {"study": study | {"review": study["review"] | settings}})


@pytest.mark.parametrize(
    ("switches", "note"),
    [
        ({"subject": False}, "not applied, since no reported model was supplied"),
        ({"firm": False}, "not applied, since no desk is named as the firm-wide row"),
    ],
)
def test_a_rule_that_is_named_and_not_applied_says_why(switches, note):
    record = invented_record(**switches)
    scope = scope_of(Book(record))
    assert rule_count(Book(record), scope) is None
    rule = rule_count(Book(with_review(record, rules="basel-mar32")), scope)
    assert (rule.name, rule.count, rule.zone, rule.note) == ("basel-mar32", None, "", note)


def test_a_rule_on_a_firm_that_was_not_judged_says_so():
    book = Book(with_review(invented_record(firm=False), firm="Group", rules="basel-mar32"))
    assert rule_count(book, scope_of(book)).note == "not applied, since it counts the firm-wide row Group alone"


def test_a_zone_without_multiplier_says_that_only_one_pnl_kind_was_there():
    record = invented_record()
    table = record.results.copy()
    rule = table["question"] == "by rule"
    table.loc[rule, "estimate"] = np.nan
    table.loc[rule, "note"] = "counts: hypothetical 9; count on hypothetical only; the rule takes the larger; more"
    found = rule_count(Book(replace(record, results=table)), scope_of(Book(record)))
    assert (found.multiplier, found.note) == (None, "count on hypothetical only; the rule takes the larger")
