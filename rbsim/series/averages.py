"""Mean of an autocorrelated record with its error, by four published estimators and one default."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
import numpy.typing as npt

from rbsim.series.correlation import Memory, automatic_window_memory, initial_monotone_memory
from rbsim.series.estimate import FEWEST_EFFECTIVE_SAMPLES, Estimate, half_width95
from rbsim.series.records import Array, checked_record, checked_spacing, standardise
from rbsim.series.steadiness import settled_half_width

FEWEST_BATCHES = 5
MOST_BATCHES = 30
"""More than 30 batches gain little (Schmeiser 1982, Oper. Res. 30, 556)."""
EFFECTIVE_SAMPLES_PER_BATCH = 10.0

# what an estimator finds of a record of unit scale: variance of the mean, degrees of freedom
_Finding = tuple[float, float]


def mean_with_error(values: npt.ArrayLike, spacing: float) -> Estimate:
    """Return the mean of a record with its 95 % interval: the default of the package.

    Parameters
    ----------
    values : array_like, shape (n,)
        Statistically steady record at even spacing (cut the transient first).
    spacing : float
        Time between samples.

    Returns
    -------
    Estimate
        By `overlapping_batch_means`, the best calibrated of the four over white, autoregressive,
        oscillating and smooth records (measured here). A record of fewer than ten effective samples gets an
        infinite interval, unless it settles to a constant, where the distance still to go bounds the error.
        A constant record has the interval 0.

    Raises
    ------
    ValueError
        If the record is not one-dimensional and finite with at least two samples, or the spacing is not
        positive.
    """
    estimate = overlapping_batch_means(values, spacing)
    if math.isfinite(estimate.ci95):
        return estimate
    bound = settled_half_width(checked_record(values))
    if bound is None:
        return estimate
    return Estimate(
        estimate.mean,
        bound,
        bound,
        estimate.correlation_time,
        estimate.effective_samples,
        estimate.samples,
        estimate.degrees_of_freedom,
        "settling record (Aitken 1926)",
    )


def initial_monotone_sequence(values: npt.ArrayLike, spacing: float) -> Estimate:
    """Return the mean with the error of Geyer 1992, Statist. Sci. 7, 473.

    The variance is that of `rbsim.series.correlation.initial_monotone_memory`; Student's t has n/(2W + 1)
    degrees of freedom for a sum over W lags, from the relative variance of such a sum (Madras & Sokal
    1988). Parameters, result and errors as in `mean_with_error`.
    """
    return _estimate(values, spacing, _from_memory, "initial monotone sequence (Geyer 1992)")


def automatic_window(values: npt.ArrayLike, spacing: float) -> Estimate:
    """Return the mean with the error from the integrated autocorrelation time (Madras & Sokal 1988).

    The sum ends at five integral times; Student's t as in `initial_monotone_sequence`. Unsafe for records
    whose neighbours are anticorrelated, because the window then ends at once. Parameters, result and errors
    as in `mean_with_error`.
    """

    def finding(rest: Array, _: Memory) -> _Finding:
        return _from_memory(rest, automatic_window_memory(rest))

    return _estimate(values, spacing, finding, "automatic window (Madras & Sokal 1988)")


def batch_means(values: npt.ArrayLike, spacing: float) -> Estimate:
    """Return the mean with the error from the scatter of the means of batches.

    The number of batches b is that with ten effective samples each, between 5 and 30: more batches gain
    little (Schmeiser 1982, Oper. Res. 30, 556), fewer samples leave neighbouring batches correlated. Batch
    edges may fall between samples, so that the whole record counts. What batches still miss of the variance
    is restored by `seen_share`. Parameters, result and errors as in `mean_with_error`.
    """
    return _estimate(values, spacing, _from_batches, "batch means (Schmeiser 1982)")


def overlapping_batch_means(values: npt.ArrayLike, spacing: float) -> Estimate:
    """Return the mean with the error from all overlapping batches (Meketon & Schmeiser 1984).

    Batches as long as those of `batch_means`, one starting at every sample: the same bias with two thirds
    of the variance, hence 3(b − 1)/2 degrees of freedom. Parameters, result and errors as in
    `mean_with_error`.
    """
    return _estimate(
        values, spacing, _from_overlapping_batches, "overlapping batch means (Meketon & Schmeiser 1984)"
    )


def batch_count(memory: Memory) -> int:
    """Return the number of batches: ten effective samples each, between 5 and 30, never more than samples."""
    wanted = int(memory.effective_samples / EFFECTIVE_SAMPLES_PER_BATCH)
    return min(max(wanted, FEWEST_BATCHES), MOST_BATCHES, memory.samples)


def seen_share(length: float, integral: float) -> float:
    """Return the share of the long-run variance that means over a finite length show.

    1 − (τ/L)(1 − exp(−L/τ)) for the integral time τ: exact for exponential correlation (Lenschow, Mann &
    Kristensen 1994, J. Atmos. Oceanic Technol. 11, 661), to first order in τ/L for any other.
    """
    return 1.0 + (integral / length) * math.expm1(-length / integral)


def intermittent_freedom(freedom: float, values: Array, effective: float) -> float:
    """Return the degrees of freedom of a variance, lowered for a record of rare strong events.

    The relative variance of a variance is 2/ν for Gaussian values and grows by (F − 3)/n for the flatness F
    of the values (Satterthwaite 1946, Biometrics Bull. 2, 110, for the degrees of freedom of such a
    variance).

    Parameters
    ----------
    freedom : float
        Degrees of freedom ν for Gaussian values.
    values : ndarray, shape (n,)
        Record of zero mean.
    effective : float
        Number of effective samples.
    """
    square = values**2
    excess = max(float(np.mean(square**2)) / float(np.mean(square)) ** 2 - 3.0, 0.0)
    return max(1.0 / (1.0 / freedom + 0.5 * excess / effective), 1.0)


def _estimate(
    values: npt.ArrayLike, spacing: float, finding: Callable[[Array, Memory], _Finding], method: str
) -> Estimate:
    """Check and scale a record, apply an estimator, refuse an interval where the record is too short."""
    record, step = checked_record(values), checked_spacing(spacing)
    rest = standardise(record)
    n = record.size
    if rest.scale == 0.0:
        width = 0.0 if n >= FEWEST_EFFECTIVE_SAMPLES else math.inf
        return Estimate(rest.mean, 0.0, width, 0.5 * step, float(n), n, n - 1.0, "constant record")
    memory = initial_monotone_memory(rest.values)
    variance, freedom = finding(rest.values, memory)
    effective = memory.variance / variance
    error = rest.scale * math.sqrt(variance)
    enough = min(effective, memory.effective_samples, n) >= FEWEST_EFFECTIVE_SAMPLES
    freedom = intermittent_freedom(freedom, rest.values, min(effective, memory.effective_samples, n))
    width = half_width95(error, freedom) if enough else math.inf
    return Estimate(rest.mean, error, width, 0.5 * step * n / effective, effective, n, freedom, method)


def _from_memory(_: Array, memory: Memory) -> _Finding:
    """Variance of the mean from the integral time."""
    return memory.variance / memory.effective_samples, memory.degrees_of_freedom


def _from_batches(rest: Array, memory: Memory) -> _Finding:
    """Variance of the mean from batches whose edges divide the record evenly."""
    count = batch_count(memory)
    sums = np.concatenate(([0.0], np.cumsum(rest)))
    edges = np.linspace(0.0, rest.size, count + 1)
    means = np.diff(np.interp(edges, np.arange(rest.size + 1), sums)) * (count / rest.size)
    variance = float(means.var(ddof=1)) / count / seen_share(rest.size / count, memory.integral)
    return _positive(variance, memory), count - 1.0


def _from_overlapping_batches(rest: Array, memory: Memory) -> _Finding:
    """Variance of the mean from the batches that start at every sample."""
    n, count = rest.size, batch_count(memory)
    length = n // count
    sums = np.concatenate(([0.0], np.cumsum(rest)))
    means = (sums[length:] - sums[:-length]) / length
    variance = length * float(means @ means) / ((n - length) * (n - length + 1.0))
    return _positive(variance / seen_share(length, memory.integral), memory), 1.5 * (count - 1.0)


def _positive(variance: float, memory: Memory) -> float:
    """Keep a variance above that of a record whose errors cancel but for its two ends."""
    return max(variance, memory.variance / memory.samples**2)
