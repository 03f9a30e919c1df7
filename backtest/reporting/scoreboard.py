"""The scoreboard of a desk: what stands beside every score, for all models on the days they share."""

from backtest.reporting import wording as say
from backtest.reporting.book import Book, Row, given, text
from backtest.reporting.effects import mean_score
from backtest.reporting.prose import prose
from backtest.reporting.tables import Table, exceptions_cell, table

_HEADER = (
    "Level", "Model", "Exceptions (expected)", "Longest run", "Average VaR", "Day-to-day change", "Peak / trough",
    "Tick", "FZ0", "Half-homogeneous",
)  # fmt: skip


def scoreboard_table(book: Book, desk: str, kind: str) -> Table | None:
    """Return the models of a desk side by side, level by level, the main model first; None where nothing is known."""
    rows = [r for r in book.rows("scoreboard", desk) if text(r["pnl_kind"]) == kind and given(r["days"])]
    if not rows:
        return None
    places = [book.main_model, *book.models]
    rows.sort(key=lambda r: (r["level"], places.index(r["model"]) if r["model"] in places else len(places)))
    days = f"{say.plural(int(rows[0]['days']), 'shared day')}, {rows[0]['from']} to {rows[0]['to']}"
    note = (
        f"Longest run: exceptions on consecutive shared days. Scores are means, lower is better: tick in "
        f"{book.currency}, half-homogeneous in its root; of FZ0 only differences mean something, since the unit of the "
        "P&L shifts it."
    )
    cells = [_cells(r, book) for r in rows]
    return table(f"Scoreboard, {days}, {kind} P&L", _HEADER, cells, ("Level", *_HEADER[2:]), f"{note}{_remarks(rows)}")


def _cells(row: Row, book: Book) -> tuple[str, ...]:
    var, change, swing = (given(row[c]) for c in ("average_var", "average_change", "peak_to_trough"))
    tick, fz0, root = (given(row[c]) for c in ("tick", "fz0", "half_homogeneous"))
    run = given(row["longest_run"])
    return (
        say.level(row["level"]),
        str(row["model"]),
        exceptions_cell(row),
        say.DASH if run is None else say.whole(run),
        *(say.DASH if v is None else say.money(v, book.currency) for v in (var, change)),
        say.DASH if swing is None else say.multiple(swing),
        say.DASH if tick is None else say.money(tick, book.currency),
        say.DASH if fz0 is None else mean_score(fz0, False, book.currency),
        say.DASH if root is None else say.number(root),
    )


def _remarks(rows: list[Row]) -> str:
    found: dict[str, list[str]] = {}
    for row in rows:
        if text(row["note"]):
            found.setdefault(prose(text(row["note"])), []).append(f"{row['model']} at {say.level(row['level'])}")
    return "".join(f" {say.listed(of)}: {note}." for note, of in found.items())
