"""Write the demo data of the invented Larkmoor Bank: `python data_demo/make.py [FOLDER]` (default: this folder).

Everything here is invented: no bank, desk, holiday or number is real. The story is designed, not found: world.py holds
the truth, ledger.py the P&L, bank.py the reported model. The sizes of the effects were set by hand, looking at many
seeds; then SEED was set to the first of 1, 2, 3 ... for which every point of story.py holds (four of the first 200 do;
`python data_demo/story.py 200` prints how often each point does). No claim about models rests on this seed.
The same seed writes the same bytes (Parquet: under the same versions of pyarrow and pandas).
"""

import sys
from dataclasses import dataclass
from pathlib import Path

import law
import numpy as np
import pandas as pd
from bank import MEASURES, MODEL_CHANGE, report
from ledger import FIRM, NAMES, RESTATED_DESK, Ledger, Restatement, book, restatements
from world import DESKS, LEGACY_CLOSED, METALS_HALVED, OPENING, World, simulate

SEED = 97
YEAR = 250
KINDS = ("hypothetical", "actual", "risk_theoretical")
VECTOR_DESKS, SCENARIOS = ("Rates", "Metals"), 500
"""Desks with P&L vectors: one of constant positions, and the one whose positions were halved."""


@dataclass(frozen=True)
class Demo:
    """One demo: the world, its ledger, the restated days, and the reported forecasts (cents)."""

    world: World
    ledger: Ledger
    restated: tuple[Restatement, ...]
    reported: np.ndarray


def make(seed: int) -> Demo:
    """Return the demo of one seed."""
    world = simulate(seed)
    ledger = book(world, seed)
    last = slice(world.days.size - YEAR, world.days.size)
    before = report(ledger, (), seed)
    restated = restatements(ledger, before[:, 0, MEASURES.index("var_99_1d")], last)
    return Demo(world, ledger, restated, report(ledger, restated, seed))


def published(demo: Demo) -> np.ndarray:
    """Say which days x NAMES the bank reports on: from the opening and, for a desk, from its first day."""
    listed = np.column_stack([np.ones(demo.world.days.size, dtype=bool), demo.world.listed[:, :-1]])
    return listed & (demo.world.days >= OPENING)[:, None]


def pnl_table(demo: Demo) -> pd.DataFrame:
    """Return date, desk, the three kinds of P&L in EUR, known_on (empty unless restated)."""
    rows, columns = np.nonzero(published(demo) & demo.ledger.has_row)
    table = pd.DataFrame({"row": rows, "desk": np.array(NAMES)[columns]})
    for kind in KINDS:
        table[kind] = demo.ledger.kinds[kind][rows, columns]
    table["known_on"] = np.datetime64("NaT", "D")
    for late in demo.restated:
        table = _restate(table, late, demo.world.days[late.known])
    table = table.sort_values(["row", "desk", "known_on"], key=_in_order, na_position="first", kind="stable")
    table.insert(0, "date", demo.world.days[table["row"]])
    table[list(KINDS)] = table[list(KINDS)] / 100
    return table.drop(columns="row").reset_index(drop=True)


def _restate(table: pd.DataFrame, late: Restatement, known_on: np.datetime64) -> pd.DataFrame:
    hit = (table["row"] == late.day) & table["desk"].isin([FIRM, RESTATED_DESK])
    first = table[hit].copy()
    first[["hypothetical", "actual"]] -= late.amount
    table = table.copy()
    table.loc[hit, "known_on"] = known_on
    return pd.concat([first, table], ignore_index=True)


def _in_order(column: pd.Series) -> pd.Series:
    return column.map(NAMES.index) if column.name == "desk" else column


def reported_table(demo: Demo) -> pd.DataFrame:
    """Return date, desk and the measures of HS-250 in EUR: the wide extract; also where P&L is missing."""
    rows, columns = np.nonzero(published(demo))
    table = pd.DataFrame({"date": demo.world.days[rows], "desk": np.array(NAMES)[columns]})
    table[list(MEASURES)] = demo.reported[rows, columns] / 100
    return table


