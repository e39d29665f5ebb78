"""Figures are drawn with units in their labels, whatever the shape of the cell, and touch no settings."""

from __future__ import annotations

import matplotlib as mpl
import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from rbsim.diagnostics.nusselt import DEFINITIONS
from rbsim.report.figures import (
    MOST_NUMBERS,
    MOST_STRIPS,
    MOST_TRACES,
    Trace,
    mean_profiles,
    nusselt_history,
    temperature_field,
    thermometer_traces,
)

TIME = np.linspace(0, 10, 101)
TRACES = [Trace("centre", 1.0, 0.5, TIME, np.sin(TIME)), Trace("layer", 0.2, 0.05, TIME, np.cos(TIME))]
PROFILES = (
    "temperature_profile",
    "nusselt_profile",
    "temperature_rms_profile",
    "horizontal_velocity_rms_profile",
    "vertical_velocity_rms_profile",
)


def _labels(figure: Figure) -> list[str]:
    labels = [label.get_text() for axes in figure.axes for label in (axes.xaxis.label, axes.yaxis.label)]
    return [*filter(None, labels), figure.get_supylabel()]


def _field(period: float, traces: list[Trace] | None = None, nx: int = 32, nz: int = 16) -> Figure:
    x, z = np.arange(nx) * period / nx, (1 - np.cos(np.pi * (np.arange(nz) + 0.5) / nz)) / 2
    temperature = 0.5 + 0.4 * np.cos(2 * np.pi * x / period) * np.sin(np.pi * z)[:, None]
    return temperature_field(x, z, temperature, period, "title", traces or [])


def _history(scale: float = 1.0) -> dict[str, np.ndarray]:
    return {"time": TIME} | {f"nusselt_{name}": 8 + scale * np.sin(TIME) for name in DEFINITIONS}


def test_a_field_shows_units_thermometers_and_the_full_cell() -> None:
    figure = _field(2.0, TRACES)
    cell, bar = figure.axes
    assert (cell.get_xlim(), cell.get_ylim()) == ((0, 2), (0, 1))
    assert {text.get_text() for text in cell.texts} == {"1", "2"}
    assert cell.get_xlabel() == "x (H)\n1 centre    2 layer"
    assert cell.get_ylabel() == "z (H)"
    assert bar.get_xlabel() == r"temperature $T$ ($\Delta$)"


def test_a_field_is_painted_where_it_belongs() -> None:
    figure = _field(2.0)
    (image,) = figure.axes[0].images
    left, right, bottom, top = image.get_extent()
    picture = np.asarray(image.get_array())
    rows, columns = picture.shape
    x = left + (np.arange(columns) + 0.5) * (right - left) / columns
    z = bottom + (np.arange(rows) + 0.5) * (top - bottom) / rows
    truth = 0.5 + 0.4 * np.cos(np.pi * x) * np.sin(np.pi * z)[:, None]
    # linear interpolation between 16 heights; outside the first and last one the value is kept
    np.testing.assert_allclose(picture, truth, atol=0.01)
    assert left <= 0.0
    assert right >= 2.0


@pytest.mark.parametrize(
    ("period", "strips"), [(0.05, 1), (2.0, 1), (6.0, 1), (20.0, 4), (200.0, MOST_STRIPS)]
)
def test_long_cells_are_cut_into_strips_that_cover_them(period: float, strips: int) -> None:
    figure = _field(period, nx=256)
    cells = [axes for axes in figure.axes if axes.get_ylabel() == "z (H)"]
    assert len(cells) == strips
    edges = np.array([axes.get_xlim() for axes in cells])
    np.testing.assert_allclose(edges[0, 0], 0.0)
    np.testing.assert_allclose(edges[-1, 1], period)
    np.testing.assert_allclose(edges[1:, 0], edges[:-1, 1])
    assert all(axes.get_aspect() == 1.0 for axes in cells)


@pytest.mark.parametrize("number", [1, MOST_NUMBERS, MOST_NUMBERS + 1])
def test_each_thermometer_is_marked_once(number: int) -> None:
    figure = _field(20.0, [Trace(f"t{i}", 20.0 * i / number, 0.5, TIME, TIME) for i in range(number)])
    assert sum(len(axes.lines) for axes in figure.axes) == number
    numbered = sum(len(axes.texts) for axes in figure.axes)
    assert numbered == (number if number <= MOST_NUMBERS else 0)


def test_the_history_draws_all_definitions_apart_and_the_window() -> None:
    axes = nusselt_history(_history(), (2.0, 10.0), "title").axes[0]
    assert axes.get_xlabel() == "time (free-fall times)"
    assert len({(line.get_color(), str(line.get_linestyle())) for line in axes.lines}) == 6
    assert axes.patches


def test_the_history_says_what_it_cuts_off() -> None:
    history = _history()
    history["nusselt_midplane"][3] = 70.0
    axes = nusselt_history(history, (2.0, 10.0), "title").axes[0]
    assert axes.get_ylim()[1] < 12.0
    assert "values up to 70 lie above the frame" in axes.get_xlabel()


@pytest.mark.parametrize("size", [1, 2])
def test_the_shortest_histories_can_be_drawn(size: int) -> None:
    history = {name: values[:size] for name, values in _history(0.0).items()}
    FigureCanvasAgg(nusselt_history(history, None, "title")).draw()


def test_traces_get_a_panel_each_up_to_a_limit() -> None:
    figure = thermometer_traces(TRACES, "title")
    assert [axes.get_title(loc="left").split(":")[0] for axes in figure.axes] == ["1 centre", "2 layer"]
    many = thermometer_traces(TRACES * MOST_TRACES, "title")
    assert len(many.axes) == MOST_TRACES
    assert f"first {MOST_TRACES} of {2 * MOST_TRACES} thermometers" in many.get_suptitle()


def test_profiles_stand_on_heights() -> None:
    z = np.linspace(0, 1, 9)
    figure = mean_profiles(z, dict.fromkeys(PROFILES, 1 + z), "title")
    assert [len(axes.lines) for axes in figure.axes] == [1, 1, 1, 2]
    for axes in figure.axes:
        for line in axes.lines:
            np.testing.assert_array_equal(line.get_ydata(), z)


@pytest.mark.parametrize("kind", ["field", "history", "traces", "profiles"])
def test_every_label_has_its_unit_and_nothing_leaves_the_figure(kind: str) -> None:
    z = np.linspace(0, 1, 9)
    figure = {
        "field": lambda: _field(2.0, TRACES),
        "history": lambda: nusselt_history(_history(), (2.0, 10.0), "title"),
        "traces": lambda: thermometer_traces(TRACES, "title"),
        "profiles": lambda: mean_profiles(z, dict.fromkeys(PROFILES, 1 + z), "title"),
    }[kind]()
    pure = ("Nusselt number", "heat flux")
    assert all("(" in label or label.startswith(pure) for label in _labels(figure) if label)
    canvas = FigureCanvasAgg(figure)
    canvas.draw()
    drawn, frame = figure.get_tightbbox(canvas.get_renderer()), figure.bbox_inches.padded(0.02)
    assert frame.x0 <= drawn.x0 < drawn.x1 <= frame.x1
    assert frame.y0 <= drawn.y0 < drawn.y1 <= frame.y1


def test_drawing_leaves_the_settings_of_others_alone() -> None:
    before = dict(mpl.rcParams)
    thermometer_traces(TRACES, "title")
    assert dict(mpl.rcParams) == before
