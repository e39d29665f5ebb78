"""The summary: window, means with their balances, verdict."""

from __future__ import annotations

import json

import numpy as np
import pytest

from rbsim.diagnostics.nusselt import DEFINITIONS
from rbsim.diagnostics.quantities import HISTORY
from rbsim.errors import ConfigError
from rbsim.simulation.summary import average_history, judge

KAPPA = 1e-3


def invented_history(samples: int = 4000) -> dict[str, np.ndarray]:
    """Return an invented record: a transient of 40 free-fall times, then oscillations about Nu = 8."""
    rng = np.random.default_rng(5)
    time = 0.1 * np.arange(samples)
    noise = np.convolve(rng.standard_normal(samples + 50), np.ones(51) / 51, "valid")
    decay = 5 * np.exp(-time / 8)
    history = {q.name: np.zeros(samples) for q in HISTORY} | {"time": time}
    for i, name in enumerate(DEFINITIONS):
        wave = 0.5 * i * np.sin(time)
        history[f"nusselt_{name}"] = 8 + decay + noise + wave
        history[f"storage_{name}"] = -wave
    # what is stored is what the rates say
    history["kinetic_energy"] = KAPPA * np.cumsum(history["storage_kinetic"]) * 0.1 - 0.1 * np.exp(-time / 8)
    history["temperature_mean"] = KAPPA * np.cumsum(history["storage_top"] - history["storage_bottom"]) * 0.1
    history["reynolds"] = 300 + noise
    history["roll_pairs"] = np.where(time < 300, 1.0, 2.0)
    history["tail_x"][:] = 1e-5
    return history


def test_window_starts_behind_the_transient_and_storage_balances_the_definitions() -> None:
    summary = average_history(invented_history(), KAPPA)
    assert summary is not None
    assert 20 < summary.start < 120
    assert summary.end == pytest.approx(399.9)
    assert summary.transient.trustworthy
    for value in summary.nusselt.values():
        assert value.balanced == pytest.approx(summary.nusselt["volume"].balanced, abs=0.05)
        assert abs(value.raw.mean - 8) < 3 * value.raw.ci95 + 0.05
    assert summary.agreement.verdict == "agree"
    assert summary.roll_pairs[0] == 1
    assert 0.6 < summary.roll_pairs[1] < 0.9


def test_json_holds_the_promised_keys() -> None:
    summary = average_history(invented_history(), KAPPA)
    assert summary is not None
    table = json.loads(json.dumps(summary.as_dict(), allow_nan=False))
    for name in DEFINITIONS:
        assert isinstance(table["nusselt"][name]["mean"], float)
        assert table["nusselt"][name]["ci95"] > 0
    assert table["reynolds"]["mean"] == pytest.approx(300, abs=0.5)
    assert table["agreement"]["verdict"] == "agree"
    assert table["agreement"]["spread"] < 0.01
    assert table["window"]["start"] == summary.start


def test_an_error_that_is_unknown_is_null_and_a_given_start_is_kept() -> None:
    history = {name: values[:12] for name, values in invented_history().items()}
    summary = average_history(history, KAPPA, start=0.5)
    assert summary is not None
    assert summary.start == pytest.approx(0.5)
    assert summary.as_dict()["nusselt"]["bottom"]["ci95"] is None
    assert average_history({name: values[:3] for name, values in history.items()}, KAPPA) is None


@pytest.mark.parametrize(
    ("values", "verdict"), [([8.0, 8.05], "agree"), ([8.0, 8.2], "doubtful"), ([8.0, 8.5], "disagree")]
)
def test_verdict_follows_the_spread(values: list[float], verdict: str) -> None:
    agreement = judge(values, 0.0)
    assert agreement.verdict == verdict
    assert judge([8.0, 8.0], values[1] - values[0]).verdict == verdict
    assert agreement.spread == pytest.approx((values[1] - values[0]) / np.mean(values))


def test_a_steady_offset_of_one_definition_is_balanced_by_its_storage_alone() -> None:
    history = invented_history()
    history["nusselt_thermal"] = history["nusselt_thermal"] + 1.0
    history["storage_thermal"] = history["storage_thermal"] - 1.0
    summary = average_history(history, KAPPA)
    assert summary is not None
    assert summary.agreement.verdict == "agree"
    assert summary.nusselt["thermal"].raw.mean > 8.9
    history["storage_thermal"] = history["storage_thermal"] + 1.0
    unbalanced = average_history(history, KAPPA)
    assert unbalanced is not None
    assert unbalanced.agreement.verdict == "disagree"
    assert "grid" in unbalanced.agreement.advice


def test_energy_that_appears_without_a_rate_is_a_drift() -> None:
    history = invented_history()
    history["kinetic_energy"] = history["kinetic_energy"] + 2e-3 * (history["time"] - 100)
    summary = average_history(history, KAPPA, start=100.0)
    assert summary is not None
    assert summary.agreement.drift == pytest.approx(2.0 / 8.0, rel=0.05)
    assert summary.agreement.verdict == "disagree"
    assert "time.courant" in summary.agreement.advice


def test_a_start_behind_the_record_is_refused() -> None:
    with pytest.raises(ConfigError, match="before the end"):
        average_history(invented_history(), KAPPA, start=399.8)