def truth_table(demo: Demo) -> pd.DataFrame:
    """Return the conditional law's numbers for every published day, rounded to cents."""
    world, tables = demo.world, []
    for j, name in enumerate(NAMES):
        part = world.listed if name == FIRM else np.arange(len(DESKS) + 1) == j - 1
        columns = law.truth(world.scale * part, world.reach * part)
        table = pd.DataFrame({"date": world.days.astype("datetime64[us]"), "desk": name} | columns)
        tables.append(table[published(demo)[:, j]])
    table = pd.concat(tables, ignore_index=True)
    numbers = table.columns.drop(["date", "desk"])
    return table.assign(**{name: table[name].round(2) for name in numbers})


def desks_table(demo: Demo) -> pd.DataFrame:
    """Return the hierarchy: the firm and its seven desks."""
    first = demo.world.days[np.argmax(published(demo), axis=0)]
    return pd.DataFrame(
        {
            "desk": NAMES,
            "parent": ["", *[FIRM] * len(DESKS)],
            "valid_from": first,
            "valid_to": "",
            "scope": "internal model",
            "currency": "EUR",
            "kind": ["firm", *["desk"] * len(DESKS)],
        }
    )


def changes_table(demo: Demo) -> pd.DataFrame:
    """Return what the bank itself recorded: a dated change a row."""
    new = demo.world.days[np.argmax(published(demo)[:, NAMES.index("Structured")])]
    model = "HS-250: window 250 instead of 500 days"
    changes = [(MODEL_CHANGE, name, "model", model) for name in NAMES if name != "Structured"]
    changes.append((LEGACY_CLOSED, FIRM, "scope", "legacy books closed: from here on the desks add up to the firm"))
    changes.append((new, "Structured", "scope", "new desk"))
    changes.append((METALS_HALVED, "Metals", "positions", "desk restructured: positions halved"))
    for late in demo.restated:
        note = f"P&L restated on {demo.world.days[late.known]}: booked late"
        changes += [(demo.world.days[late.day], name, "data", note) for name in (FIRM, RESTATED_DESK)]
    return pd.DataFrame(changes, columns=["date", "desk", "kind", "note"]).sort_values("date", kind="stable")


def vectors_table(demo: Demo) -> pd.DataFrame:
    """Return date, desk, scenario, pnl: for the last year, the desk's positions of the day under the moves before it.

    A day's P&L is its position times the market's move; the same move under another day's position is that P&L times
    the ratio of positions (the books are linear in the moves). A restated day stands with its final value: what was
    booked late was the P&L, not the move.
    """
    tables = []
    last = demo.world.days.size
    for name in VECTOR_DESKS:
        j = NAMES.index(name)
        position = demo.ledger.scale[:, j]
        for day in range(last - YEAR, last):
            past = slice(day - SCENARIOS, day)
            pnl = demo.ledger.kinds["hypothetical"][past, j] * (position[day] / position[past])
            days = {"date": demo.world.days[day], "desk": name, "scenario": demo.world.days[past]}
            tables.append(pd.DataFrame({**days, "pnl": np.round(pnl) / 100}))
    return pd.concat(tables, ignore_index=True)


def write(demo: Demo, folder: Path) -> None:
    """Write every file but the study, which is kept by hand."""
    days = demo.world.days
    tables = {
        "pnl.csv": pnl_table(demo),
        "reported.csv": reported_table(demo),
        "desks.csv": desks_table(demo),
        "changes.csv": changes_table(demo),
        "calendar.csv": pd.DataFrame({"date": days[days >= OPENING]}),
    }
    for name, table in tables.items():
        table.to_csv(folder / name, index=False, float_format="%.2f", lineterminator="\n", encoding="utf-8")
    truth_table(demo).to_parquet(folder / "truth.parquet", index=False, compression="zstd")
    vectors_table(demo).to_parquet(folder / "vectors.parquet", index=False, compression="zstd")


if __name__ == "__main__":
    target = Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).parent
    write(make(SEED), target)
