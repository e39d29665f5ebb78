"""The summary: window, means with their balances, verdict."""

from __future__ import annotations

import json

import numpy as np
import pytest

from rbsim.diagnostics.nusselt import DEFINITIONS
from rbsim.diagnostics.quantities import HISTORY
from rbsim.simulation.summary import judge, summarise


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
    history["kinetic_energy"] = 0.1 - 0.1 * np.exp(-time / 8) + 0.001 * noise
    history["reynolds"] = 300 + noise
    history["roll_pairs"] = np.where(time < 300, 1.0, 2.0)
    history["tail_x"][:] = 1e-5
    return history


def test_window_starts_behind_the_transient_and_storage_balances_the_definitions() -> None:
    summary = summarise(invented_history())
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
    summary = summarise(invented_history())
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
    summary = summarise(history, start=0.5)
    assert summary is not None
    assert summary.start == pytest.approx(0.5)
    assert summary.as_dict()["nusselt"]["bottom"]["ci95"] is None
    assert summarise({name: values[:3] for name, values in history.items()}) is None


@pytest.mark.parametrize(
    ("values", "verdict"), [([8.0, 8.05], "agree"), ([8.0, 8.2], "doubtful"), ([8.0, 8.5], "disagree")]
)
def test_verdict_follows_the_spread(values: list[float], verdict: str) -> None:
    agreement = judge(values)
    assert agreement.verdict == verdict
    assert agreement.spread == pytest.approx((values[1] - values[0]) / np.mean(values))
