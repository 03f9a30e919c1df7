"""Murphy diagrams: integrals of elementary scores are the scores, and the band is that of the mean."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from backtest.judging.murphy import elementary_es, elementary_var, murphy_es, murphy_var
from backtest.judging.ranking import mean_difference
from backtest.judging.scores import fz0, tick
from tests.reference.comparison_paths import noisy_forecasters
from tests.reference.judging_tables import sample_of

LEVEL = 0.975


def arrays(*values):
    return tuple(np.array([float(v)]) for v in values)


def integral(first, second, loss):
    """Integrate the elementary difference over h^-2 dh: midpoints between the two ES, in closed form beyond both."""
    (v1, e1), (v2, e2) = first, second
    low, high = min(e1, e2), max(e1, e2)
    edges = np.linspace(low, high, 200_001)
    middle = (edges[1:] + edges[:-1]) / 2

    def difference(thresholds):
        both = (elementary_es(*arrays(loss, v, e), LEVEL, thresholds)[0] for v, e in ((v1, e1), (v2, e2)))
        return np.subtract(*both)

    between = float((difference(middle) / middle**2 * np.diff(edges)).sum())
    return between + float(difference(np.array([high + 1.0]))[0] / high)  # constant from the larger ES on


def test_the_integral_of_elementary_differences_is_the_difference_of_fz0():
    # (2, 2.5) against (2.2, 3.1) at a loss of 4 and 97.5%: 8.649405 both ways
    exact = np.subtract(*(fz0(*arrays(4, v, e), LEVEL)[0] for v, e in ((2, 2.5), (2.2, 3.1))))
    assert exact == pytest.approx(8.649405, abs=5e-7)
    assert integral((2, 2.5), (2.2, 3.1), 4) == pytest.approx(8.649405, abs=5e-7)


FORECAST = st.tuples(st.floats(0.5, 3.0), st.floats(0.1, 2.0)).map(lambda pair: (pair[0], pair[0] + pair[1]))


@given(FORECAST, FORECAST, st.floats(-2.0, 8.0))
def test_the_identity_holds_for_any_pair_of_forecasts(first, second, loss):
    exact = np.subtract(*(fz0(*arrays(loss, *pair), LEVEL)[0] for pair in (first, second)))
    assert integral(first, second, loss) == pytest.approx(exact, abs=1e-6, rel=1e-6)


@pytest.mark.parametrize(("loss", "var"), [(3.0, 2.0), (1.0, 2.0), (-1.5, 0.5), (2.0, 2.0)])
def test_the_integral_of_elementary_scores_of_var_is_tick(loss, var):
    edges = np.linspace(-5.0, 5.0, 100_001)
    middle = (edges[1:] + edges[:-1]) / 2
    total = elementary_var(*arrays(loss, var), LEVEL, middle)[0].sum() * (edges[1] - edges[0])
    assert total == pytest.approx(tick(*arrays(loss, var), LEVEL)[0], abs=1e-9)


def pair(better=1.0):
    losses, v1, e1, v2, e2 = noisy_forecasters(np.random.default_rng(2), 800, LEVEL, 0.1)
    return sample_of(losses, better * v1, LEVEL, es=better * e1), sample_of(losses, v2, LEVEL, es=e2)


def test_the_band_at_a_threshold_is_that_of_the_mean_there():
    first, second = pair()
    curve = murphy_es(first, second, points=21)
    h = curve.thresholds[[10]]
    scores = [elementary_es(s.losses, s.var, s.es, LEVEL, h)[:, 0] for s in (first, second)]
    found = mean_difference(scores[0] - scores[1])
    assert (curve.mean[10], curve.low[10], curve.high[10]) == (found.mean, found.low, found.high)
    assert found.low < found.high


@pytest.mark.parametrize("curve_of", [murphy_es, murphy_var])
def test_curves_turn_their_sign_with_the_order_of_models(curve_of):
    first, second = pair()
    ahead, behind = curve_of(first, second), curve_of(second, first)
    assert ahead.mean == pytest.approx(-behind.mean)
    assert ahead.low == pytest.approx(-behind.high)
    assert all(len(part) == 101 and np.isfinite(part).all() for part in ahead)
    assert np.all((ahead.low <= ahead.mean) & (ahead.mean <= ahead.high))


def test_a_far_worse_model_is_behind_somewhere_beyond_its_band_and_an_equal_one_nowhere_far():
    far, equal = murphy_es(*pair(better=0.4)), murphy_es(*pair())
    assert (far.low > 0.0).any()
    assert np.mean((equal.low > 0.0) | (equal.high < 0.0)) < 0.2  # pointwise band: some points may lie outside
