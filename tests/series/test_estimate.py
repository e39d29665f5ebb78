"""A number with its error."""

import math

import pytest
from scipy import stats

from rbsim.series.estimate import Estimate, half_width95, unknown


def _estimate(mean=2.0, ci95=0.5):
    return Estimate(mean, 0.25, ci95, 3.0, 40.0, 240, 12.0, "test")


def test_ends_and_relative_width():
    assert (_estimate().lower, _estimate().upper) == (1.5, 2.5)
    assert _estimate().relative_ci95 == 0.25
    assert _estimate(-2.0).relative_ci95 == 0.25
    assert _estimate(0.0).relative_ci95 == math.inf
    assert _estimate(0.0, 0.0).relative_ci95 == 0.0


def test_half_the_width_takes_four_times_the_samples():
    assert _estimate().samples_for(0.25) == 960.0
    assert _estimate(ci95=math.inf).samples_for(0.1) == math.inf
    with pytest.raises(ValueError, match="must be positive"):
        _estimate().samples_for(0.0)


@pytest.mark.parametrize("freedom", [1.0, 4.5, 30.0, 1e6])
def test_width_is_students(freedom):
    assert half_width95(0.3, freedom) == pytest.approx(0.3 * stats.t.ppf(0.975, freedom), rel=1e-9)


def test_less_than_one_degree_of_freedom_counts_as_one():
    assert half_width95(1.0, 0.2) == half_width95(1.0, 1.0)


def test_an_unknown_estimate_has_no_finite_error():
    nothing = unknown(3.0, 7, "reason")
    assert nothing.mean == 3.0
    assert nothing.samples == 7
    assert math.isinf(nothing.ci95)
    assert math.isinf(nothing.standard_error)
    assert nothing.method == "reason"
