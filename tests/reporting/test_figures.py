import re
from xml.etree import ElementTree

import numpy as np
import pytest

from backtest.reporting.book import Book
from backtest.reporting.figures import DAYS_SHOWN, caption, draw, losses_against_var
from tests.reference.invented_record import DATES, FIRM, SUBJECT, invented_record, renamed


@pytest.fixture(scope="module")
def book():
    return Book(invented_record())


def test_losses_and_var_stand_on_the_same_latest_days(book):
    figure = losses_against_var(book, FIRM, 0.99)
    np.testing.assert_array_equal(figure.dates, DATES[-500:])
    pnl = book.pnl(FIRM).set_index("date")["hypothetical"]
    np.testing.assert_array_equal(figure.losses["hypothetical"], -pnl.loc[figure.dates].to_numpy())
    assert list(figure.var) == [SUBJECT, "conditional-evt"]
    assert (figure.cut, len(figure.dates)) == (False, DAYS_SHOWN)


def test_marked_exceptions_are_those_of_the_log(book):
    figure = losses_against_var(book, FIRM, 0.99)
    log = book.record.exceptions.query("desk == 'Firm'")
    for kind, hits in figure.exceptions.items():
        wanted = log.loc[log[f"exception_{kind}_0.99"], "date"].to_numpy()
        np.testing.assert_array_equal(figure.dates[hits], wanted[wanted >= figure.dates[0]])


def test_a_desk_without_challengers_shows_the_reported_model_alone(book):
    figure = losses_against_var(book, "New desk", 0.99)
    assert (list(figure.var), len(figure.dates)) == ([SUBJECT], 131)


def test_a_desk_nobody_forecast_has_no_figure(book):
    assert losses_against_var(book, "no such desk", 0.99) is None


def test_the_caption_counts_what_is_marked(book):
    figure = losses_against_var(book, FIRM, 0.99)
    hits = {k: int(v.sum()) for k, v in figure.exceptions.items()}
    assert caption(figure, FIRM) == (
        "Firm: daily losses on hypothetical P&L (bars) against one-day 99% VaR; 500 business days, 2024-01-29 to "
        "2025-12-26. Black line HS-250, dashed line conditional-evt; filled dots losses beyond HS-250 on "
        "hypothetical P&L "
        f"({hits['hypothetical']}); open rings losses beyond HS-250 on actual P&L ({hits['actual']}). Days "
        "with a profit "
        "have no bar."
    )


def test_the_drawing_is_small_well_formed_and_needs_nothing_from_outside(book):
    text = draw(losses_against_var(book, FIRM, 0.99), "desk-1")
    root = ElementTree.fromstring(text)
    assert root.tag == "{http://www.w3.org/2000/svg}svg"
    assert len(text) < 100_000
    assert not re.search(r"<(script|style|image|metadata)|(href|src)=\"(?!#)|\son\w+=", text)
    words = [t.text for t in root.iter("{http://www.w3.org/2000/svg}text")]
    assert {"loss, EUR m", "business date (year-month)", "judged", "challenger"} <= set(words)


def test_the_same_data_give_the_same_drawing_and_another_salt_other_ids(book):
    figure = losses_against_var(book, FIRM, 0.99)
    assert draw(figure, "desk-1") == draw(figure, "desk-1")
    ids = [set(re.findall(r'id="(m\w{10})"', draw(figure, salt))) for salt in ("desk-1", "desk-2")]
    assert ids[0]
    assert not ids[0] & ids[1]


def test_a_currency_with_mark_up_is_drawn_as_text():
    hostile = renamed(invented_record(), {"EUR": "<b>$x^2$"})
    text = draw(losses_against_var(Book(hostile), FIRM, 0.99), "desk-1")
    assert "loss, &lt;b&gt;$x^2$ m" in text
