import re
from collections import Counter
from dataclasses import replace
from html.parser import HTMLParser

import pandas as pd
import pytest

from backtest.recording.run_folder import read_record, write_record
from backtest.reporting.html import summary_html, unbroken
from backtest.reporting.logs import EXCEPTIONS_SHOWN
from backtest.reporting.sentences import QUESTIONS, six_sentences
from backtest.reporting.view import summary_view
from tests.reference.invented_record import FIRM, SUBJECT, invented_record, renamed

HOSTILE = {
    FIRM: "<script>alert('firm')</script>",
    "NA": "=cmd()\u202e\u2067\u05d0 & \"q\" 'a' " + "n" * 200,
    SUBJECT: '"><img src=http://evil.example/x onerror=alert(1)>',
    "Invented review": "</style></title><b>{{ 7 * 7 }}",
    "conditional-evt": "$\\frac{1}{2}$ <!-- --> url(http://evil.example)",
    "the same P&L on 9 days": "<a href='javascript:alert(1)'>",
    "0a1b2c3d4e5f": '"; } body { display: none } </style>',
}
VOID = {"meta", "br", "img", "hr", "link", "input"}


class Page(HTMLParser):
    """What a page holds: attributes, texts, ids; and whether every element that was opened is closed in order."""

    def __init__(self, text):
        super().__init__()
        self.open, self.tags, self.attributes, self.texts, self.misplaced = [], Counter(), [], [], []
        self.feed(text)
        self.close()

    def handle_starttag(self, tag, attrs):
        self.tags[tag] += 1
        self.attributes += attrs
        if tag not in VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag, attrs):
        self.tags[tag] += 1
        self.attributes += attrs

    def handle_endtag(self, tag):
        if not self.open or self.open.pop() != tag:
            self.misplaced.append(tag)

    def handle_data(self, data):
        if self.open and self.open[-1] != "style":
            self.texts.append(data)

    def values(self, *names):
        return [v for n, v in self.attributes if n in names]


@pytest.fixture(scope="module")
def record():
    return invented_record()


@pytest.fixture(scope="module")
def view(record):
    return summary_view(record)


@pytest.fixture(scope="module")
def html(record):
    return summary_html(record)


@pytest.fixture(scope="module")
def page(html):
    return Page(html)


@pytest.fixture(scope="module")
def hostile_html():
    return summary_html(renamed(invented_record(), HOSTILE))


def test_every_element_is_closed_in_its_place(page):
    assert (page.open, page.misplaced) == ([], [])


def test_no_id_stands_twice_and_every_link_inside_leads_somewhere(page):
    ids = page.values("id")
    assert [i for i, n in Counter(ids).items() if n > 1] == []
    assert {v.removeprefix("#") for v in page.values("href", "xlink:href")} <= set(ids)
    inside = [m for _, v in page.attributes for m in re.findall(r"url\(#?([^)]*)\)", v or "")]
    assert inside
    assert set(inside) <= set(ids)


@pytest.mark.parametrize("kind", ["plain", "hostile"])
def test_nothing_is_fetched_and_nothing_runs(kind, html, hostile_html):
    text = html if kind == "plain" else hostile_html
    page = Page(text)
    assert not {"script", "link", "img", "iframe", "object", "embed", "base", "form"} & set(page.tags)
    assert all(v.startswith("#") for v in page.values("href", "xlink:href", "src", "action"))
    assert not [n for n, _ in page.attributes if n.startswith("on")]
    assert not [v for n, v in page.attributes if n == "style" and "url(" in v and "url(#" not in v]
    style = re.findall(r"<style>(.*?)</style>", text, re.DOTALL)
    assert len(style) == 1
    assert not re.search(r"url\(|@import|http", style[0])


def test_hostile_names_come_out_as_text(hostile_html):
    page = Page(hostile_html)
    assert (page.open, page.misplaced) == ([], [])
    shown = "".join(page.texts)
    for name in HOSTILE.values():
        assert name in shown
    assert "49" not in re.findall(r"<title>(.*?)</title>", hostile_html)[0]


def test_a_hostile_run_name_cannot_leave_the_text_of_its_style(hostile_html):
    style = re.findall(r"<style>(.*?)</style>", hostile_html, re.DOTALL)[0]
    rule = next(line for line in style.splitlines() if "@top-left" in line)
    assert rule.count('"') == 2


