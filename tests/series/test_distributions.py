"""Probability densities and their errors."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from scipy import stats

from rbsim.series.distributions import MOST_BINS, probability_density


def test_densities_are_the_histogram():
    record = np.random.default_rng(1).standard_normal(777) * 3.0 + 1.0
    found = probability_density(record, 1.0, 13)
    density, edges = np.histogram(record, 13, density=True)
    assert found.edges == pytest.approx(edges, rel=1e-12, abs=1e-12)
    assert found.density == pytest.approx(density, rel=1e-9)
    assert found.centres == pytest.approx(0.5 * (edges[1:] + edges[:-1]))


def test_intervals_hold_the_known_density(autoregressive):
    inside = []
    for record in autoregressive(0.8, 6000, 60, seed=2):
        found = probability_density(record, 1.0)
        true = np.diff(stats.norm.cdf(found.edges)) / np.diff(found.edges)
        inside.append(np.abs(found.density - true) <= found.ci95)
    # edges at the extremes of the record itself favour the outer bins a little
    assert 0.91 < np.mean(np.concatenate(inside)) < 0.98


def test_bins_of_white_noise_are_those_of_freedman_and_diaconis():
    record = np.random.default_rng(5).standard_normal(2000)
    expected = np.histogram_bin_edges(record, "fd").size - 1
    # the cube root of an effective number known to 20 %
    assert probability_density(record, 1.0).density.size == pytest.approx(expected, rel=0.1)


def test_more_effective_samples_give_more_bins(autoregressive):
    slow, fast = autoregressive(0.95, 4000, 1, seed=3)[0], autoregressive(0.0, 4000, 1, seed=3)[0]
    assert (
        probability_density(slow, 1.0).density.size < probability_density(fast, 1.0).density.size <= MOST_BINS
    )


def test_an_empty_bin_has_the_rule_of_three():
    record = np.r_[np.random.default_rng(4).random(500), 10.0]
    found = probability_density(record, 1.0, 10)
    assert found.density[5] == 0.0
    share = found.ci95[5] * (found.edges[1] - found.edges[0])
    assert 2.0 / 501 < share < 6.0 / 501


def test_a_constant_record_is_one_bin():
    found = probability_density(np.full(20, -4.0), 1.0)
    assert found.density * np.diff(found.edges) == pytest.approx(1.0)
    assert np.isinf(found.ci95).all()


def test_a_wrong_number_of_bins_is_refused():
    with pytest.raises(ValueError, match="bins 0"):
        probability_density(np.arange(9.0), 1.0, 0)


@settings(max_examples=60, deadline=None)
# rounded, because the density of a record narrower than 1e-308 overflows
@given(arrays(np.float64, st.integers(2, 60), elements=st.floats(-1e100, 1e100).map(lambda x: round(x, 9))))
def test_it_sums_to_one(values):
    found = probability_density(values, 1.0)
    assert np.sum(found.density * np.diff(found.edges)) == pytest.approx(1.0, rel=1e-6)
    assert not np.isnan(found.ci95).any()
    assert 1 <= found.density.size <= MOST_BINS
