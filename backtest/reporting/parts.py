"""The four cells {no filter, GARCH} x {empirical, GPD}: is it the filter or the tail? As sentences and as tables."""

from collections.abc import Callable

from backtest.reporting import wording as say
from backtest.reporting.book import Book, Row, given, text
from backtest.reporting.effects import NO_UNIT, TICK, mean_score, score_amount
from backtest.reporting.facts import Gain, Parts, Scope
from backtest.reporting.prose import prose
from backtest.reporting.tables import Table, exceptions_cell, p_cell, table

GAINS, LOSES = "evidence of a gain", "evidence of a loss"
"""Words of ``decision`` where there is evidence."""
_VERDICTS = (
    (GAINS, "gains beyond chance", "gain beyond chance"),
    (LOSES, "loses beyond chance", "lose beyond chance"),
    ("", "cannot be told from nothing", "cannot be told from nothing"),
)
_LABELS = {"garch": "GARCH", "gpd": "GPD"}
_CELLS = (
    "Level", "Filter", "Tail", "Model", "Exceptions (expected)", "Average VaR", "Width of VaR interval",
    "% of VaR", "Mean score",
)  # fmt: skip
_EFFECTS = ("Level", "Part", "Gain in mean score [95%]", "Share of the whole gain [95%]", "t", "p", "Decision")


def main_parts(book: Book, scope: Scope) -> Parts | None:
    """Draw what filter and tail gain at the level of counts, on the P&L kind of the first page; None where unknown."""
    found = _parts(book, scope.desk, scope.kind)
    return next((p for p in found if p.level == scope.count_level), None)


def parts_words(book: Book, desk: str, kind: str) -> tuple[str, ...]:
    """Say for every level of a desk whether it is the filter or the tail, and how wide the intervals are."""
    rows = _rows(book, desk, kind)
    lacking = [f"At {say.level(r['level'])}: {prose(text(r['note']))}." for r in rows if not text(r["part"])]
    return tuple(lacking) or tuple(
        f"{_answer(parts)} {_widths([r for r in rows if r['level'] == parts.level])}".strip()
        for parts in _parts(book, desk, kind)
    )


def parts_tables(book: Book, desk: str, kind: str) -> tuple[Table, ...]:
    """Return the cells of a desk and what they say of filter and tail, every level; none where nothing was known."""
    rows = _rows(book, desk, kind)
    cells, effects = ([r for r in rows if text(r["part"]) == part] for part in ("cell", "effect"))
    if not cells:
        return ()
    days = f"{say.plural(int(cells[0]['days']), 'shared day')}, {cells[0]['from']} to {cells[0]['to']}, {kind} P&L"
    remarks = dict.fromkeys(f"{r['name']} at {say.level(r['level'])}: {n}" for r in cells if (n := text(r["note"])))
    note = " ".join(f"{prose(remark)}." for remark in remarks)
    note = f"Score: {_score_words(cells, book)}, a mean, lower is better. {note}".strip()
    made = table(f"Four cells, {days}", _CELLS, [_cell(r, book) for r in cells], ("Level", *_CELLS[4:]), note)
    words = (
        "Gain: the mean score falls by so much. The filter's is averaged over both tails, the tail's over both filters;"
        " together they are the whole. Interval and t: Newey-West. Other P&L kinds: four_cells.csv."
    )
    shown = [_effect(r, book) for r in effects]
    return (made, table("What the filter and what the tail is worth", _EFFECTS, shown, ("Level", "t", "p"), words))


def _rows(book: Book, desk: str, kind: str) -> list[Row]:
    return [r for r in book.rows("four_cells", desk) if text(r["pnl_kind"]) == kind]


def _parts(book: Book, desk: str, kind: str) -> list[Parts]:
    rows = [r for r in _rows(book, desk, kind) if text(r["part"]) == "effect"]
    found = []
    for level in dict.fromkeys(float(r["level"]) for r in rows):
        own = {text(r["name"]): r for r in rows if r["level"] == level}
        some = own["filter"]
        found.append(
            Parts(
                level=level,
                days=int(some["days"]),
                score_name=text(some["score_name"]),
                currency=book.currency,
                filter=_gain(some),
                tail=_gain(own["tail"]),
                both=_gain(own["filter and tail"]),
                decided=given(some["p_value"]) is not None,
            )
        )
    return found


