"""Errors of means: coverage on records with known mean, exact variances, honesty of short records."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from rbsim.series.averages import (
    automatic_window,
    batch_count,
    batch_means,
    initial_monotone_sequence,
    intermittent_freedom,
    mean_with_error,
    overlapping_batch_means,
    seen_share,
)
from rbsim.series.correlation import Memory, initial_monotone_memory
from rbsim.series.records import standardise

ESTIMATORS = [initial_monotone_sequence, automatic_window, batch_means, overlapping_batch_means]
EVERY = pytest.mark.parametrize("estimator", ESTIMATORS, ids=lambda f: f.__name__)


def exact_error_of_mean(phi, n):
    """Standard deviation of the mean of n samples of unit variance and autocorrelation phi**lag."""
    return np.sqrt((1 + phi) / (1 - phi) / n - 2 * phi * (1 - phi**n) / (n * (1 - phi)) ** 2)


def lenschow_error_of_mean(tau, length):
    """Lenschow, Mann & Kristensen 1994, J. Atmos. Oceanic Technol. 11, 661, unit variance."""
    return np.sqrt(2 * tau / length * (1 - tau / length * (1 - np.exp(-length / tau))))


def coverage(estimates, truth=0.0):
    return float(np.mean([abs(e.mean - truth) <= e.ci95 for e in estimates]))


@EVERY
@pytest.mark.parametrize(("phi", "samples"), [(0.0, 200), (0.6, 600), (0.9, 1200)])
def test_95_percent_intervals_hold_the_truth(autoregressive, estimator, phi, samples):
    found = [estimator(record, 1.0) for record in autoregressive(phi, samples, 2000, seed=11)]
    assert all(math.isfinite(e.ci95) for e in found)
    assert 0.92 <= coverage(found) <= 0.98


@pytest.mark.parametrize(
    ("phi", "samples"), [(0.0, 20), (0.5, 60), (0.9, 190), (0.9, 400), (0.95, 780), (0.98, 500)]
)
def test_short_records_keep_the_promise_with_wider_intervals(autoregressive, phi, samples):
    found = [mean_with_error(record, 1.0) for record in autoregressive(phi, samples, 1000, seed=12)]
    # the lower end is 1.5 % under the long-record band: at five correlation times the error itself is a guess
    assert coverage(found) >= 0.905
    finite = [e for e in found if math.isfinite(e.ci95)]
    assert np.mean([e.ci95 / e.standard_error for e in finite]) > 2.1


@pytest.mark.parametrize(("period", "damping", "samples"), [(40, 40, 1200), (80, 20, 1800), (40, 40, 6000)])
def test_oscillating_records_are_covered_and_not_wasteful(oscillating, period, damping, samples):
    records = oscillating(period, damping, samples, 600, seed=13)
    found = [mean_with_error(record, 1.0) for record in records]
    assert 0.93 <= coverage(found) <= 0.99
    scatter = np.std([e.mean for e in found])
    assert 0.9 < np.mean([e.standard_error for e in found]) / scatter < 1.25


@EVERY
@pytest.mark.parametrize("phi", [0.5, 0.9])
def test_the_error_is_the_exact_one(autoregressive, estimator, phi):
    n = 40 * round((1 + phi) / (1 - phi)) * 5
    found = [estimator(record, 1.0).standard_error for record in autoregressive(phi, n, 200, seed=14)]
    rms = np.sqrt(np.mean(np.square(found)))
    # 200 records of 200 effective samples know the variance to about 1.5 % and its bias is below 4 %
    assert rms == pytest.approx(exact_error_of_mean(phi, n), rel=0.04)


def test_the_error_is_that_of_lenschow(autoregressive):
    phi, n, spacing = 0.98, 20000, 0.02
    tau = -spacing / np.log(phi)
    found = [mean_with_error(record, spacing) for record in autoregressive(phi, n, 150, seed=15)]
    expected = lenschow_error_of_mean(tau, n * spacing)
    # continuous and sampled record differ by 1e-4 here
    assert expected == pytest.approx(exact_error_of_mean(phi, n), rel=1e-3)
    assert np.sqrt(np.mean([e.standard_error**2 for e in found])) == pytest.approx(expected, rel=0.05)
    assert np.mean([e.correlation_time for e in found]) == pytest.approx(tau, rel=0.06)
    assert np.median([e.effective_samples for e in found]) == pytest.approx(n * spacing / (2 * tau), rel=0.1)


@EVERY
def test_estimators_agree_on_a_long_record(autoregressive, estimator):
    record = autoregressive(0.8, 20000, 1, seed=16)[0]
    assert estimator(record, 1.0).standard_error == pytest.approx(exact_error_of_mean(0.8, 20000), rel=0.25)


def test_white_noise_is_the_textbook_interval(autoregressive):
    record = autoregressive(0.0, 20000, 1, seed=17)[0]
    assert mean_with_error(record, 1.0).standard_error == pytest.approx(
        record.std() / np.sqrt(20000), rel=0.25
    )


@EVERY
def test_a_record_within_its_correlation_time_has_no_interval(estimator):
    ramp = np.linspace(0.0, 1.0, 1000)
    walks = np.cumsum(np.random.default_rng(18).standard_normal((200, 1000)), axis=1)
    assert math.isinf(estimator(ramp, 0.1).ci95)
    assert np.mean([math.isinf(estimator(walk, 0.1).ci95) for walk in walks]) > 0.9


@EVERY
def test_a_constant_record_is_exact(estimator):
    found = estimator(np.full(50, 3.7), 0.5)
    assert (found.mean, found.standard_error, found.ci95) == (3.7, 0.0, 0.0)
    assert found.method == "constant record"
    assert math.isinf(estimator(np.full(9, 3.7), 0.5).ci95)


def test_a_record_that_settles_is_bounded_by_what_is_left():
    record = 2.0 + 1e-3 * np.exp(-np.arange(1000) / 200.0)
    found = mean_with_error(record, 1.0)
    assert "settling" in found.method
    assert abs(found.mean - 2.0) <= found.ci95 < 1e-3


def test_a_rare_event_widens_the_interval():
    rare = (np.random.default_rng(19).random(1000) < 0.01).astype(float)
    common = (np.random.default_rng(19).random(1000) < 0.5).astype(float)
    assert mean_with_error(rare, 1.0).degrees_of_freedom < mean_with_error(common, 1.0).degrees_of_freedom / 3
    z = np.random.default_rng(20).standard_normal(100000)
    assert intermittent_freedom(30.0, z - z.mean(), 1000.0) == pytest.approx(30.0, rel=0.03)


@pytest.mark.parametrize(("effective", "count"), [(3.0, 5), (72.0, 7), (1e5, 30)])
def test_batches_hold_ten_effective_samples(effective, count):
    assert batch_count(Memory(1.0, 5000.0 / effective, 3, 10000)) == count


def test_batches_never_outnumber_samples():
    assert batch_count(Memory(1.0, 0.5, 1, 3)) == 3


@pytest.mark.parametrize(("length", "tau"), [(50.0, 1.0), (3.0, 10.0), (1.0, 1.0)])
def test_seen_share_is_lenschows(length, tau):
    assert seen_share(length, tau) == pytest.approx(
        lenschow_error_of_mean(tau, length) ** 2 * length / (2 * tau)
    )


def test_spacing_scales_times_and_nothing_else(autoregressive):
    record = autoregressive(0.7, 1000, 1, seed=21)[0]
    one, tenth = mean_with_error(record, 1.0), mean_with_error(record, 0.1)
    assert (one.mean, one.ci95, one.effective_samples) == (tenth.mean, tenth.ci95, tenth.effective_samples)
    assert tenth.correlation_time == pytest.approx(0.1 * one.correlation_time)


RECORDS = arrays(np.float64, st.integers(2, 80), elements=st.floats(-1e6, 1e6).map(lambda x: round(x, 3)))
FINITE = arrays(np.float64, st.integers(2, 40), elements=st.floats(-1e150, 1e150))


@EVERY
@settings(max_examples=60, deadline=None)
@given(values=FINITE)
def test_no_finite_record_gives_nan(estimator, values):
    found = estimator(values, 0.3)
    numbers = (found.mean, found.standard_error, found.ci95, found.correlation_time, found.effective_samples)
    assert not np.isnan(numbers).any()
    assert found.ci95 >= 0.0
    assert found.correlation_time > 0.0
    assert found.degrees_of_freedom >= 1.0
    assert values.min() * (1 - np.sign(values.min()) * 1e-12) <= found.mean
    assert found.mean <= values.max() * (1 + np.sign(values.max()) * 1e-12)


@EVERY
@settings(max_examples=40, deadline=None)
@given(
    seed=st.integers(0, 10**6), n=st.integers(12, 90), shift=st.floats(-100, 100), factor=st.floats(1e-3, 1e3)
)
def test_shift_scale_and_sign(estimator, seed, n, shift, factor):
    values = np.cumsum(np.random.default_rng(seed).standard_normal(n)) % 3.0
    before, after = estimator(values, 1.0), estimator(shift - factor * values, 1.0)
    assert after.mean == pytest.approx(shift - factor * before.mean, abs=1e-9 * (abs(shift) + factor))
    # a shift of up to 1e5 standard deviations costs that many digits
    assert after.standard_error == pytest.approx(factor * before.standard_error, rel=1e-6)
    assert after.ci95 == pytest.approx(factor * before.ci95, rel=1e-6)


@EVERY
@settings(max_examples=40, deadline=None)
@given(seed=st.integers(0, 10**6), n=st.integers(12, 90))
def test_a_reversed_record_has_the_same_error(estimator, seed, n):
    values = np.random.default_rng(seed).standard_normal(n).cumsum() % 3.0
    forward, backward = estimator(values, 1.0), estimator(values[::-1], 1.0)
    assert backward.mean == pytest.approx(forward.mean, rel=1e-12)
    assert backward.standard_error == pytest.approx(forward.standard_error, rel=1e-8)


@EVERY
def test_wrong_input_is_refused(estimator):
    with pytest.raises(ValueError, match="finite"):
        estimator([1.0, np.nan], 1.0)
    with pytest.raises(ValueError, match="at least 2"):
        estimator([1.0], 1.0)
    with pytest.raises(ValueError, match="spacing 0"):
        estimator([1.0, 2.0], 0.0)


@settings(max_examples=60, deadline=None)
@given(values=RECORDS)
def test_the_error_of_the_default_never_exceeds_the_range_where_finite(values):
    found = mean_with_error(values, 1.0)
    memory = initial_monotone_memory(standardise(values).values) if np.ptp(values) > 1e-6 else None
    if memory is not None and math.isfinite(found.ci95):
        assert memory.effective_samples >= 10.0 or "settling" in found.method
        assert found.standard_error <= np.ptp(values) * 3.0
