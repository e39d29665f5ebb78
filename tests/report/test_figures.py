"""Figures are drawn with units in their labels and saved whole."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from matplotlib.figure import Figure

from rbsim.diagnostics.nusselt import DEFINITIONS
from rbsim.errors import ConfigError
from rbsim.report.figures import Trace, mean_profiles, nusselt_history, temperature_field, thermometer_traces
from rbsim.report.runfigures import save

TIME = np.linspace(0, 10, 50)
TRACES = [Trace("centre", 1.0, 0.5, TIME, np.sin(TIME)), Trace("layer", 0.2, 0.05, TIME, np.cos(TIME))]


def _labels(figure: Figure) -> str:
    texts = [
        text.get_text() for axes in figure.axes for text in (axes.xaxis.label, axes.yaxis.label, axes.title)
    ]
    return " ".join(texts)


def test_temperature_field_shows_units_thermometers_and_the_full_cell() -> None:
    z = (1 - np.cos(np.pi * (np.arange(8) + 0.5) / 8)) / 2
    figure = temperature_field(
        np.arange(16) / 8, z, np.random.default_rng(1).random((8, 16)), 2.0, "title", TRACES
    )
    axes = figure.axes[0]
    assert "x (H)" in _labels(figure)
    assert "z (H)" in _labels(figure)
    assert figure.axes[1].get_ylabel() == r"temperature ($\Delta$)"
    assert axes.get_xlim() == (0, 2)
    assert {text.get_text() for text in axes.texts} == {"1", "2"}
    assert "1 centre" in figure.get_supxlabel()


def test_nusselt_history_draws_all_definitions_and_the_window() -> None:
    history = {"time": TIME} | {f"nusselt_{name}": 8 + np.sin(TIME) for name in DEFINITIONS}
    figure = nusselt_history(history, (2.0, 10.0), "title")
    axes = figure.axes[0]
    assert len(axes.lines) == 6
    assert axes.get_xlabel() == "time (free-fall times)"
    assert len({(line.get_color(), str(line.get_linestyle())) for line in axes.lines}) == 6
    assert axes.patches


def test_traces_get_a_panel_each_and_profiles_three() -> None:
    assert len(thermometer_traces(TRACES, "title").axes) == 2
    z = np.linspace(0, 1, 9)
    names = ("temperature", "nusselt", "temperature_rms", "horizontal_velocity_rms", "vertical_velocity_rms")
    figure = mean_profiles(z, {f"{name}_profile": 1 + z for name in names}, "title")
    assert len(figure.axes) == 3
    assert "mean temperature" in _labels(figure)


@pytest.mark.parametrize(("kind", "magic"), [("png", b"\x89PNG"), ("svg", b"<?xml"), ("pdf", b"%PDF")])
def test_figures_are_saved_in_the_format_of_their_ending(tmp_path: Path, kind: str, magic: bytes) -> None:
    path = save(thermometer_traces(TRACES, "title"), tmp_path / f"figure.{kind}")
    assert path.read_bytes().startswith(magic)
    assert len(list(tmp_path.iterdir())) == 1


def test_an_unknown_ending_is_refused(tmp_path: Path) -> None:
    with pytest.raises(ConfigError, match=r"\.png"):
        save(thermometer_traces(TRACES, "title"), tmp_path / "figure.bmp")
