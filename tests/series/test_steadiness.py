"""Bounds on records that settle, and none on those that do not."""

import numpy as np
import pytest

from rbsim.series.steadiness import settled_half_width


@pytest.mark.parametrize("decay", [20.0, 100.0, 300.0, 800.0])
@pytest.mark.parametrize("size", [1.0, -1e-6])
def test_the_bound_holds_the_limit_of_a_decay(decay, size):
    record = 5.0 + size * np.exp(-np.arange(1000) / decay)
    bound = settled_half_width(record)
    assert abs(record.mean() - 5.0) <= bound
    assert bound <= 1.6 * abs(size)


def test_the_bound_holds_the_limit_of_a_decaying_oscillation():
    t = np.arange(2000)
    record = 1.0 + np.exp(-t / 200.0) * np.cos(t / 10.0)
    assert abs(record.mean() - 1.0) <= settled_half_width(record) < 0.1


def test_rounding_after_the_decay_does_not_spoil_the_bound():
    noise = 1e-12 * np.random.default_rng(1).standard_normal(4000)
    record = 3.0 + np.exp(-np.arange(4000) / 50.0) + noise
    assert settled_half_width(record[2000:]) < 1e-8


def test_a_constant_record_has_settled():
    assert settled_half_width(np.full(40, 2.0)) == 0.0


@pytest.mark.parametrize(
    "record",
    [
        np.linspace(0.0, 1.0, 500),
        np.exp(np.arange(500) / 50.0),
        np.sin(np.arange(500) / 20.0),
        1.0 - np.exp(-np.arange(31) / 5.0),
        np.exp(-np.arange(500) / 2000.0),
        np.r_[np.zeros(400), np.linspace(0.0, 1.0, 100)],
    ],
    ids=["ramp", "growth", "oscillation", "too few samples", "decay too slow to see", "late start"],
)
def test_no_bound_for_records_that_do_not_settle(record):
    assert settled_half_width(record) is None


def test_wandering_records_do_not_pass(autoregressive):
    walks = np.cumsum(np.random.default_rng(2).standard_normal((1500, 64)), axis=1)
    assert sum(settled_half_width(walk) is not None for walk in walks) <= 2
    assert all(settled_half_width(r) is None for r in autoregressive(0.95, 200, 1000, seed=3))
