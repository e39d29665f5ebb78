"""Tail fits: parameters, intervals, and which of two tails fits better."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from scipy import optimize, special, stats

from rbsim.series.tails import EXPONENTIAL, GAUSSIAN, UNDECIDED, tail_fit

SIDES = pytest.mark.parametrize("side", ["upper", "lower"])


def laplace(gaussian):
    """The same records with the tails exp(−√2 |z|)."""
    share = special.ndtr(-np.abs(gaussian))
    return -np.sign(gaussian) * np.log(2.0 * share)


@SIDES
def test_parameters_maximise_the_likelihood(side):
    record = np.random.default_rng(1).standard_normal(3000) * 2.0 + 5.0
    found = tail_fit(record, 1.0, side)
    z = (record - record.mean()) / record.std() * (1 if side == "upper" else -1)
    tail = z[z > 1.0]
    assert found.share.mean == pytest.approx(tail.size / 3000)
    assert found.slope.mean == pytest.approx(1.0 / (tail - 1.0).mean(), rel=1e-9)

    def loss(width):
        return -np.sum(stats.norm.logpdf(tail / width) - np.log(width) - stats.norm.logsf(1.0 / width))

    best = optimize.minimize_scalar(loss, bounds=(0.3, 3.0), method="bounded", options={"xatol": 1e-9}).x
    assert found.width.mean == pytest.approx(best, rel=1e-5)


def test_errors_of_white_tails_are_those_of_maximum_likelihood():
    found = [tail_fit(r, 1.0, "upper") for r in np.random.default_rng(8).standard_normal((40, 4000))]
    tail = stats.norm.sf(1.0) * 4000
    excess = stats.truncnorm(1.0, np.inf, loc=-1.0)
    # the exponential is not the true tail: error of one over the mean excess by linearisation
    slope_error = excess.std() / excess.mean() ** 2 / math.sqrt(tail)
    hazard = stats.norm.pdf(1.0) / stats.norm.sf(1.0)
    # information of ln σ at σ = 1: variance of z² beyond the threshold
    width_error = 1.0 / math.sqrt(tail * (2.0 + 2.0 * hazard - hazard**2))
    assert np.mean([f.slope.standard_error for f in found]) == pytest.approx(slope_error, rel=0.06)
    assert np.mean([f.width.standard_error for f in found]) == pytest.approx(width_error, rel=0.06)


@SIDES
def test_gaussian_records_have_width_one(autoregressive, side):
    found = [tail_fit(r, 1.0, side) for r in autoregressive(0.8, 8000, 120, seed=2)]
    assert np.median([f.width.mean for f in found]) == pytest.approx(1.0, abs=0.02)
    assert np.mean([abs(f.width.mean - 1.0) <= f.width.ci95 for f in found]) > 0.92
    names = [f.preferred for f in found]
    assert names.count(EXPONENTIAL) <= 4
    assert names.count(GAUSSIAN) > 60


@SIDES
def test_laplace_records_have_the_slope_root_two(autoregressive, side):
    found = [tail_fit(r, 1.0, side) for r in laplace(autoregressive(0.8, 16000, 80, seed=3))]
    assert np.median([f.slope.mean for f in found]) == pytest.approx(math.sqrt(2.0), rel=0.02)
    assert np.mean([abs(f.slope.mean - math.sqrt(2.0)) <= f.slope.ci95 for f in found]) > 0.92
    names = [f.preferred for f in found]
    assert names.count(GAUSSIAN) <= 3
    assert names.count(EXPONENTIAL) > 50


def test_sides_are_told_apart():
    rng = np.random.default_rng(4)
    record = rng.exponential(size=20000)
    assert tail_fit(record, 1.0, "upper").preferred == EXPONENTIAL
    assert tail_fit(record, 1.0, "lower").preferred == UNDECIDED
    assert tail_fit(record, 1.0, "lower").share.mean == 0.0
    assert tail_fit(-record, 1.0, "lower").slope.mean == pytest.approx(
        tail_fit(record, 1.0, "upper").slope.mean, rel=1e-9
    )


def test_few_samples_decide_nothing():
    found = tail_fit(np.random.default_rng(5).standard_normal(30), 1.0, "upper")
    assert found.preferred == UNDECIDED
    assert math.isinf(found.slope.ci95)
    assert "fewer than 10" in found.slope.method


def test_a_tail_that_hugs_its_threshold_has_no_gaussian_fit():
    found = tail_fit(np.tile([1.0, -1.0, -1.0, 1.0], 50), 1.0, "upper", 1.0 - 1e-7)
    assert math.isinf(found.width.ci95)
    assert found.width.method == "no Gaussian tail fits"


def test_the_farthest_outliers_still_have_a_gaussian_fit():
    record = np.r_[np.random.default_rng(6).uniform(-1.0, 1.0, 5000), np.full(12, 1e6)]
    assert tail_fit(record, 1.0, "upper").width.mean > 10.0


@pytest.mark.parametrize(
    ("side", "threshold", "message"),
    [("left", 1.0, "side 'left'"), ("upper", 0.0, "threshold 0"), ("upper", math.nan, "threshold nan")],
)
def test_wrong_input_is_refused(side, threshold, message):
    with pytest.raises(ValueError, match=message):
        tail_fit(np.arange(9.0), 1.0, side, threshold)


@SIDES
@settings(max_examples=60, deadline=None)
@given(values=arrays(np.float64, st.integers(2, 120), elements=st.floats(-1e100, 1e100)))
def test_no_finite_record_gives_nan(side, values):
    found = tail_fit(values, 1.0, side, 0.3)
    for estimate in (found.share, found.slope, found.width, found.preference):
        assert not np.isnan([estimate.mean, estimate.standard_error, estimate.ci95]).any()
    assert found.preferred in (EXPONENTIAL, GAUSSIAN, UNDECIDED)
