"""Tables of the page that list what was seen: the exceptions log and the data remarks."""

import pandas as pd

from backtest.records import PNL_KINDS
from backtest.reporting import wording as say
from backtest.reporting.book import given
from backtest.reporting.tables import Table, table

EXCEPTIONS_SHOWN = 40


def exceptions_table(log: pd.DataFrame, desk: str, model: str) -> Table | None:
    """Return the latest rows of a desk's exceptions log; None where there are none.

    A flag ``exception_...`` with its ratio becomes one column; what is left over, whatever its name, a column each.
    """
    own = log[log["desk"] == desk] if "desk" in log else log.iloc[:0]
    if own.empty:
        return None
    shown = own.sort_values("date", ascending=False).head(EXCEPTIONS_SHOWN)
    names = [
        str(c)
        for c in shown.columns
        if c not in ("desk", "model") and not str(c).startswith(("excess_", "ratio_", "es_"))
    ]
    columns = {_column_words(n): _log_cells(shown, n) for n in names}
    part = (
        f"the latest {len(shown)} of {len(own)}; all are in exceptions.csv"
        if len(own) > len(shown)
        else f"all {len(own)}"
    )
    figures = [_column_words(n) for n in names if n == "date" or pd.api.types.is_numeric_dtype(own[n].dtype)]
    return table(f"Exceptions of {say.name(model)}, {part}", columns, zip(*columns.values(), strict=True), figures)


def _column_words(name: str) -> str:
    prefix, _, rest = name.partition("_")
    if prefix == "var" and rest.startswith("0."):
        return f"VaR {say.level(float(rest))}"
    if prefix == "exception" and "_0." in rest:
        kind, confidence = rest.rsplit("_", 1)
        return f"loss / VaR {say.level(float(confidence))}, {kind}"
    return f"{name} P&L" if name in PNL_KINDS else name.replace("_", " ")


def _log_cells(shown: pd.DataFrame, name: str) -> list[str]:
    ratio = name.replace("exception_", "ratio_", 1)
    if not name.startswith("exception_") or ratio not in shown:
        return [say.cell(v) for v in shown[name]]
    pairs = zip(shown[name], shown[ratio], strict=True)
    return [say.DASH if not hit else "yes" if given(r) is None else say.multiple(float(r)) for hit, r in pairs]


def remarks_table(remarks: pd.DataFrame, caption: str) -> Table | None:
    """Return data remarks as a table; None where there are none."""
    if remarks.empty:
        return None
    header = ("Rule", "Source", "Desk", "First", "Last", "Count", "What was seen")
    columns = ["rule", "source", "desk", "first", "last", "count", "text"]
    rows = [[say.cell(v) for v in row] for row in remarks[columns].itertuples(index=False)]
    return table(caption, header, rows, ["First", "Last", "Count"])
