"""Probability density of a record with errors that respect autocorrelation."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from rbsim.series.averages import mean_with_error
from rbsim.series.records import Array, checked_record, checked_spacing, standardise

MOST_BINS = 60
RULE_OF_THREE = 3.0
"""An event not seen in n independent samples has a probability below 3/n: Hanley & Lippman-Hand 1983."""


@dataclass(frozen=True)
class Density:
    """Probability density over bins of equal width.

    Parameters
    ----------
    edges : ndarray, shape (m + 1,)
        Edges of the bins, in the units of the record.
    density : ndarray, shape (m,)
        Share of the samples per width.
    ci95 : ndarray, shape (m,)
        Half width of the 95 % interval; infinite where the record is too short.
    """

    edges: Array
    density: Array
    ci95: Array

    @property
    def centres(self) -> Array:
        """Middles of the bins."""
        middles: Array = 0.5 * (self.edges[1:] + self.edges[:-1])
        return middles


def probability_density(values: npt.ArrayLike, spacing: float, bins: int | None = None) -> Density:
    """Return the probability density of a record.

    Parameters
    ----------
    values : array_like, shape (n,)
        Statistically steady record at even spacing.
    spacing : float
        Time between samples.
    bins : int, optional
        Number of bins over the range of the record; by default from the quartiles, at most 60.

    Returns
    -------
    Density
        The share of every bin is the mean of a record of zeros and ones, with the error of such a mean. A
        constant record gives one bin.

    Raises
    ------
    ValueError
        If the record or the spacing is not valid or the number of bins is not positive.

    Notes
    -----
    Bin width by Freedman & Diaconis 1981, Z. Wahrscheinlichkeitstheorie 57, 453, with the effective number of
    samples; empty bins by the rule of three.
    """
    record, step = checked_record(values), checked_spacing(spacing)
    if bins is not None and bins < 1:
        raise ValueError(f"bins {bins}: must be at least 1")
    rest = standardise(record)
    if rest.scale == 0.0:
        return _one_bin(record)
    effective = min(mean_with_error(record, step).effective_samples, float(record.size))
    count = _bin_count(rest.values, effective) if bins is None else bins
    edges = np.linspace(rest.values.min(), rest.values.max(), count + 1)
    place = np.clip(np.searchsorted(edges, rest.values, side="right") - 1, 0, count - 1)
    shares, errors = np.empty(count), np.empty(count)
    for i in range(count):
        shares[i], errors[i] = _share(place == i, step, effective)
    width = rest.scale * (edges[1] - edges[0])
    return Density(rest.mean + rest.scale * edges, shares / width, errors / width)


def _share(inside: npt.NDArray[np.bool_], spacing: float, effective: float) -> tuple[float, float]:
    """Share of the samples inside and its half width."""
    if not inside.any():
        return 0.0, min(RULE_OF_THREE / effective, 1.0)
    if inside.all():
        return 1.0, min(RULE_OF_THREE / effective, 1.0)
    estimate = mean_with_error(inside.astype(np.float64), spacing)
    return estimate.mean, estimate.ci95


def _bin_count(values: Array, effective: float) -> int:
    """Bins over the range for a width of twice the quartile distance over the cube root of the samples."""
    quartile_distance = float(np.subtract(*np.quantile(values, (0.75, 0.25))))
    width = 2.0 * quartile_distance / max(effective, 1.0) ** (1.0 / 3.0)
    return (
        min(math.ceil(float(np.ptp(values)) / width), MOST_BINS)
        if width * MOST_BINS > np.ptp(values)
        else MOST_BINS
    )


def _one_bin(record: Array) -> Density:
    """Density of a constant record: one bin just wide enough to exist."""
    width = max(abs(float(record[0])), 1.0) * 1e-6
    edges = np.array([record[0] - 0.5 * width, record[0] + 0.5 * width])
    return Density(edges, np.array([1.0 / width]), np.array([math.inf]))
