"""The drift test: false alarms and power."""

import numpy as np
import pytest

from rbsim.series.stationarity import stationarity_test


@pytest.mark.parametrize(("phi", "samples"), [(0.0, 400), (0.8, 2000), (0.9, 4000)])
def test_steady_records_fail_rarely(autoregressive, phi, samples):
    found = [stationarity_test(record) for record in autoregressive(phi, samples, 500, seed=1)]
    assert all(test.testable for test in found)
    # 5 % nominal, up to 8 % because the variance of half a record is itself uncertain, 1.2 % by chance
    assert np.mean([not test.steady for test in found]) <= 0.1


def test_a_drift_of_two_standard_deviations_is_found(autoregressive):
    drift = np.linspace(0.0, 2.0, 2000)
    found = [stationarity_test(record + drift) for record in autoregressive(0.8, 2000, 200, seed=2)]
    assert np.mean([test.testable and test.steady for test in found]) < 0.02


def test_too_short_a_record_cannot_be_tested(autoregressive):
    test = stationarity_test(autoregressive(0.99, 200, 1, seed=3)[0])
    assert not test.testable
    assert not test.steady


def test_three_samples_are_refused():
    with pytest.raises(ValueError, match="at least 4"):
        stationarity_test([1.0, 2.0, 3.0])


def test_a_constant_record_is_steady():
    assert stationarity_test(np.full(10, 1.0)).steady


def test_a_step_before_a_constant_half_is_not_steady():
    test = stationarity_test(np.r_[np.zeros(50), np.ones(100)])
    assert test.testable
    assert not test.steady
