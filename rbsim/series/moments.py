"""Mean, rms, skewness and flatness of a record, each with an error that respects autocorrelation."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt

from rbsim.series.averages import mean_with_error
from rbsim.series.estimate import Estimate, unknown
from rbsim.series.records import Array, checked_record, checked_spacing, standardise


@dataclass(frozen=True)
class Moments:
    """The first four moments of a record.

    Parameters
    ----------
    mean : Estimate
        Mean, in the units of the record.
    rms : Estimate
        Root mean square of the departure from the mean (divisor n), in the units of the record.
    skewness : Estimate
        Third central moment over rms³; 0 for a Gaussian record.
    flatness : Estimate
        Fourth central moment over rms⁴; 3 for a Gaussian record.
    """

    mean: Estimate
    rms: Estimate
    skewness: Estimate
    flatness: Estimate


def moments_with_errors(values: npt.ArrayLike, spacing: float) -> Moments:
    """Return the first four moments of a record with their 95 % intervals.

    Parameters
    ----------
    values : array_like, shape (n,)
        Statistically steady record at even spacing.
    spacing : float
        Time between samples.

    Returns
    -------
    Moments
        A constant record has rms 0, and the Gaussian skewness and flatness with infinite error.

    Raises
    ------
    ValueError
        If the record or the spacing is not valid.

    Notes
    -----
    Each moment is a smooth function of averages; its error is that of the average of its influence function
    (Hampel 1974, J. Am. Statist. Assoc. 69, 383), a record like any other. With z the standardised record,
    S the skewness and F the flatness: rms (z² − 1)/2 per rms, S: z³ − 3z − S − 3S(z² − 1)/2, F: z⁴ − 4Sz −
    F − 2F(z² − 1).

    The rms and the flatness scatter unevenly; their intervals are taken where the scatter is nearly normal,
    on ln(rms) and 1/(F − 1) (chosen by measured coverage, no source), and the wider side is reported.
    Records with tails much heavier than Gaussian show too small a flatness until very long, and no interval
    can tell.
    """
    record, step = checked_record(values), checked_spacing(spacing)
    mean = mean_with_error(record, step)
    rest = standardise(record)
    if rest.scale == 0.0:
        constant = "undefined: constant record"
        skewness, flatness = unknown(0.0, record.size, constant), unknown(3.0, record.size, constant)
        return Moments(mean, replace(mean, mean=0.0), skewness, flatness)
    unit_rms = float(np.sqrt(np.mean(rest.values**2)))
    rms, z = unit_rms * rest.scale, rest.values / unit_rms
    return Moments(mean, _rms(rms, z, step), _skewness(z, step), _flatness(z, step))


def flatness_scale(flatness: float) -> float:
    """Return 1/(F − 1), on which the estimated flatness scatters nearly normally; infinite for F = 1."""
    return 1.0 / (flatness - 1.0) if flatness > 1.0 else math.inf


def _rms(rms: float, z: Array, spacing: float) -> Estimate:
    """Estimate of the rms with the wider side of the interval of its logarithm."""
    relative = mean_with_error(0.5 * (z**2 - 1.0), spacing)
    # beyond this exponent the interval is as good as infinite
    width = rms * math.expm1(relative.ci95) if relative.ci95 < 100.0 else math.inf
    return replace(relative, mean=rms, standard_error=rms * relative.standard_error, ci95=width)


def _skewness(z: Array, spacing: float) -> Estimate:
    """Estimate of the skewness of a standardised record."""
    skewness = float(np.mean(z**3))
    influence = z**3 - 3.0 * z - 1.5 * skewness * (z**2 - 1.0)
    return replace(mean_with_error(influence, spacing), mean=skewness)


def _flatness(z: Array, spacing: float) -> Estimate:
    """Estimate of the flatness with the wider side of the interval of its scale."""
    skewness, flatness = float(np.mean(z**3)), float(np.mean(z**4))
    influence = z**4 - 4.0 * skewness * z - 2.0 * flatness * (z**2 - 1.0)
    estimate = replace(mean_with_error(influence, spacing), mean=flatness)
    relative = estimate.ci95 * flatness_scale(flatness) if estimate.ci95 else 0.0
    return replace(estimate, ci95=estimate.ci95 / (1.0 - relative) if relative < 1.0 else math.inf)
