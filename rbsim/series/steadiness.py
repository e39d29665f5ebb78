"""Records that settle: a bound on the distance to the value a decaying record tends to."""

from __future__ import annotations

import math

import numpy as np

from rbsim.series.records import Array, standardise

PARTS = 8
SHORTEST = 4 * PARTS
SLOWEST_RATIO = 0.9
"""A record whose range shrinks by less than a tenth from one eighth to the next is not called settling."""
STILL = 1e-10
"""Ranges below this fraction of the record's size are the rounding of a simulation that stands still."""


def settled_half_width(record: Array) -> float | None:
    """Return how far the mean of a settling record can be from its limit; None if it does not settle.

    The record is cut into eight parts. If the range of the values shrinks from every part to the next by at
    least a tenth, the changes still to come are bounded by the geometric series with the slowest ratio seen
    (the extrapolation of Aitken 1926, Proc. R. Soc. Edinb. 46, 289, used as a bound). A wandering record
    passes by chance with a probability below 1/8! = 2.5e-5.

    Parameters
    ----------
    record : ndarray, shape (n,)
        Finite values at even spacing.

    Returns
    -------
    float or None
        Largest distance between the record's mean and its limit, or None.
    """
    if record.size < SHORTEST:
        return None
    rest = standardise(record)
    if rest.scale == 0.0:
        return 0.0
    parts = np.array_split(rest.values, PARTS)
    still = STILL * float(np.abs(record).max()) / rest.scale
    ranges = np.array([np.ptp(part) for part in parts])
    ratio = _slowest_ratio(ranges, still)
    if ratio > SLOWEST_RATIO:
        return None
    last = max(float(ranges[-1]), still)
    to_come = last * ratio / (1.0 - ratio)
    return rest.scale * (abs(float(parts[-1].mean())) + last + to_come)


def _slowest_ratio(ranges: Array, still: float) -> float:
    """Largest ratio of a range to the one before it, ranges of rounding size taken as zero."""
    moving = ranges > still
    if np.any(moving[1:] & ~moving[:-1]):
        return math.inf
    ratios = ranges[1:][moving[1:]] / ranges[:-1][moving[1:]]
    return float(ratios.max()) if ratios.size else 0.0
