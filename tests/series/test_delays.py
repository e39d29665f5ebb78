"""Cross-correlation and delay: values, false alarms, errors of a known delay."""

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from rbsim.series.delays import cross_correlation, delay_between


def shifted_pair(maker, shift, noise, records, seed):
    """Two noisy views of one record, the second `shift` samples behind."""
    n = 2500
    source = maker(n + shift, records, seed)
    first, second = maker(n, records, seed + 1), maker(n, records, seed + 2)
    return source[:, shift:] + noise * first, source[:, :n] + noise * second


def test_values_are_the_double_sum():
    x, y = np.random.default_rng(1).standard_normal((2, 50))
    found = cross_correlation(x, y, 0.5, 4.0)
    a, b = (x - x.mean()) / x.std(), (y - y.mean()) / y.std()
    expected = [sum(a[t] * b[t + k] for t in range(50) if 0 <= t + k < 50) / 50 for k in range(-8, 9)]
    assert found.delay == pytest.approx(0.5 * np.arange(-8, 9))
    assert found.value == pytest.approx(expected, abs=1e-12)


def test_the_error_of_unrelated_records_is_bartletts(autoregressive):
    x, y = autoregressive(0.8, 4000, 100, seed=2), autoregressive(0.6, 4000, 100, seed=3)
    found = [cross_correlation(a, b, 1.0, 40.0) for a, b in zip(x, y, strict=True)]
    # Σ (φ₁φ₂)^|j| over both signs
    exact = math.sqrt((1 + 0.48) / (1 - 0.48) / 4000)
    assert np.mean([f.standard_error for f in found]) == pytest.approx(exact, rel=0.05)
    assert np.std([f.value for f in found]) == pytest.approx(exact, rel=0.1)


@pytest.mark.parametrize(("phi", "n"), [(0.0, 300), (0.5, 500), (0.9, 2000)])
@pytest.mark.parametrize("reach", [0.0, 5.0, 50.0])
def test_unrelated_records_are_seldom_called_correlated(autoregressive, phi, n, reach):
    x, y = autoregressive(phi, n, 500, seed=4), autoregressive(phi, n, 500, seed=5)
    alarms = np.mean([delay_between(a, b, 1.0, reach).significant for a, b in zip(x, y, strict=True)])
    assert alarms <= 0.075


@pytest.mark.parametrize("noise", [0.3, 1.0])
def test_a_known_delay_is_found_within_its_interval(smooth, noise):
    x, y = shifted_pair(smooth, 7, noise, 250, seed=6)
    found = [delay_between(a, b, 0.5, 20.0) for a, b in zip(x, y, strict=True)]
    assert all(d.significant for d in found)
    inside = np.mean([abs(d.delay.mean - 3.5) <= d.delay.ci95 for d in found])
    assert 0.93 <= inside <= 0.998
    scatter = np.std([d.delay.mean for d in found])
    assert 0.8 < np.median([d.delay.standard_error for d in found]) / scatter < 1.6


def test_opposite_records_have_a_negative_correlation(smooth):
    x, y = (pair[0] for pair in shifted_pair(smooth, 7, 0.2, 1, seed=7))
    found = delay_between(x, -y, 1.0, 30.0)
    assert found.correlation < -0.8
    assert found.delay.mean == pytest.approx(7.0, abs=1.0)


def test_exchange_turns_the_sign(smooth):
    x, y = (pair[0] for pair in shifted_pair(smooth, 9, 0.2, 1, seed=8))
    there, back = delay_between(x, y, 1.0, 30.0), delay_between(y, x, 1.0, 30.0)
    assert there.delay.mean == pytest.approx(9.0, abs=0.5)
    assert back.delay.mean == pytest.approx(-there.delay.mean, abs=0.2)
    assert back.p_value == pytest.approx(there.p_value, abs=1e-12)


def test_a_peak_at_the_end_of_the_search_is_no_delay(smooth):
    x, y = (pair[0] for pair in shifted_pair(smooth, 9, 0.1, 1, seed=9))
    found = delay_between(x, y, 1.0, 4.0)
    assert found.significant
    assert math.isinf(found.delay.ci95)
    assert "end of the search" in found.delay.method


def test_the_search_is_cut_to_a_quarter_of_the_record():
    assert cross_correlation(np.arange(20.0), np.arange(20.0) ** 2, 1.0, 1e300).delay[-1] == 5.0


def test_a_constant_record_correlates_with_nothing():
    found = delay_between(np.full(40, 1.0), np.arange(40.0), 1.0, 3.0)
    assert (found.correlation, found.p_value, found.significant) == (0.0, 1.0, False)


def test_wrong_input_is_refused():
    with pytest.raises(ValueError, match="3 and 4 samples"):
        cross_correlation(np.arange(3.0), np.arange(4.0), 1.0, 1.0)
    with pytest.raises(ValueError, match="longest delay -1"):
        cross_correlation(np.arange(4.0), np.arange(4.0), 1.0, -1.0)


@settings(max_examples=60, deadline=None)
@given(arrays(np.float64, st.tuples(st.just(2), st.integers(2, 40)), elements=st.floats(-1e100, 1e100)))
def test_no_finite_pair_gives_nan(pair):
    found = delay_between(pair[0], pair[1], 1.0, 4.0)
    numbers = (found.correlation, found.p_value, found.delay.mean, found.delay.ci95)
    assert not np.isnan(numbers).any()
    assert 0.0 <= found.p_value <= 1.0
    assert abs(found.correlation) <= 1.0 + 1e-9