def test_the_first_page_holds_what_it_must(record, page):
    shown = "".join(page.texts)
    first = shown[: shown.index("The reported model\n")]
    wanted = [
        "Invented review",
        SUBJECT,
        "2025-12-26",
        "250 days",
        "0a1b2c3d4e5f",
        "Draft: no opinion given",
        *QUESTIONS,
    ]
    for text in wanted:
        assert text in first
    assert "Challengers learn from past P&L (or vectors); the reported VaR from current positions." in first
    assert "neither an approval nor advice" in first


def test_the_page_says_the_same_six_sentences_as_the_terminal(record, page):
    shown = " ".join("".join(page.texts).replace("\N{NO-BREAK SPACE}", " ").split())
    for line in six_sentences(record):
        assert " ".join(line.split()) in shown


def test_every_number_of_the_index_is_one_of_the_record(record, view):
    index = view.index
    assert index.header[2:4] == ("Exceptions 97.5% (expected)", "Exceptions 99% (expected)")
    for row in index.rows:
        own = record.results.query("desk == @row[0] and model == @SUBJECT and pnl_kind == 'hypothetical'")
        for cell, level in zip(row[2:4], (0.975, 0.99), strict=True):
            kept = own.query("test == 'binomial' and level == @level").iloc[0]
            assert cell == f"{kept['exceptions']:.0f} ({kept['days'] * (1 - level):.1f})"
            assert row[1].split(" of ")[0] == str(kept["days"])
        multiple = own.query("test == 'sufficient-var-multiple' and level == 0.975").iloc[0]
        assert row[4].startswith(f"{multiple['estimate']:.2f} times [{multiple['low']:.2f}")


def test_every_number_of_the_bridge_is_one_of_the_record(record, view):
    bridge = view.bridge
    kept = record.bridge.query("desk == 'Firm' and level == 0.99")
    assert [r[:4] for r in bridge.rows] == [
        (s, m, f"{w:,.0f}", f"{e:.0f}")
        for s, m, w, e in kept[["step", "model", "window", "exceptions"]].itertuples(index=False)
    ]
    assert [r[4] for r in bridge.rows] == [f"EUR {v / 1e6:.2f} m" for v in kept["average_var"]]
    assert bridge.rows[1][6] == "−0.08 [−0.13 to −0.03]"


def test_every_result_of_the_subject_is_on_the_page(record, view):
    for desk in view.desks:
        kept = record.results.query("desk == @desk.name and model == @SUBJECT")
        spans = kept.drop_duplicates(["pnl_kind", "level", "test", "from", "to", "days"])
        assert sum(len(t.rows) for t in desk.results) == len(spans)


def test_a_test_that_was_not_done_says_so_and_shows_no_number(record, view):
    made = record.results["phrase"].str.startswith("not tested")
    assert made.any()
    rows = [r for d in view.desks for t in d.results for r in t.rows if r[-1].startswith("not tested")]
    quiet = summary_view(invented_record(exceptions=False))
    rows += [r for d in quiet.desks for t in d.results for r in t.rows if r[-1].startswith("not tested")]
    assert rows
    assert {r[5:9] for r in rows} == {("–", "–", "–", "–")}


def test_a_zone_is_coloured_only_beside_its_word_and_only_for_the_firm(record, html):
    assert re.findall(r'class="zone zone-(\w+)">([^<]*)<', html) == [("red", "count 14: red, multiplier 2.00")]
    assert 'class="zone ' not in summary_html(invented_record(firm=False))
    assert 'class="zone ' not in summary_html(invented_record(subject=False))


def test_without_a_subject_only_challengers_are_shown():
    view = summary_view(invented_record(subject=False))
    assert view.facts[0].text == "none supplied: challengers only"
    assert all(not d.results and d.exceptions is None for d in view.desks)
    assert [len(d.challengers) for d in view.desks] == [2, 2, 0]


def test_a_long_log_is_cut_and_says_so(record, view):
    firm = next(d for d in view.desks if d.name == FIRM)
    assert "all 23" in firm.exceptions.caption
    log = pd.concat([record.exceptions] * 3, ignore_index=True)
    firm = next(d for d in summary_view(replace(record, exceptions=log)).desks if d.name == FIRM)
    assert f"the latest {EXCEPTIONS_SHOWN} of 69; all are in exceptions.csv" in firm.exceptions.caption
    assert len(firm.exceptions.rows) == EXCEPTIONS_SHOWN


