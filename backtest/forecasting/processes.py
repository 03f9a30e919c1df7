"""The volatility processes of the library arch that filter ``library:<process>`` offers, as data: no import of arch.

Those with parameters to estimate that need no further data, each at the orders arch takes by default.
"""

from typing import NamedTuple


class Process(NamedTuple):
    """A process: its default orders in words, and its published source."""

    orders: str
    source: str


PROCESSES = {
    "ARCH": Process("p = 1", "Engle (1982)"),
    "GARCH": Process("p = 1, o = 0, q = 1, power = 2", "Bollerslev (1986)"),
    "EGARCH": Process("p = 1, o = 0, q = 1", "Nelson (1991)"),
    "APARCH": Process("p = 1, o = 1, q = 1", "Ding, Granger & Engle (1993)"),
    "FIGARCH": Process("p = 1, q = 1, power = 2, truncation = 1000", "Baillie, Bollerslev & Mikkelsen (1996)"),
    "HARCH": Process("lags = 1", "Mueller et al. (1997)"),
    "MIDASHyperbolic": Process("m = 22", "Foroni & Marcellino (2013), as cited by arch"),
    "ConstantVariance": Process("no orders", ""),
}
"""By the name of the class in ``arch.univariate``."""
