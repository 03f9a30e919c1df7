"""Backtesting of market-risk forecasts: read, forecast, judge, report.

The public verbs are the names in ``__all__``; the tables they take and return are described in README.md.
"""

from backtest.pipeline import forecast, judge, run
from backtest.study import read_study

__all__ = ["forecast", "judge", "read_study", "run"]