def test_an_unknown_column_of_the_log_is_shown_as_it_is(record):
    log = record.exceptions.assign(**{"who_looks": "desk head"})
    firm = next(d for d in summary_view(replace(record, exceptions=log)).desks if d.name == FIRM)
    assert firm.exceptions.header[-1] == "who looks"
    assert {r[-1] for r in firm.exceptions.rows} == {"desk head"}


def test_remarks_sources_settings_models_and_tests_are_listed(record, view):
    assert [r[0] for r in view.remarks.rows] == list(record.remarks["rule"])
    assert view.sources.rows == (("pnl", "pnl.csv", "1,331", "ab" * 32),)
    assert ("review.days", "250, all") in view.settings.rows
    assert ("review.subject", SUBJECT) in view.settings.rows
    assert ("numpy", "2.4.0") in view.versions.rows
    assert [m.label for m in view.models] == ["historical", "conditional-evt"]
    assert view.models[0].text == "none x empirical. invented (2000)"
    assert {t.label for t in view.tests} >= {"Exact binomial", "McNeil and Frey, ES residuals", "Zone by rule"}


def test_a_record_read_back_gives_the_same_page(record, html, tmp_path):
    assert summary_html(read_record(write_record(record, tmp_path / "run"))) == html


def test_a_record_without_results_still_gives_a_page(record):
    bare = replace(record, results=record.results.iloc[:0], bridge=record.bridge.iloc[:0])
    text = summary_html(replace(bare, exceptions=record.exceptions.iloc[:0], remarks=record.remarks.iloc[:0]))
    assert "Not tested: the record holds no day with both a forecast and a P&amp;L." in text
    assert "Nothing was tested." in text


def test_the_page_stays_small(html):
    assert len(html.encode()) < 400_000


def test_amounts_do_not_break_over_lines():
    assert unbroken("at EUR −3.21 m; EUR 450 k. m") == "at EUR\xa0−3.21\xa0m; EUR\xa0450\xa0k. m"
    assert unbroken("(power 49 in 100)") == "(power 49\xa0in\xa0100)"


def test_notes_are_said_once_and_name_the_levels_they_belong_to(view):
    firm = next(d for d in view.desks if d.name == FIRM)
    assert firm.results[0].note == (
        "Exact binomial: one-sided p in the record. McNeil and Frey, ES residuals: GPD shape 0.1 assumed."
    )
    assert firm.results[2].note == "The notes on these results stand in results.csv."


def test_a_note_of_one_level_names_it(record):
    table = record.results.copy()
    table.loc[(table["test"] == "binomial") & (table["level"] == 0.99), "note"] = (
        "one-sided p in the record; seen at 99"
    )
    firm = next(d for d in summary_view(replace(record, results=table)).desks if d.name == FIRM)
    assert firm.results[0].note.startswith("Exact binomial: one-sided p in the record; at 99%: seen at 99. McNeil")


def test_a_remark_on_every_step_of_the_bridge_is_said_once(record, view):
    assert view.bridge.header[-1] == "Score change [95%]"
    noted = replace(record, bridge=record.bridge.assign(note="not FZ0: no ES"))
    assert summary_view(noted).bridge.note.endswith("below 0 is better. not FZ0: no ES")
    some = record.bridge.assign(note=["first"] + [""] * (len(record.bridge) - 1))
    some.loc[some["step"] == "reported", "note"] = "other method before 2020"
    assert [r[-1] for r in summary_view(replace(record, bridge=some)).bridge.rows] == [
        "other method before 2020",
        "",
        "",
    ]


def test_the_index_answers_with_every_level_that_rejects(record, view):
    assert {r[-1] for r in view.index.rows} == {"evidence that VaR is too low (97.5% and 99%)"}
    table = record.results.copy()
    deep = (table["test"] == "binomial") & (table["level"] == 0.99)
    table.loc[deep, ["decision", "phrase"]] = ["not rejected", "no evidence"]
    high = (table["test"] == "binomial") & (table["level"] == 0.975)
    table.loc[high, ["decision", "phrase"]] = ["rejected", "evidence that VaR is too high"]
    rows = summary_view(replace(record, results=table)).index.rows
    assert {r[-1] for r in rows} == {"evidence that VaR is too high (97.5%)"}
    table.loc[high, ["decision", "phrase"]] = ["not rejected", "unlike the level of counts"]
    assert {r[-1] for r in summary_view(replace(record, results=table)).index.rows} == {"no evidence"}
