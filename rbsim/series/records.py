"""What counts as a record: one-dimensional, finite, evenly spaced; and the same record without its scale."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

Array = npt.NDArray[np.float64]

ROUNDING = 16.0 * float(np.finfo(np.float64).eps)
"""A record that departs from its mean by less than this fraction of its size is called constant."""


@dataclass(frozen=True)
class Standardised:
    """A record split into mean, scale and a scale-free rest; squares of the rest cannot overflow or vanish.

    Parameters
    ----------
    mean : float
        Mean of the record.
    scale : float
        Largest departure from the mean; 0 for a record that is constant to rounding.
    values : ndarray, shape (n,)
        (record − mean)/scale, all zeros for a constant record.
    """

    mean: float
    scale: float
    values: Array


def checked_record(values: npt.ArrayLike, shortest: int = 2) -> Array:
    """Return the record as an array of float64.

    Parameters
    ----------
    values : array_like, shape (n,)
        Samples at even spacing.
    shortest : int
        Smallest allowed number of samples.

    Raises
    ------
    ValueError
        If the record is not one-dimensional, too short or not finite.
    """
    record = np.asarray(values, dtype=np.float64)
    if record.ndim != 1:
        raise ValueError(f"record of shape {record.shape}: must be one-dimensional")
    if record.size < shortest:
        raise ValueError(f"record of {record.size} samples: at least {shortest} are needed")
    finite = np.isfinite(record)
    if not finite.all():
        raise ValueError(f"record is {record[~finite][0]} at sample {int(np.argmin(finite))}: must be finite")
    return record


def checked_spacing(spacing: float) -> float:
    """Return the spacing of the samples.

    Raises
    ------
    ValueError
        If it is not positive and finite.
    """
    if not (np.isfinite(spacing) and spacing > 0.0):
        raise ValueError(f"spacing {spacing}: must be positive and finite")
    return float(spacing)


def standardise(record: Array) -> Standardised:
    """Split a checked record into mean, scale and a rest whose largest size is 1."""
    size = float(np.abs(record).max())
    if size == 0.0:
        return Standardised(0.0, 0.0, np.zeros_like(record))
    rest = record / size
    mean = float(rest.mean())
    rest = rest - mean
    scale = float(np.abs(rest).max())
    if scale <= ROUNDING:
        return Standardised(mean * size, 0.0, np.zeros_like(record))
    # the second subtraction removes the rounding error of the first mean
    rest = rest / scale
    return Standardised(mean * size, scale * size, rest - rest.mean())
