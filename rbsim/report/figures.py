"""Figures of a run from plain arrays, in free-fall units; nothing here opens files."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from math import ceil, floor
from typing import Any

import numpy as np
from matplotlib.artist import Artist
from matplotlib.axes import Axes
from matplotlib.colors import Normalize
from matplotlib.figure import Figure
from matplotlib.image import AxesImage
from numpy.typing import NDArray

from rbsim.diagnostics.nusselt import DEFINITIONS
from rbsim.diagnostics.quantities import HISTORY, PROFILES, READINGS
from rbsim.report.style import COLOURS, DASHES, TIME_LABEL, WIDTH, axis_label, legend_below, styled

Array = NDArray[np.float64]

#: Longest piece of a cell in H that is drawn in one strip, unless there were more strips than this.
LONGEST_STRIP, MOST_STRIPS = 6.0, 12

#: More thermometers are dots without a number in a field, and left out of the traces.
MOST_NUMBERS, MOST_TRACES = 24, 12

#: Rows of pixels in the picture of a field.
PICTURE_ROWS = 1024

_QUANTITIES = {quantity.name: quantity for quantity in (*HISTORY, *PROFILES, *READINGS)}


@dataclass(frozen=True, eq=False)
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


@styled
def temperature_field(
    x: Array, z: Array, temperature: Array, period: float, title: str, traces: Sequence[Trace] = ()
) -> Figure:
    """Draw a temperature field with the places of the thermometers.

    A long cell is cut into strips of equal length, one below the other.

    Parameters
    ----------
    x, z : ndarray, shapes (nx,) and (nz,)
        Grid points in H, x evenly spaced.
    temperature : ndarray, shape (nz, nx)
        In units of Δ above the top plate.
    period : float
        Γ in H.
    title : str
        Headline.
    traces : sequence of Trace
        Thermometers to mark.
    """
    strips = min(ceil(period / LONGEST_STRIP), MOST_STRIPS)
    length = period / strips
    names = _names(traces)
    height = min(6.0, (WIDTH - 0.8) / length) * strips + 0.4 * strips + 1.2 + 0.2 * names.count("\n")
    figure = Figure(figsize=(WIDTH, height), layout="compressed")
    panels = figure.subplots(strips, 1, squeeze=False)[:, 0]
    picture = _on_even_heights(z, temperature)
    for i, panel in enumerate(panels):
        panel.set(xlim=(i * length, (i + 1) * length), ylim=(0, 1), aspect="equal", ylabel="z (H)")
        image = _paint(panel, x, picture)
        _mark(panel, traces)
    panels[0].set_title(title)
    panels[-1].set_xlabel("x (H)" + names)
    place: dict[str, Any] = (
        {"location": "bottom", "aspect": 40} if length >= 1.0 else {"location": "right", "aspect": 25}
    )
    bar = figure.colorbar(image, ax=list(panels), shrink=0.8, **place)
    bar.set_label(axis_label(_QUANTITIES["temperature"], "temperature"))
    return figure


def _on_even_heights(z: Array, temperature: Array) -> Array:
    """Interpolate linearly to even heights, fine enough for the layers at the plates."""
    wanted = (np.arange(PICTURE_ROWS) + 0.5) / PICTURE_ROWS
    above = np.clip(np.searchsorted(z, wanted), 1, z.size - 1)
    share = np.clip((wanted - z[above - 1]) / (z[above] - z[above - 1]), 0.0, 1.0)[:, None]
    return (1.0 - share) * temperature[above - 1] + share * temperature[above]


def _paint(panel: Axes, x: Array, picture: Array) -> AxesImage:
    """Paint the columns that the panel shows and one on each side; the cell is periodic."""
    spacing = x[1] - x[0]
    left, right = panel.get_xlim()
    columns = np.arange(floor((left - x[0]) / spacing) - 1, ceil((right - x[0]) / spacing) + 2)
    image = AxesImage(
        panel,
        cmap="RdBu_r",
        norm=Normalize(0.0, 1.0),
        interpolation="bilinear",
        origin="lower",
        extent=(x[0] + (columns[0] - 0.5) * spacing, x[0] + (columns[-1] + 0.5) * spacing, 0.0, 1.0),
    )
    image.set_data(np.take(picture, columns, axis=1, mode="wrap"))
    panel.add_image(image)
    return image


def _mark(panel: Axes, traces: Sequence[Trace]) -> None:
    """Mark the thermometers in view by numbered circles; many are mere dots."""
    left, right = panel.get_xlim()
    size = 11.0 if len(traces) <= MOST_NUMBERS else 3.0
    for i, trace in enumerate(traces):
        if not left <= trace.x < right:
            continue
        artists: list[Artist] = [
            *panel.plot(
                trace.x, trace.z, "o", ms=size, mfc="white", mec="black", clip_on=False, zorder=10 + i
            )
        ]
        if len(traces) <= MOST_NUMBERS:
            text = panel.text(trace.x, trace.z, str(i + 1), size=8, ha="center", va="center_baseline")
            text.set_zorder(10 + i)
            artists.append(text)
        for artist in artists:
            artist.set_in_layout(False)


def _names(traces: Sequence[Trace]) -> str:
    """Return the numbered names, a few on a line."""
    if not traces:
        return ""
    if len(traces) > MOST_NUMBERS:
        return f"\n{len(traces)} thermometers"
    lines = [""]
    for i, trace in enumerate(traces):
        word = f"{i + 1} {trace.name}"
        if lines[-1] and len(lines[-1]) + len(word) > 60:
            lines.append("")
        lines[-1] += ("    " if lines[-1] else "") + word
    return "\n" + "\n".join(lines)


@styled
def nusselt_history(history: Mapping[str, Array], window: tuple[float, float] | None, title: str) -> Figure:
    """Draw the Nusselt number by all definitions over time.

    Parameters
    ----------
    history : mapping of str to ndarray, shape (samples,)
        ``time`` and the Nusselt numbers.
    window : tuple of float or None
        Start and end of the averages; sets the scale.
    title : str
        Headline.
    """
    figure = Figure(figsize=(WIDTH, 4.4), layout="constrained")
    axes = figure.add_subplot()
    time = history["time"]
    for name, colour, dash in zip(DEFINITIONS, COLOURS, DASHES, strict=True):
        quantity = _QUANTITIES[f"nusselt_{name}"]
        axes.plot(time, history[quantity.name], color=colour, ls=dash, label=quantity.symbol)
    if window is not None:
        axes.axvspan(*window, color="0.92", zorder=0, label="averaged")
    axes.set(xlabel=TIME_LABEL, ylabel="Nusselt number", title=title)
    axes.margins(x=0 if time.size > 1 else None)
    values = np.stack([history[f"nusselt_{name}"] for name in DEFINITIONS])
    _limit(axes, values, np.ones(time.size, bool) if window is None else time >= window[0])
    legend_below(axes, 4)
    return figure


def _limit(axes: Axes, values: Array, decisive: NDArray[np.bool_]) -> None:
    """Keep the overshoot of the transient from squeezing the rest, and say that it is cut off."""
    inside = values[:, decisive] if decisive.any() else values
    low, high = np.percentile(inside, [0.1, 99.9])
    margin = 0.1 * (high - low) or 0.1
    axes.set_ylim(low - margin, high + margin)
    if values.max() > high + margin:
        axes.set_xlabel(f"{TIME_LABEL}\nvalues up to {values.max():.3g} lie above the frame")


@styled
def thermometer_traces(traces: Sequence[Trace], title: str) -> Figure:
    """Draw the temperature records of up to `MOST_TRACES` thermometers below each other.

    Parameters
    ----------
    traces : sequence of Trace
        At least one.
    title : str
        Headline.
    """
    shown = traces[:MOST_TRACES]
    figure = Figure(figsize=(WIDTH, 1.0 + 1.3 * len(shown)), layout="constrained")
    panels = figure.subplots(len(shown), 1, sharex=True, squeeze=False)[:, 0]
    for i, (panel, trace) in enumerate(zip(panels, shown, strict=True)):
        panel.plot(trace.time, trace.temperature, color=COLOURS[i % len(COLOURS)], lw=1.0)
        panel.set_title(f"{i + 1} {trace.name}: x = {trace.x:g} H, z = {trace.z:g} H", loc="left")
        panel.margins(x=0)
    panels[-1].set_xlabel(TIME_LABEL)
    figure.supylabel(axis_label(_QUANTITIES["temperature"], "temperature"), size="medium")
    left_out = f" (first {len(shown)} of {len(traces)} thermometers)" if len(shown) < len(traces) else ""
    figure.suptitle(title + left_out, size="medium")
    return figure


@styled
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
    figure = Figure(figsize=(WIDTH, 5.8), layout="constrained")
    (mean, flux), (warmth, flow) = figure.subplots(2, 2, sharey=True)
    _profile(mean, z, profiles, "temperature_profile", 0)
    _profile(flux, z, profiles, "nusselt_profile", 1)
    _profile(warmth, z, profiles, "temperature_rms_profile", 2)
    _profile(flow, z, profiles, "horizontal_velocity_rms_profile", 3)
    _profile(flow, z, profiles, "vertical_velocity_rms_profile", 4, "--")
    flow.set_xlabel("rms velocity (free-fall velocity)")
    flow.legend(loc="lower center", bbox_to_anchor=(0.5, 1.0), ncols=2)
    values = profiles["nusselt_profile"]
    half = max(0.05 * abs(values.mean()), float(np.ptp(values)))
    flux.set_xlim(values.mean() - half, values.mean() + half)
    for left in (mean, warmth):
        left.set(ylabel="z (H)", ylim=(0, 1))
    figure.suptitle(title, size="medium")
    return figure


def _profile(
    axes: Axes, z: Array, profiles: Mapping[str, Array], name: str, colour: int, dash: str = "-"
) -> None:
    quantity = _QUANTITIES[name]
    axes.plot(profiles[name], z, color=COLOURS[colour], ls=dash, label=quantity.symbol)
    axes.set_xlabel(axis_label(quantity, _WORDS.get(name, "")))


_WORDS = {
    "temperature_profile": "mean temperature",
    "nusselt_profile": "heat flux",
    "temperature_rms_profile": "rms temperature",
}
