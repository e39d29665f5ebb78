"""The end of the transient on decays with noise, on drifts, on several records."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from rbsim.series.averages import mean_with_error
from rbsim.series.transient import end_of_transient, latest_transient, marginal_standard_error


def slow_criterion(values):
    n = values.size
    scale = np.abs(values - values[n // 2 :].mean()).max()
    return np.array([np.var(values[d:]) / (n - d) for d in range(n)]) / scale**2


def test_the_criterion_is_variance_over_number():
    values = np.random.default_rng(1).standard_normal(60) + 4.0 * np.exp(-np.arange(60) / 7.0)
    assert marginal_standard_error(values) == pytest.approx(slow_criterion(values), rel=1e-10, abs=1e-16)


@pytest.mark.parametrize(
    ("phi", "amplitude", "decay"), [(0.9, 20.0, 100.0), (0.9, 5.0, 200.0), (0.5, 20.0, 60.0)]
)
def test_a_decay_under_noise_is_cut(autoregressive, phi, amplitude, decay):
    signal = amplitude * np.exp(-np.arange(5000) / decay)
    records = autoregressive(phi, 5000, 200, seed=2) + signal
    found = [end_of_transient(record) for record in records]
    assert np.mean([t.trustworthy for t in found]) > 0.97
    # when the decay has fallen to the noise, and seldom more than a fifth of the record later
    fallen = decay * np.log(amplitude)
    assert 0.7 * fallen < np.median([t.index for t in found]) < fallen + 2.0 * decay
    assert np.quantile([t.index for t in found], 0.9) < fallen + 1000
    rest = [mean_with_error(r[t.index :], 1.0) for r, t in zip(records, found, strict=True)]
    # a cut chosen by the record itself leaves a little of the decay: 3 % below the nominal band at most
    assert np.mean([abs(e.mean) <= e.ci95 for e in rest]) >= 0.89


def test_a_steady_record_is_kept(autoregressive):
    found = [end_of_transient(record) for record in autoregressive(0.9, 4000, 200, seed=3)]
    assert np.mean([t.trustworthy for t in found]) > 0.97
    assert np.median([t.index for t in found]) == 0
    assert np.mean([t.index > 1000 for t in found]) < 0.05


@pytest.mark.parametrize("record", [np.linspace(0.0, 1.0, 1000), np.exp(np.arange(1000) / 200.0)])
def test_a_drift_to_the_end_is_flagged_and_half_is_kept(record):
    found = end_of_transient(record)
    assert not found.trustworthy
    assert found.index <= 500
    assert found.reason


def test_a_slow_drift_under_noise_is_flagged(autoregressive):
    drift = 3.0 * np.exp(-np.arange(2000) / 1500.0)
    found = [end_of_transient(record + drift) for record in autoregressive(0.5, 2000, 100, seed=4)]
    assert np.mean([t.trustworthy for t in found]) < 0.1


def test_a_run_to_a_steady_state_is_trusted():
    record = 2.0 + np.exp(-np.arange(2000) / 100.0)
    found = end_of_transient(record)
    assert found.trustworthy
    assert found.reason == "settles to a constant"
    assert found.index <= 1000
    assert mean_with_error(record[found.index :], 1.0).ci95 < 1e-4


def test_a_constant_record_has_no_transient():
    assert end_of_transient(np.full(200, 1.5)).index == 0
    assert end_of_transient(np.full(200, 1.5)).trustworthy


def test_too_few_batches_are_flagged():
    found = end_of_transient(np.zeros(99))
    assert (found.index, found.trustworthy) == (0, False)
    assert "20 needed" in found.reason


def test_one_long_wave_is_too_short_to_judge():
    assert not end_of_transient(np.sin(np.arange(1000) / 150.0)).trustworthy


def test_the_latest_of_several_records_decides(autoregressive):
    noise = autoregressive(0.5, 4000, 2, seed=5)
    early = noise[0] + 30.0 * np.exp(-np.arange(4000) / 20.0)
    late = noise[1] + 30.0 * np.exp(-np.arange(4000) / 200.0)
    found = latest_transient({"nusselt": early, "kinetic energy": late})
    assert found.record == "kinetic energy"
    assert found.index == end_of_transient(late).index > end_of_transient(early).index
    assert found.trustworthy


def test_one_doubtful_record_spoils_the_trust(autoregressive):
    steady = autoregressive(0.5, 1000, 1, seed=6)[0]
    found = latest_transient({"steady": steady, "ramp": np.linspace(0.0, 1.0, 1000)})
    assert not found.trustworthy
    assert found.record == "ramp"


def test_wrong_input_is_refused():
    with pytest.raises(ValueError, match="batch 0"):
        end_of_transient(np.zeros(200), 0)
    with pytest.raises(ValueError, match="at least one"):
        latest_transient({})
    with pytest.raises(ValueError, match="one length"):
        latest_transient({"a": np.zeros(200), "b": np.zeros(201)})


@settings(max_examples=60, deadline=None)
@given(arrays(np.float64, st.integers(2, 300), elements=st.floats(-1e150, 1e150)))
def test_never_more_than_half_is_cut(values):
    found = end_of_transient(values)
    assert 0 <= found.index <= values.size / 2


@settings(max_examples=40, deadline=None)
@given(seed=st.integers(0, 10**6), shift=st.floats(-50, 50), factor=st.floats(0.01, 100))
def test_shift_and_scale_do_not_move_the_end(seed, shift, factor):
    values = np.random.default_rng(seed).standard_normal(300) + 5.0 * np.exp(-np.arange(300) / 15.0)
    before, after = end_of_transient(values), end_of_transient(shift - factor * values)
    assert (before.index, before.trustworthy) == (after.index, after.trustworthy)