def _gain(row: Row) -> Gain:
    low, high, share, share_low, share_high = (
        given(row[c]) for c in ("low", "high", "share", "share_low", "share_high")
    )
    return Gain(float(row["gain"]), low, high, share, share_low, share_high, text(row["decision"]))


def _answer(parts: Parts) -> str:
    """Say what each part gains, and which of the two it is; without a decision why there is none."""
    head = f"At {say.level(parts.level)}, over {say.plural(parts.days, 'shared day')}, gain in the mean score"
    both = {"the filter": parts.filter, "the tail": parts.tail}
    sizes = "; ".join(f"{name} {gain_words(gain, parts)}" for name, gain in both.items())
    if not parts.decided:
        return f"{head}: {sizes}. {_upper(parts.filter.decision)}."
    found = []
    for decision, one, several in _VERDICTS:
        names = [n for n, g in both.items() if decision in ("", g.decision) and (decision or _is_open(g))]
        if names:
            found.append(f"{say.listed(names)} {one if len(names) == 1 else several}")
    return f"{head}: {sizes}. {_upper('; '.join(found))}."


def _is_open(gain: Gain) -> bool:
    return gain.decision not in (GAINS, LOSES)


def gain_words(gain: Gain, parts: Parts) -> str:
    """Return "0.27 (0.046 to 0.49) in FZ0": a gain with its interval and its unit."""

    def show(value: float) -> str:
        return score_amount(value, parts.score_name == TICK, parts.currency)

    limits = "" if gain.low is None or gain.high is None else f" ({show(gain.low)} to {show(gain.high)})"
    return f"{show(gain.gain)}{limits} in {parts.score_name}"


def _widths(rows: list[Row]) -> str:
    """Say how wide the interval of a GPD's VaR is beside that of an empirical one."""
    ratios = [
        (text(r["name"]).rpartition(", ")[2], given(r["interval_ratio"])) for r in rows if r["part"] == "interval"
    ]
    known = [f"{say.multiple(ratio)} times ({which})" for which, ratio in ratios if ratio is not None]
    return f"The interval of GPD's VaR is {say.listed(known)} as wide as that of the empirical one." if known else ""


def _score_words(rows: list[Row], book: Book) -> str:
    names = dict.fromkeys(text(r["score_name"]) for r in rows)
    return say.listed([f"{name} ({f'in {book.currency}' if name == TICK else NO_UNIT})" for name in names])


def _cell(row: Row, book: Book) -> tuple[str, ...]:
    var, width, percent = (given(row[c]) for c in ("average_var", "interval_width", "interval_percent"))
    return (
        say.level(row["level"]),
        *(_LABELS.get(text(row[c]), text(row[c])) for c in ("filter", "tail")),
        text(row["name"]),
        exceptions_cell(row),
        *(say.DASH if v is None else say.money(v, book.currency) for v in (var, width)),
        say.DASH if percent is None else f"{percent:.0f}%",
        mean_score(float(row["score"]), text(row["score_name"]) == TICK, book.currency),
    )


def _effect(row: Row, book: Book) -> tuple[str, ...]:
    tick, statistic = text(row["score_name"]) == TICK, given(row["statistic"])
    return (
        say.level(row["level"]),
        text(row["name"]),
        _with_ends(row, ("gain", "low", "high"), lambda value: score_amount(value, tick, book.currency)),
        _with_ends(row, ("share", "share_low", "share_high"), lambda value: f"{say.points(value)}%"),
        say.DASH if statistic is None else say.number(statistic, 3),
        p_cell(row, book),
        prose(text(row["decision"])),
    )


def _with_ends(row: Row, columns: tuple[str, str, str], show: Callable[[float], str]) -> str:
    value, low, high = (given(row[c]) for c in columns)
    if value is None:
        return say.DASH
    return show(value) + ("" if low is None or high is None else f" [{show(low)} to {show(high)}]")


def _upper(words: str) -> str:
    return words[:1].upper() + words[1:]
