"""Estimation risk of a desk: what each test says once the law lets the model be estimated anew every day."""

from backtest.reporting import wording as say
from backtest.reporting.book import Book, Row, given, text
from backtest.reporting.effects import test_name
from backtest.reporting.prose import prose
from backtest.reporting.tables import Table, table

_HEADER = (
    "Level", "Model", "Days", "Test", "p, usual law", "p, refitted law", "Replicates", "Exceptions, refitted law",
    "Exceptions, binomial", "Seconds",
)  # fmt: skip


def refitted_table(book: Book, desk: str, kind: str) -> Table | None:
    """Return the refitted laws of a desk's models on one P&L kind; None where the study did not ask for them."""
    rows = [r for r in book.rows("estimation_risk", desk) if text(r["pnl_kind"]) == kind]
    if not rows:
        return None
    defined = [r for r in rows if text(r["law"])]
    undefined: dict[str, list[str]] = {}
    for row in rows:
        if not text(row["law"]):
            undefined.setdefault(prose(text(row["note"])), []).append(str(row["model"]))
    notes = ["The model, with the parameters of its last day, generates whole histories that are forecast and judged."]
    notes += [f"{say.listed(sorted(set(names)))}: {note}." for note, names in undefined.items()]
    cells = [_cells(row, book) for row in defined]
    return table(f"Estimation risk, {kind} P&L", _HEADER, cells, ("Level", "Days", *_HEADER[4:]), " ".join(notes))


def _cells(row: Row, book: Book) -> tuple[str, ...]:
    usual, refitted, seconds = (given(row[c]) for c in ("p_value", "p_refitted", "seconds"))

    def spread(law: str) -> str:
        mean, deviation = given(row[f"{law}_mean"]), given(row[f"{law}_sd"])
        if mean is None or deviation is None:
            return say.DASH
        return f"{say.number(mean, 3)}, s.d. {say.number(deviation, 2)}"

    return (
        say.level(row["level"]), str(row["model"]), say.whole(row["days"]), test_name(text(row["test"])),
        *(say.DASH if p is None else say.p_cell(p, book.significance) for p in (usual, refitted)),
        say.whole(row["replications"]), spread("count"), spread("binomial"),
        say.DASH if seconds is None else say.number(seconds, 2),
    )  # fmt: skip
