"""Write ``power.csv``, what each test of one model's forecasts could have seen.

``python -m backtest.judging.write_power``: all tests; with keys after it, those alone; with ``--missing``, those that
have no rows. Each key's rows are replaced as soon as they are computed, so that an interrupted run loses one key at
most. Run it after a change of a statistic, of its law, or of ``alternatives.py``.

Seed 20260101 for paths and laws; 400 reviews a cell (FEWER names the tests with fewer), 999 simulations for each p at
significance 5%: the error of a power is at most 2.5 percentage points (one standard deviation at 400 reviews), and
every cell of one level and length shares the law's own error. Tests in ONE_LAW simulate whole days or refit a
regression in every replicate; their statistic is held against its law in as many reviews of right forecasts instead.
All tests: about 20 minutes of one core (estimated from 0.1 to 6 ms a review; not timed in one piece).
"""

import csv
import sys
import time

from backtest.judging.alternatives import ALTERNATIVES
from backtest.judging.answers import SampleTest, Settings
from backtest.judging.battery import TESTS, resolve
from backtest.judging.power_table import COLUMNS, FILE, LENGTHS, LEVELS, SIGNIFICANCE, Cell, Seen, power_table
from backtest.judging.simulated_power import beyond_right, rejections

SETTINGS = Settings(SIGNIFICANCE, simulations=999, seed=20260101)
REVIEWS = 400
FEWER = {
    "duration-weibull": 200,
    "spectral-probit": 200,
    "bayer-dimitriadis-intercept": 200,
    "bayer-dimitriadis-auxiliary": 100,
    "e-process": 100,
}
"""Reviews of tests that take long."""
ONE_LAW = ("bayer-dimitriadis-intercept", "bayer-dimitriadis-auxiliary")
"""Tests that would take hours with a law for every review; large statistics are extreme."""


def rows_of(test: SampleTest) -> dict[Cell, Seen]:
    """Simulate every cell of a test; lengths and alternatives of one level share paths and laws."""
    count = beyond_right if test.key in ONE_LAW else rejections
    options = {"reviews": FEWER.get(test.key, REVIEWS), "days": LENGTHS[-1]}
    return {
        (test.key, level, length, key): count(test, key, level, length, SETTINGS, **options)
        for level in LEVELS
        for length in LENGTHS
        for key in ALTERNATIVES
    }


def write(table: dict[Cell, Seen]) -> None:
    """Write the table in the order of the battery; rows of tests that are no more are left out."""
    order = list(TESTS)
    cells = sorted((c for c in table if c[0] in TESTS), key=lambda c: (order.index(c[0]), c[1], c[2]))
    with open(str(FILE), "w", encoding="utf-8", newline="") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(COLUMNS)
        writer.writerows((*cell, *table[cell]) for cell in cells)


def main(arguments: list[str]) -> None:
    """Simulate the tests asked for and rewrite the file after each."""
    keys = list(resolve(arguments).keys) if set(arguments) - {"--missing"} else list(TESTS)
    if "--missing" in arguments:
        keys = [key for key in TESTS if key not in {cell[0] for cell in power_table()}]
    for key in keys:
        test = TESTS[key]
        if not isinstance(test, SampleTest):
            continue
        began = time.perf_counter()
        made = rows_of(test)
        power_table.cache_clear()  # another key may have been written meanwhile
        write({cell: seen for cell, seen in power_table().items() if cell[0] != key} | made)
        print(f"{key}: {time.perf_counter() - began:.0f} s", flush=True)


if __name__ == "__main__":
    main(sys.argv[1:])
