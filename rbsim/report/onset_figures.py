"""Figures of onset."""

from __future__ import annotations

from math import pi

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from numpy.typing import NDArray

Array = NDArray[np.float64]


def neutral_curve_figure(
    wavenumbers: Array,
    rayleigh: Array,
    critical: tuple[float, float],
    title: str,
    period: float | None = None,
) -> Figure:
    """Draw the neutral curve with its minimum.

    Parameters
    ----------
    wavenumbers, rayleigh : ndarray, shape (n,)
        The curve, k in 1/H.
    critical : tuple of float
        Wavenumber and Rayleigh number of onset.
    title : str
        Headline.
    period : float, optional
        Period of a cell in H, whose own wavenumbers are marked.
    """
    figure = Figure(figsize=(7.0, 4.4), layout="constrained")
    axes = figure.add_subplot()
    axes.plot(wavenumbers, rayleigh, color="#0072B2", label="neutral curve")
    axes.fill_between(wavenumbers, rayleigh, rayleigh.max() * 2, color="#0072B2", alpha=0.08, lw=0)
    k, ra = critical
    axes.plot(k, ra, "o", color="#D55E00", clip_on=False, label=f"onset: Ra = {ra:.8g}, k = {k:.6g}")
    if period is not None:
        _mark_wavenumbers(axes, wavenumbers, rayleigh, period)
    axes.set(
        yscale="log" if rayleigh.max() > 4.0 * rayleigh.min() else "linear",
        xlim=(min(wavenumbers[0], k), wavenumbers[-1]),
        ylim=(0.8 * min(ra, rayleigh.min()), rayleigh.max()),
        xlabel="wavenumber k (1/H)",
        ylabel="Rayleigh number",
        title=title,
    )
    for formatted in (axes.yaxis.set_major_formatter, axes.yaxis.set_minor_formatter):
        formatted("{x:.0f}")
    axes.text(0.5, 0.94, "rolls grow", transform=axes.transAxes, ha="center", va="top", color="0.35")
    axes.legend(loc="upper center", bbox_to_anchor=(0.5, -0.16), ncol=2, frameon=False)
    return figure


def onset_estimate_figure(
    table: tuple[Array, Array],
    law: tuple[Array, Array],
    estimate: tuple[float, float, float],
    theory: float,
    labels: tuple[str, str],
) -> Figure:
    """Draw a measured table, the law fitted to it, and the onset by both estimate and theory.

    Parameters
    ----------
    table, law : tuple of two ndarray
        Rayleigh numbers and measured values; the same of the fitted law.
    estimate : tuple of float
        Onset with the ends of its confidence interval.
    theory : float
        Onset by theory.
    labels : tuple of str
        What was measured, and the headline.
    """
    figure = Figure(figsize=(7.0, 4.6), layout="constrained")
    axes = figure.add_subplot()
    best, low, high = estimate
    axes.axvspan(low, high, color="#D55E00", alpha=0.25, lw=0, label="95 % confidence")
    axes.axvline(best, color="#D55E00", label=f"onset from the table: {best:.6g}")
    axes.axvline(theory, color="#0072B2", ls="--", label=f"onset by theory: {theory:.6g}")
    axes.plot(*law, color="#009E73", label="fitted law")
    axes.plot(*table, "o", ms=5, mfc="none", color="black", label="table")
    axes.set(xlabel="Rayleigh number", ylabel=labels[0], title=labels[1])
    axes.legend(loc="upper center", bbox_to_anchor=(0.5, -0.14), ncol=2, frameon=False)
    return figure


def _mark_wavenumbers(axes: Axes, wavenumbers: Array, rayleigh: Array, period: float) -> None:
    allowed = 2.0 * pi / period * np.arange(1, int(wavenumbers[-1] * period / (2.0 * pi)) + 1)
    allowed = allowed[allowed >= wavenumbers[0]]
    heights = np.exp(np.interp(allowed, wavenumbers, np.log(rayleigh)))
    axes.plot(allowed, heights, "|", ms=14, color="black", label=f"wavenumbers of period {period:g} H")
