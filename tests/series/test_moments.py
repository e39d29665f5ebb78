"""Moments against scipy, their intervals against known distributions."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from scipy import special, stats

from rbsim.series.estimate import half_width95
from rbsim.series.moments import flatness_scale, moments_with_errors

NAMES = ("mean", "rms", "skewness", "flatness")


def coverage(found, truths):
    return [
        float(np.mean([abs(getattr(m, name).mean - truth) <= getattr(m, name).ci95 for m in found]))
        for name, truth in zip(NAMES, truths, strict=True)
    ]


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_values_are_scipys(seed):
    record = np.random.default_rng(seed).gamma(2.0, size=500) * 3.0 - 7.0
    found = moments_with_errors(record, 0.1)
    assert found.mean.mean == pytest.approx(record.mean(), rel=1e-12)
    assert found.rms.mean == pytest.approx(record.std(), rel=1e-12)
    assert found.skewness.mean == pytest.approx(stats.skew(record), rel=1e-10)
    assert found.flatness.mean == pytest.approx(stats.kurtosis(record, fisher=False), rel=1e-10)


def test_errors_of_white_gaussian_noise_are_the_textbook_ones():
    n = 4000
    found = [moments_with_errors(r, 1.0) for r in np.random.default_rng(4).standard_normal((200, n))]
    expected = np.sqrt([1.0 / n, 0.5 / n, 6.0 / n, 24.0 / n])
    errors = [np.sqrt(np.mean([getattr(m, name).standard_error ** 2 for m in found])) for name in NAMES]
    # 200 errors of 20 % scatter each; that of the flatness scatters most
    assert errors == pytest.approx(expected, rel=0.06)


def test_errors_of_white_skewed_noise_are_the_scatter_of_the_values():
    found = [moments_with_errors(r, 1.0) for r in np.random.default_rng(7).gamma(9.0, size=(400, 1500))]
    for name in NAMES:
        estimates = [getattr(m, name) for m in found]
        errors = np.sqrt(np.mean([e.standard_error**2 for e in estimates]))
        # 400 values know their scatter to 3.5 %, the heavy-tailed flatness less well
        assert errors == pytest.approx(np.std([e.mean for e in estimates]), rel=0.15)


def test_the_interval_of_the_rms_is_that_of_its_logarithm():
    rms = moments_with_errors(np.random.default_rng(8).standard_normal(60), 1.0).rms
    half = half_width95(rms.standard_error / rms.mean, rms.degrees_of_freedom)
    assert rms.ci95 == pytest.approx(rms.mean * (math.exp(half) - 1.0), rel=1e-12)


@pytest.mark.parametrize(("phi", "samples"), [(0.0, 300), (0.8, 1000), (0.9, 2000)])
def test_intervals_of_gaussian_records_hold_the_truth(autoregressive, phi, samples):
    found = [moments_with_errors(r, 1.0) for r in autoregressive(phi, samples, 500, seed=5)]
    mean, rms, skewness, flatness = coverage(found, (0.0, 1.0, 0.0, 3.0))
    assert 0.92 <= mean <= 0.98
    assert 0.92 <= rms <= 0.985
    assert 0.92 <= skewness <= 0.99
    # one-sided scatter makes the flatness err on the safe side
    assert 0.92 <= flatness <= 0.995


def test_intervals_of_skewed_records_hold_the_truth(autoregressive):
    uniform = special.ndtr(autoregressive(0.8, 4000, 200, seed=6))
    found = [moments_with_errors(r, 1.0) for r in special.gammaincinv(9.0, uniform)]
    truths = stats.gamma.stats(9.0, moments="mvsk")
    covered = coverage(found, (truths[0], math.sqrt(truths[1]), truths[2], 3.0 + truths[3]))
    # heavier tails than Gaussian: the estimated errors of the high moments are themselves too small at times
    assert min(covered) > 0.88


def test_a_constant_record_has_rms_zero_and_no_shape():
    found = moments_with_errors(np.full(30, 4.0), 1.0)
    assert (found.mean.mean, found.mean.ci95, found.rms.mean, found.rms.ci95) == (4.0, 0.0, 0.0, 0.0)
    assert (found.skewness.mean, found.flatness.mean) == (0.0, 3.0)
    assert math.isinf(found.skewness.ci95)
    assert math.isinf(found.flatness.ci95)


def test_a_short_record_has_no_intervals():
    found = moments_with_errors([1.0, 2.0, 4.0, 3.0], 1.0)
    assert all(math.isinf(getattr(found, name).ci95) for name in NAMES)


def test_scale_of_the_flatness():
    assert flatness_scale(3.0) == 0.5
    assert flatness_scale(1.0) == math.inf


@settings(max_examples=60, deadline=None)
@given(arrays(np.float64, st.integers(2, 40), elements=st.floats(-1e70, 1e70)))
def test_no_finite_record_gives_nan(values):
    found = moments_with_errors(values, 0.5)
    for name in NAMES:
        estimate = getattr(found, name)
        assert not np.isnan([estimate.mean, estimate.standard_error, estimate.ci95]).any()
        assert estimate.ci95 >= 0.0
    assert found.rms.mean >= 0.0
    assert found.flatness.mean >= 1.0 - 1e-9


@settings(max_examples=40, deadline=None)
@given(seed=st.integers(0, 10**6), shift=st.floats(-50, 50), factor=st.floats(0.01, 100))
def test_shift_scale_and_sign(seed, shift, factor):
    values = np.random.default_rng(seed).gamma(3.0, size=120)
    a, b = moments_with_errors(values, 1.0), moments_with_errors(shift - factor * values, 1.0)
    assert b.rms.mean == pytest.approx(factor * a.rms.mean, rel=1e-9)
    assert b.rms.ci95 == pytest.approx(factor * a.rms.ci95, rel=1e-6)
    assert b.skewness.mean == pytest.approx(-a.skewness.mean, abs=1e-8)
    assert b.skewness.ci95 == pytest.approx(a.skewness.ci95, rel=1e-6)
    assert b.flatness.mean == pytest.approx(a.flatness.mean, rel=1e-8)
    assert b.flatness.ci95 == pytest.approx(a.flatness.ci95, rel=1e-5)
