"""What a test could have seen: exact power of the binomial tests against a stated true rate."""

from backtest.judging.counts import at_least, at_most


def upper_power(days: int, level: float, factor: float = 2.0, significance: float = 0.05) -> float:
    """Return the chance that the one-sided exact binomial test rejects when the true rate is ``factor`` (1 - level).

    This is the first page's sentence. The test rejects from the smallest count k with P(X >= k) <= significance on.
    """
    nominal = 1.0 - level
    return at_least(_first_upper(days, nominal, significance), days, min(1.0, factor * nominal))


def two_sided_power(days: int, level: float, factor: float = 2.0, significance: float = 0.05) -> float:
    """Return the same chance for the two-sided p that ``binomial`` shows (twice the smaller tail)."""
    nominal, half = 1.0 - level, significance / 2.0
    true = min(1.0, factor * nominal)
    lower = _last_lower(days, nominal, half)
    return at_least(_first_upper(days, nominal, half), days, true) + at_most(lower, days, true)


def _first_upper(days: int, rate: float, significance: float) -> int:
    low, high = 0, days + 1  # at_least falls in k: bisect for the first k at or below the significance
    while low < high:
        middle = (low + high) // 2
        low, high = (low, middle) if at_least(middle, days, rate) <= significance else (middle + 1, high)
    return low


def _last_lower(days: int, rate: float, significance: float) -> int:
    low, high = -1, days
    while low < high:
        middle = (low + high + 1) // 2
        low, high = (middle, high) if at_most(middle, days, rate) <= significance else (low, middle - 1)
    return low
