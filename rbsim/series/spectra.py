"""Power spectrum of a record with its confidence band."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy.special import chdtri

from rbsim.series.records import Array, checked_record, checked_spacing

SHORTEST_SEGMENT = 8
OVERLAP = 0.5


@dataclass(frozen=True)
class Spectrum:
    """One-sided power spectral density.

    Parameters
    ----------
    frequency : ndarray, shape (m,)
        Cycles per unit of the spacing, the zero frequency left out.
    density : ndarray, shape (m,)
        Variance per frequency; times the frequency step it sums to the variance.
    lower, upper : ndarray, shape (m,)
        Ends of the 95 % band, frequency by frequency.
    degrees_of_freedom : ndarray, shape (m,)
        Degrees of freedom of the density, half at the largest frequency of an even segment.
    segments : int
        Number of overlapping segments averaged.
    """

    frequency: Array
    density: Array
    lower: Array
    upper: Array
    degrees_of_freedom: Array
    segments: int


def power_spectrum(values: npt.ArrayLike, spacing: float, segment: int | None = None) -> Spectrum:
    """Return the power spectrum by averaging over half-overlapping segments with a Hann window.

    Parameters
    ----------
    values : array_like, shape (n,)
        Statistically steady record at even spacing.
    spacing : float
        Time between samples.
    segment : int, optional
        Samples per segment; a longer one resolves lower frequencies with a wider band. Default an eighth of
        the record, at least 8, which gives 15 segments.

    Returns
    -------
    Spectrum
        Of the record with each segment's mean removed; 0 everywhere for a constant record.

    Raises
    ------
    ValueError
        If the record or the spacing is not valid, or the segment is shorter than 8 or longer than the record.

    Notes
    -----
    Welch 1967, IEEE Trans. Audio Electroacoust. 15, 70, with his variance for overlapping segments; the
    band from χ². It holds where the spectrum is smooth over a few frequency steps.
    """
    record, step = checked_record(values, SHORTEST_SEGMENT), checked_spacing(spacing)
    length = max(record.size // 8, SHORTEST_SEGMENT) if segment is None else segment
    if not SHORTEST_SEGMENT <= length <= record.size:
        raise ValueError(f"segment {length}: must be between {SHORTEST_SEGMENT} and {record.size} samples")
    window = 0.5 - 0.5 * np.cos(2.0 * np.pi * np.arange(length) / length)
    hop = length - int(OVERLAP * length)
    pieces = np.lib.stride_tricks.sliding_window_view(record, length)[::hop]
    frequency = np.arange(1, length // 2 + 1) / (length * step)
    freedom = np.full(frequency.size, _degrees_of_freedom(window, hop, len(pieces)))
    density = _average_periodogram(pieces, window) * step
    if length % 2 == 0:
        # the largest frequency has no negative twin, so neither twice the power nor twice the freedom
        density[-1] *= 0.5
        freedom[-1] *= 0.5
    lower, upper = chi_squared_band(density, freedom)
    return Spectrum(frequency, density, lower, upper, freedom, len(pieces))


def chi_squared_band(density: Array, degrees_of_freedom: Array) -> tuple[Array, Array]:
    """Return the ends of the 95 % interval of a density whose estimate scatters like χ² over its degrees."""
    lower: Array = density * degrees_of_freedom / chdtri(degrees_of_freedom, 0.025)
    upper: Array = density * degrees_of_freedom / chdtri(degrees_of_freedom, 0.975)
    return lower, upper


def _average_periodogram(pieces: Array, window: Array) -> Array:
    """Mean over the segments of the one-sided periodogram per unit spacing, zero frequency left out."""
    total = np.zeros(window.size // 2)
    for piece in pieces:
        amplitude = np.fft.rfft((piece - piece.mean()) * window)
        total += np.abs(amplitude[1:]) ** 2
    density: Array = 2.0 * total / (len(pieces) * float(window @ window))
    return density


def _degrees_of_freedom(window: Array, hop: int, segments: int) -> float:
    """Degrees of freedom of the mean of overlapping periodograms (Welch 1967)."""
    power, scatter = float(window @ window), 1.0
    for shift in range(1, segments):
        start = shift * hop
        if start >= window.size:
            break
        overlap = (float(window[start:] @ window[: window.size - start]) / power) ** 2
        scatter += 2.0 * (1.0 - shift / segments) * overlap
    return 2.0 * segments / scatter
