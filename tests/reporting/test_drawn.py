import numpy as np

from backtest.reporting.book import Book
from backtest.reporting.drawn import main_bridge, often, person, scope_of, size, when
from tests.reference.invented_record import DATES, FIRM, invented_record


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
