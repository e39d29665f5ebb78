"""Rates of excursions against counting by hand and Rice's formula."""

import math

import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from rbsim.series.excursions import excursion_rate, excursion_starts


def slow_starts(values, begin, end):
    out, state = [], 0
    for value in values:
        started = value > begin and state == -1
        state = 1 if value > begin else -1 if value <= end else state
        out.append(started)
    return np.array(out)


@settings(max_examples=100, deadline=None)
@given(arrays(np.float64, st.integers(2, 60), elements=st.floats(-3, 3)))
@example(np.array([0.7, 2.0, 0.0, 2.0]))
def test_starts_are_those_of_a_walk_through_the_record(values):
    assert np.array_equal(excursion_starts(values, 1.0, 0.4), slow_starts(values, 1.0, 0.4))


def test_rate_of_a_smooth_gaussian_record_is_rices(smooth):
    records = smooth(4000, 200, seed=1)
    found = [excursion_rate(record, 0.1, "upper", 1.0, 1.0) for record in records]
    # upcrossings of one rms: Rice 1944, with the correlation at one sample, exact for a sampled Gaussian
    # record at level 0 and to second order in the step at others
    one = np.mean(records[:, 1:] * records[:, :-1])
    rice = math.acos(one) / (2.0 * math.pi * 0.1) * math.exp(-0.5)
    assert np.mean([e.mean for e in found]) == pytest.approx(rice, rel=0.03)
    assert np.mean([abs(e.mean - rice) <= e.ci95 for e in found]) > 0.93


def test_noise_at_the_threshold_counts_once():
    slow = np.tile(np.r_[np.zeros(50), np.full(50, 3.0)], 12)
    noise = 0.2 * np.random.default_rng(2).standard_normal(slow.size)
    ragged = np.where(slow > 0.0, 1.5 + noise, noise)
    once = excursion_rate(ragged, 1.0, "upper", 0.8, 0.0)
    assert once.mean * slow.size == pytest.approx(12.0)
    assert excursion_rate(ragged, 1.0, "upper", 0.8, 1.0).mean > 2.0 * once.mean


def test_sides_mirror():
    record = np.random.default_rng(3).gamma(1.0, size=2000)
    assert excursion_rate(record, 1.0, "upper").mean == excursion_rate(-record, 1.0, "lower").mean
    assert excursion_rate(record, 1.0, "lower").mean == 0.0


def test_no_excursion_has_the_rule_of_three():
    found = excursion_rate(np.sin(np.arange(500) / 5.0), 0.2, "upper")
    assert found.mean == 0.0
    assert found.ci95 == pytest.approx(3.0 / (500 * 0.2))
    assert excursion_rate(np.full(20, 1.0), 1.0, "upper").mean == 0.0


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (("up", 2.0, 0.5), "side 'up'"),
        (("upper", 0.0, 0.5), "threshold 0"),
        (("upper", 2.0, 1.5), "rearm 1.5"),
    ],
)
def test_wrong_input_is_refused(arguments, message):
    with pytest.raises(ValueError, match=message):
        excursion_rate(np.arange(9.0), 1.0, *arguments)


@settings(max_examples=60, deadline=None)
@given(arrays(np.float64, st.integers(2, 60), elements=st.floats(-1e100, 1e100)))
def test_no_finite_record_gives_nan(values):
    found = excursion_rate(values, 0.5, "upper", 1.0)
    assert not np.isnan([found.mean, found.standard_error, found.ci95]).any()
    assert 0.0 <= found.mean <= 1.0
