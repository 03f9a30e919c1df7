"""The page as one HTML text that needs no network, no script and no other file."""

import re

from jinja2 import Environment, PackageLoader, StrictUndefined
from markupsafe import Markup

from backtest.records import Record
from backtest.reporting.view import Summary, summary_view


def summary_html(record: Record) -> str:
    """Return summary.html of a record: everything inside it, every name escaped."""
    return render(summary_view(record))


def render(summary: Summary) -> str:
    """Return the page of a view. Only the figures, which are drawn here from numbers, are taken as markup."""
    loader = PackageLoader("backtest.reporting")
    room = Environment(loader=loader, autoescape=True, undefined=StrictUndefined, trim_blocks=True, lstrip_blocks=True)
    room.filters |= {"drawing": Markup, "unbroken": unbroken}
    return room.get_template("summary.html").render(page=summary)


_AMOUNT = re.compile(r"\b([A-Z]{3}) (−?\d[\d.,]*)(?: (bn|m|k)\b)?")
_POWER = re.compile(r"\d+ in 100\b")


def unbroken(text: str) -> str:
    """Return text whose amounts do not break between currency, figures and scale, nor powers inside."""
    text = _AMOUNT.sub(lambda m: "\N{NO-BREAK SPACE}".join(filter(None, m.groups())), text)
    return _POWER.sub(lambda m: m.group().replace(" ", "\N{NO-BREAK SPACE}"), text)
