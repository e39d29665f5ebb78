"""What is accepted as a record, and its split into mean, scale and rest."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from rbsim.series.records import checked_record, checked_spacing, standardise


@pytest.mark.parametrize(
    ("values", "message"),
    [
        (np.zeros((2, 3)), r"shape \(2, 3\): must be one-dimensional"),
        ([1.0], "1 samples: at least 2"),
        ([1.0, np.nan, 2.0], "nan at sample 1: must be finite"),
        ([1.0, 2.0, -np.inf], "-inf at sample 2: must be finite"),
    ],
)
def test_a_wrong_record_is_refused_with_the_reason(values, message):
    with pytest.raises(ValueError, match=message):
        checked_record(values)


@pytest.mark.parametrize("spacing", [0.0, -1.0, np.nan, np.inf])
def test_a_wrong_spacing_is_refused(spacing):
    with pytest.raises(ValueError, match="must be positive and finite"):
        checked_spacing(spacing)


def test_integers_become_floats():
    assert checked_record([1, 2, 3]).dtype == np.float64


@given(arrays(np.float64, st.integers(2, 50), elements=st.floats(-1e300, 1e300)))
def test_the_split_restores_the_record_without_overflow(record):
    parts = standardise(record)
    assert np.all(np.abs(parts.values) <= 1.0 + 1e-12)
    error = np.abs(parts.mean + parts.scale * parts.values - record)
    assert np.all(error <= 1e-13 * np.abs(record).max() + 1e-320)


def test_rounding_is_called_constant():
    record = 0.1 + np.array([0.0, 1.0, 0.0, -1.0]) * np.finfo(float).eps * 0.1
    parts = standardise(record)
    assert parts.scale == 0.0
    assert not parts.values.any()
    assert parts.mean == pytest.approx(0.1, rel=1e-15)
