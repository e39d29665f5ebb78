"""Power spectra against scipy, Parseval, and a known spectrum."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from scipy import signal, stats

from rbsim.series.spectra import chi_squared_band, power_spectrum


@pytest.mark.parametrize(("n", "segment"), [(1000, 128), (1000, 125), (640, 80), (64, 64)])
def test_densities_are_scipys(n, segment):
    record = np.random.default_rng(n).standard_normal(n).cumsum()
    found = power_spectrum(record, 0.2, segment)
    frequency, density = signal.welch(
        record, 5.0, "hann", segment, noverlap=segment // 2, detrend="constant", scaling="density"
    )
    assert found.frequency == pytest.approx(frequency[1:], rel=1e-12)
    assert found.density == pytest.approx(density[1:], rel=1e-9)


def test_it_sums_to_the_variance(autoregressive):
    ratios = []
    for record in autoregressive(0.7, 8192, 40, seed=1):
        found = power_spectrum(3.0 * record, 0.5)
        ratios.append(found.density.sum() * found.frequency[0] / (9.0 * record.var()))
    # the segments' own means take 1/256 of the variance per correlation time away
    assert np.mean(ratios) == pytest.approx(1.0, abs=0.02)


def test_a_sine_holds_its_power_at_its_frequency():
    t = 0.1 * np.arange(4000)
    found = power_spectrum(2.0 * np.sin(2 * np.pi * 0.5 * t), 0.1, 500)
    peak = np.argmax(found.density)
    assert found.frequency[peak] == pytest.approx(0.5, rel=1e-9)
    assert found.density[peak - 1 : peak + 2].sum() * found.frequency[0] == pytest.approx(2.0, rel=1e-6)


def test_the_band_holds_the_known_spectrum(autoregressive):
    found = [power_spectrum(r, 0.5) for r in autoregressive(0.8, 8192, 200, seed=2)]
    f = found[0].frequency[:-1]
    true = 2 * 0.5 * (1 - 0.8**2) / np.abs(1 - 0.8 * np.exp(-2j * np.pi * f * 0.5)) ** 2
    inside = np.mean([(s.lower[:-1] <= true) & (true <= s.upper[:-1]) for s in found], axis=0)
    assert found[0].segments == 15
    assert inside.mean() == pytest.approx(0.95, abs=0.01)
    assert inside.min() > 0.87


def test_the_largest_frequency_of_an_even_segment_has_half_the_freedom():
    even = power_spectrum(np.random.default_rng(3).standard_normal(800), 1.0, 100)
    odd = power_spectrum(np.random.default_rng(3).standard_normal(800), 1.0, 101)
    assert even.degrees_of_freedom[-1] == 0.5 * even.degrees_of_freedom[0]
    assert odd.degrees_of_freedom[-1] == odd.degrees_of_freedom[0]


def test_degrees_of_freedom():
    record = np.random.default_rng(4).standard_normal(1000)
    assert power_spectrum(record, 1.0, 1000).degrees_of_freedom[0] == pytest.approx(2.0)
    # half-overlapping Hann segments count 18/19 of 2 each in the limit of many: Welch 1967
    many = power_spectrum(np.random.default_rng(5).standard_normal(64000), 1.0, 64)
    assert many.degrees_of_freedom[0] / (2 * many.segments) == pytest.approx(18.0 / 19.0, rel=1e-3)


def test_the_band_is_that_of_chi_squared():
    lower, upper = chi_squared_band(np.array([2.0]), np.array([9.0]))
    assert lower[0] == pytest.approx(2.0 * 9.0 / stats.chi2.ppf(0.975, 9.0))
    assert upper[0] == pytest.approx(2.0 * 9.0 / stats.chi2.ppf(0.025, 9.0))


def test_a_constant_record_has_no_power():
    assert not power_spectrum(np.full(100, 2.5), 1.0).density.any()


@pytest.mark.parametrize("segment", [7, 101])
def test_a_wrong_segment_is_refused(segment):
    with pytest.raises(ValueError, match=f"segment {segment}"):
        power_spectrum(np.zeros(100), 1.0, segment)


@settings(max_examples=60, deadline=None)
@given(arrays(np.float64, st.integers(8, 100), elements=st.floats(-1e100, 1e100)))
def test_no_finite_record_gives_nan(values):
    found = power_spectrum(values, 1.0)
    for array in (found.density, found.lower, found.upper):
        assert not np.isnan(array).any()
        assert np.all(array >= 0.0)


@settings(max_examples=30, deadline=None)
@given(seed=st.integers(0, 10**6), factor=st.floats(0.01, 100))
def test_scale_and_reversal(seed, factor):
    values = np.random.default_rng(seed).standard_normal(129)
    a = power_spectrum(values, 1.0, 65)
    assert power_spectrum(factor * values, 1.0, 65).density == pytest.approx(factor**2 * a.density, rel=1e-8)
    # 129 samples hold three segments of 65 at steps of 33 minus none left over only for odd overlap
    whole = power_spectrum(values, 1.0, 129)
    assert power_spectrum(values[::-1], 1.0, 129).frequency == pytest.approx(whole.frequency)
