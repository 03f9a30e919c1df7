"""The firm-wide backtest of the Basel Framework, chapter MAR32, as data."""

from backtest.judging.rules.profiles import Cited, Profile, ZoneStart

PROFILE = Profile(
    name="basel-mar32",
    text="Basel Framework, MAR32 Internal models approach: backtesting and P&L attribution test requirements",
    date="version effective 1 January 2023 (date from memory)",
    days=Cited(250, "MAR32.4"),
    level=Cited(0.99, "MAR32.4"),
    counting="MAR32.5(1)",
    missing="MAR32.5(2)",
    zones=(ZoneStart("green", 0), ZoneStart("amber", 5), ZoneStart("red", 10)),
    zones_paragraph="MAR32.9, table 1",
    multipliers=tuple(
        Cited(value, "MAR32.9, table 1") for value in (1.50, 1.50, 1.50, 1.50, 1.50, 1.70, 1.76, 1.83, 1.88, 1.92, 2.00)
    ),
)
