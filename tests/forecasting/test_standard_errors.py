"""Standard errors of the parameters of a window: names, units, bounds, refusals; values in test_precision."""

import numpy as np
import pytest

from backtest.errors import FitError, StudyError
from backtest.forecasting.models import FilterSpec
from backtest.forecasting.standard_errors import AT_BOUND, BY_HESSIAN, ERRORS, parameter_errors
from tests.reference.datasets import dem2gbp, garch_t

NORMAL = FilterSpec("garch", mean="constant", start="sample-variance", innovations="normal")


def test_normal_innovations_have_all_five_in_the_unit_of_the_losses():
    told = {row.parameter: row for row in parameter_errors(dem2gbp(), NORMAL)}
    moved = {row.parameter: row for row in parameter_errors(1e6 * dem2gbp(), NORMAL)}
    assert list(told) == ["intercept", "omega", "alpha", "beta"]
    for name, unit in {"intercept": 1e6, "omega": 1e12, "alpha": 1.0, "beta": 1.0}.items():
        assert tuple(told[name].errors) == ERRORS
        assert told[name].remark == ""
        for error, value in told[name].errors.items():
            assert moved[name].errors[error] == pytest.approx(unit * value, rel=1e-7)


def test_t_innovations_have_the_hessians_alone_and_nu_its_own():
    spec = FilterSpec("garch", mean="constant", start="sample-variance", innovations="t")
    told = {row.parameter: row for row in parameter_errors(garch_t(2000, 5, nu=5.0)[0], spec)}
    assert all(tuple(row.errors) == BY_HESSIAN for row in told.values())
    nu = told["nu"]
    # Known truth: nu is 5; its error on 2,000 days is some tenths.
    assert 0.2 < nu.errors["hessian"] < 1.5
    assert nu.estimate == pytest.approx(5.0, abs=3 * nu.errors["hessian"])


def test_a_parameter_at_a_bound_has_no_standard_error_and_says_so():
    # Alternating large and small days: a large loss makes the next day small, so that no reaction fits best.
    rng = np.random.default_rng(1)
    x = rng.standard_normal(600) * np.tile([1.5, 0.5], 300)
    told = {row.parameter: row for row in parameter_errors(x, NORMAL)}
    assert told["alpha"].estimate == pytest.approx(0.0, abs=1e-9)
    assert dict(told["alpha"].errors) == {}
    assert told["alpha"].remark == AT_BOUND
    for row in told.values():
        assert row.remark or row.errors
        assert all(np.isfinite(value) and value > 0.0 for value in row.errors.values())


@pytest.mark.parametrize(
    "past", [np.ones(100), np.arange(10.0), np.full((60, 2), 1.0), np.append(np.arange(99.0), np.nan)],
    ids=["constant", "short", "two columns", "a gap"],
)  # fmt: skip
def test_a_past_that_cannot_be_fitted_is_refused(past):
    with pytest.raises(FitError, match="past that cannot be fitted"):
        parameter_errors(past, NORMAL)


def test_a_filter_without_estimates_is_refused():
    with pytest.raises(StudyError, match="ewma"):
        parameter_errors(dem2gbp(), FilterSpec("ewma", decay=0.94))
