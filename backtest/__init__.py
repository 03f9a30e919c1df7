"""Backtesting of market-risk forecasts: read, forecast, judge, report.

The public verbs are the names in ``__all__``; the tables they take and return are described in README.md.
"""

from backtest.pipeline import run
from backtest.study import read_study
from backtest.verbs import forecast, judge

__all__ = ["forecast", "judge", "read_study", "run"]
