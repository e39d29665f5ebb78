"""Figures from plain arrays, in free-fall units; nothing here opens files or changes global settings."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from numpy.typing import NDArray

from rbsim.diagnostics.nusselt import DEFINITIONS
from rbsim.diagnostics.quantities import HISTORY

Array = NDArray[np.float64]

#: Colours that colour-blind readers can tell apart (Okabe & Ito 2008, Color Universal Design), and dashes.
COLOURS = ("#0072B2", "#D55E00", "#009E73", "#CC79A7", "#E69F00", "#56B4E9")
DASHES: tuple[str | tuple[int, tuple[int, ...]], ...] = (
    "-", "--", "-.", ":", (0, (5, 1, 1, 1)), (0, (3, 1, 1, 1, 1, 1)),
)  # fmt: skip
TIME_LABEL = "time (free-fall times)"
SYMBOLS = {quantity.name: quantity.symbol for quantity in HISTORY}


@dataclass(frozen=True)
class Trace:
    """A thermometer record for a figure.

    Parameters
    ----------
    name : str
        Label.
    x, z : float
        Place in H.
    time, temperature : ndarray, shape (samples,)
        Record in free-fall times and Δ.
    """

    name: str
    x: float
    z: float
    time: Array
    temperature: Array


def temperature_field(
    x: Array, z: Array, temperature: Array, period: float, title: str, traces: Sequence[Trace] = ()
) -> Figure:
    """Draw a temperature field with the places of the thermometers.

    Parameters
    ----------
    x, z : ndarray, shapes (nx,) and (nz,)
        Grid points in H.
    temperature : ndarray, shape (nz, nx)
        In units of Δ above the top plate.
    period : float
        Γ in H.
    title : str
        Headline.
    traces : sequence of Trace
        Thermometers to mark.
    """
    width = 8.0
    height = min(10.0, max(2.4, 1.3 + (width - 1.6) / period))
    figure = Figure(figsize=(width, height), layout="constrained")
    axes = figure.add_subplot()
    edges_x = np.append(x, period)
    edges_z = np.concatenate([[0.0], 0.5 * (z[1:] + z[:-1]), [1.0]])
    mesh = axes.pcolormesh(edges_x, edges_z, temperature, cmap="RdBu_r", vmin=0, vmax=1, rasterized=True)
    for number, trace in enumerate(traces):
        axes.plot(trace.x, trace.z, "o", ms=7, mfc="white", mec="black")
        axes.annotate(str(number + 1), (trace.x, trace.z), xytext=(6, -4), textcoords="offset points")
    axes.set(aspect="equal", xlim=(0, period), ylim=(0, 1), xlabel="x (H)", ylabel="z (H)", title=title)
    figure.colorbar(mesh, ax=axes, label=r"temperature ($\Delta$)", shrink=0.8)
    if traces:
        names = "   ".join(f"{i + 1} {trace.name}" for i, trace in enumerate(traces))
        figure.supxlabel(names, fontsize="small")
    return figure


def nusselt_history(history: Mapping[str, Array], window: tuple[float, float] | None, title: str) -> Figure:
    """Draw the Nusselt number by all definitions over time.

    Parameters
    ----------
    history : mapping of str to ndarray, shape (samples,)
        ``time`` and the Nusselt numbers.
    window : tuple of float or None
        Start and end of the averages.
    title : str
        Headline.
    """
    figure = Figure(figsize=(8.0, 4.0), layout="constrained")
    axes = figure.add_subplot()
    for name, colour, dash in zip(DEFINITIONS, COLOURS, DASHES, strict=True):
        quantity = f"nusselt_{name}"
        axes.plot(history["time"], history[quantity], color=colour, ls=dash, lw=1.2, label=SYMBOLS[quantity])
    if window is not None:
        axes.axvspan(*window, color="0.92", zorder=0, label="averaged")
    axes.set(xlabel=TIME_LABEL, ylabel="Nusselt number", title=title)
    _limit_to_bulk(axes, history)
    _legend_outside(axes)
    return figure


def _limit_to_bulk(axes: Axes, history: Mapping[str, Array]) -> None:
    """Keep the first overshoot from squeezing the rest."""
    values = np.concatenate([history[f"nusselt_{name}"] for name in DEFINITIONS])
    low, high = np.percentile(values, [0.5, 99.5])
    margin = 0.1 * (high - low) or 0.1
    axes.set_ylim(low - margin, high + margin)


def thermometer_traces(traces: Sequence[Trace], title: str) -> Figure:
    """Draw the temperature records of all thermometers below each other.

    Parameters
    ----------
    traces : sequence of Trace
        At least one.
    title : str
        Headline.
    """
    figure = Figure(figsize=(8.0, 1.2 + 1.5 * len(traces)), layout="constrained")
    panels = figure.subplots(len(traces), 1, sharex=True, squeeze=False)[:, 0]
    for panel, trace, colour in zip(panels, traces, COLOURS * (len(traces) // 6 + 1), strict=False):
        panel.plot(trace.time, trace.temperature, color=colour, lw=0.9)
        panel.set_title(f"{trace.name}: x = {trace.x:g} H, z = {trace.z:g} H", fontsize="small", loc="left")
        panel.set_ylabel(r"T ($\Delta$)")
    panels[-1].set_xlabel(TIME_LABEL)
    figure.suptitle(title)
    return figure


def mean_profiles(z: Array, profiles: Mapping[str, Array], title: str) -> Figure:
    """Draw time-averaged profiles of temperature, heat flux and fluctuations.

    Parameters
    ----------
    z : ndarray, shape (nz,)
        Heights in H.
    profiles : mapping of str to ndarray, shape (nz,)
        Time averages by the names of the quantities table.
    title : str
        Headline.
    """
    figure = Figure(figsize=(8.0, 4.0), layout="constrained")
    left, middle, right = figure.subplots(1, 3, sharey=True)
    left.plot(profiles["temperature_profile"], z, color=COLOURS[0])
    left.set(xlabel=r"mean temperature ($\Delta$)", ylabel="z (H)", ylim=(0, 1))
    middle.plot(profiles["nusselt_profile"], z, color=COLOURS[1])
    middle.set(xlabel="heat flux Nu(z)")
    spread = max(0.05 * profiles["nusselt_profile"].mean(), np.ptp(profiles["nusselt_profile"]))
    centre = profiles["nusselt_profile"].mean()
    middle.set_xlim(centre - spread, centre + spread)
    for name, label, dash in (
        ("temperature_rms_profile", r"T ($\Delta$)", "-"),
        ("horizontal_velocity_rms_profile", "u (free-fall vel.)", "--"),
        ("vertical_velocity_rms_profile", "w (free-fall vel.)", ":"),
    ):
        right.plot(profiles[name], z, ls=dash, color=COLOURS[2], label=label)
    right.set(xlabel="rms")
    right.legend(fontsize="small", loc="lower center", bbox_to_anchor=(0.5, 1.0), frameon=False)
    figure.suptitle(title)
    return figure


def _legend_outside(axes: Axes) -> None:
    axes.legend(loc="center left", bbox_to_anchor=(1.0, 0.5), frameon=False)
