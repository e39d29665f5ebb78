"""Autocovariance, Bartlett's errors, integral times."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from rbsim.series.correlation import (
    autocorrelation,
    autocovariance,
    automatic_window_memory,
    correlation_time,
    initial_monotone_memory,
)


def slow_autocovariance(values):
    n = values.size
    return np.array([sum(values[i] * values[i + k] for i in range(n - k)) / n for k in range(n)])


def slow_bartlett(rho, window, lag, n):
    """Bartlett 1946, term by term."""

    def r(k):
        return rho[abs(k)] if abs(k) <= window else 0.0

    terms = (
        r(j) ** 2 + r(j + lag) * r(j - lag) - 4 * r(lag) * r(j) * r(j - lag) + 2 * r(j) ** 2 * r(lag) ** 2
        for j in range(-3 * window - lag, 3 * window + lag + 1)
    )
    return math.sqrt(max(sum(terms), 0.0) / n)


@pytest.mark.parametrize("n", [2, 3, 64, 101])
def test_autocovariance_is_the_double_sum(n):
    values = np.random.default_rng(n).standard_normal(n)
    assert autocovariance(values) == pytest.approx(slow_autocovariance(values), abs=1e-13)


@pytest.mark.parametrize("memory", [initial_monotone_memory, automatic_window_memory])
@pytest.mark.parametrize("phi", [0.0, 0.5, 0.9])
def test_integral_time_of_autoregressive_records(autoregressive, memory, phi):
    exact = 0.5 * (1 + phi) / (1 - phi)
    found = [memory(r - r.mean()).integral for r in autoregressive(phi, 20000, 30, seed=1)]
    # Geyer's sequence ends at a positive chance value and so errs high by a few percent
    assert np.mean(found) == pytest.approx(exact, rel=0.08)


def slow_window(rho):
    """Sokal's window, lag by lag: integral time and last lag."""
    integral = 0.5
    for lag in range(1, rho.size):
        integral += rho[lag]
        if lag >= 5.0 * integral:
            return integral, lag
    raise AssertionError("no window")


def slow_initial_sequence(rho):
    """Geyer's initial monotone sequence, pair by pair: integral time and last lag."""
    total, smallest = -0.5, math.inf
    for first in range(0, rho.size - 1, 2):
        pair = rho[first] + rho[first + 1]
        if pair <= 0.0:
            return total, first - 1
        smallest = min(smallest, pair)
        total += smallest
    raise AssertionError("no end")


@pytest.mark.parametrize(
    ("memory", "twin"),
    [(initial_monotone_memory, slow_initial_sequence), (automatic_window_memory, slow_window)],
)
def test_memory_is_the_sum_lag_by_lag_with_wolffs_correction(autoregressive, memory, twin):
    for record in autoregressive(0.8, 200, 5, seed=6):
        rest = record - record.mean()
        covariance = slow_autocovariance(rest)
        integral, window = twin(covariance / covariance[0])
        found = memory(rest)
        assert found.window == window
        assert found.integral == pytest.approx(integral * (1.0 + (2.0 * window + 1.0) / 200), rel=1e-9)
        assert found.variance == pytest.approx(record.var(), rel=1e-12)


def test_bartletts_error_is_the_sum_term_by_term(autoregressive):
    record = autoregressive(0.7, 300, 1, seed=2)[0]
    found = autocorrelation(record, 1.0, 12.0)
    rest = record - record.mean()
    rho = slow_autocovariance(rest) / slow_autocovariance(rest)[0]
    window = initial_monotone_memory(rest).window
    expected = [slow_bartlett(rho, window, lag, 300) for lag in range(1, 13)]
    assert found.standard_error[1:] == pytest.approx(expected, rel=1e-9)
    assert found.standard_error[0] == 0.0
    assert found.value == pytest.approx(rho[:13], abs=1e-12)


def test_bartletts_band_holds_the_true_correlation(autoregressive):
    found = [autocorrelation(r, 0.5, 15.0) for r in autoregressive(0.8, 2000, 400, seed=3)]
    true = 0.8 ** np.arange(31)
    inside = np.mean([np.abs(c.value - true) <= 1.96 * c.standard_error for c in found], axis=0)
    assert found[0].lag == pytest.approx(0.5 * np.arange(31))
    assert np.all(inside[1:] > 0.91)
    assert np.all(inside[1:] < 0.99)


@pytest.mark.parametrize(("phi", "n"), [(0.0, 300), (0.8, 2000), (0.9, 1500)])
def test_the_interval_of_the_correlation_time_holds_the_truth(autoregressive, phi, n):
    exact = 0.5 * (1 + phi) / (1 - phi) * 0.2
    found = [correlation_time(r, 0.2) for r in autoregressive(phi, n, 500, seed=4)]
    assert 0.92 <= np.mean([abs(e.mean - exact) <= e.ci95 for e in found]) <= 0.995


def test_the_lag_is_cut_to_half_of_the_record():
    found = autocorrelation(np.random.default_rng(5).standard_normal(21), 1.0, 1e300)
    assert found.lag[-1] == 10.0


def test_a_constant_record_has_no_memory():
    function = autocorrelation(np.full(20, 2.0), 1.0, 3.0)
    assert list(function.value) == [1.0, 0.0, 0.0, 0.0]
    assert np.isinf(function.standard_error[1:]).all()
    assert math.isinf(correlation_time(np.full(20, 2.0), 1.0).ci95)


def test_a_negative_lag_is_refused():
    with pytest.raises(ValueError, match="longest lag -1"):
        autocorrelation([1.0, 2.0, 0.0], 1.0, -1.0)


@settings(max_examples=60, deadline=None)
@given(arrays(np.float64, st.integers(2, 40), elements=st.floats(-1e150, 1e150)))
def test_no_finite_record_gives_nan(values):
    function, time = autocorrelation(values, 1.0, 5.0), correlation_time(values, 1.0)
    assert not np.isnan(function.value).any()
    assert not np.isnan(function.standard_error).any()
    assert np.all(np.abs(function.value) <= 1.0 + 1e-9)
    assert time.mean > 0.0
    assert not math.isnan(time.ci95)
