"""Memory of a record: autocovariance, autocorrelation function with its error, integral time scale."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from rbsim.series.estimate import FEWEST_EFFECTIVE_SAMPLES, Estimate, half_width95, unknown
from rbsim.series.records import Array, checked_record, checked_spacing, standardise

WINDOW_FACTOR = 5.0
"""The automatic window ends at the first lag of this many integral times (Sokal 1997: 4 to 10)."""


@dataclass(frozen=True)
class Memory:
    """How long a record remembers, in samples.

    Parameters
    ----------
    variance : float
        Variance of the record (divisor n).
    integral : float
        Integral time scale in samples, ½ + Σ ρ(k) over the lags of the window; positive.
    window : int
        Largest lag in the sum.
    samples : int
        Length of the record.
    """

    variance: float
    integral: float
    window: int
    samples: int

    @property
    def effective_samples(self) -> float:
        """Number of independent samples that average as well as the record."""
        return self.samples / (2.0 * self.integral)

    @property
    def degrees_of_freedom(self) -> float:
        """Degrees of freedom of the long-run variance: n/(2W + 1), after Madras & Sokal 1988."""
        return max(self.samples / (2.0 * self.window + 1.0), 1.0)


@dataclass(frozen=True)
class CorrelationFunction:
    """Autocorrelation over the lag.

    Parameters
    ----------
    lag : ndarray, shape (m,)
        Lags from 0, in the units of the spacing.
    value : ndarray, shape (m,)
        Autocorrelation, 1 at lag 0.
    standard_error : ndarray, shape (m,)
        Standard deviation of each value by Bartlett's formula.
    """

    lag: Array
    value: Array
    standard_error: Array


def autocovariance(values: Array) -> Array:
    """Return the autocovariance (divisor n) at the lags 0 … n − 1 of values whose mean is zero."""
    n = values.size
    padded = 1 << (2 * n - 1).bit_length()
    spectrum = np.fft.rfft(values, padded)
    covariance: Array = np.fft.irfft(np.abs(spectrum) ** 2, padded)[:n] / n
    return covariance


def initial_monotone_memory(values: Array) -> Memory:
    """Return the memory by the initial monotone sequence (Geyer 1992, Statist. Sci. 7, 473).

    Sums of neighbouring pairs of the autocovariance are added until one is no longer positive, each lowered
    to the smallest before it. For an oscillating record this errs on the safe side. The bias that comes
    from removing the record's own mean is corrected to first order (Wolff 2004, Comput. Phys. Commun. 156,
    143).

    Parameters
    ----------
    values : ndarray, shape (n,)
        Record of zero mean and positive variance.
    """
    n = values.size
    covariance = autocovariance(values)
    pairs = covariance[: 2 * (n // 2)].reshape(-1, 2).sum(axis=1)
    kept = max(_first(pairs <= 0.0), 1)
    total = float(np.minimum.accumulate(pairs[:kept]).sum()) / float(covariance[0])
    return _memory(float(covariance[0]), total - 0.5, 2 * kept - 1, n)


def automatic_window_memory(values: Array) -> Memory:
    """Return the memory by the self-consistent window (Madras & Sokal 1988; Sokal 1997).

    The sum of the autocorrelations ends at the first lag of at least five integral times. The bias from
    removing the record's own mean is corrected to first order (Wolff 2004).

    Parameters
    ----------
    values : ndarray, shape (n,)
        Record of zero mean and positive variance.
    """
    n = values.size
    covariance = autocovariance(values)
    integral = np.cumsum(covariance) / covariance[0] - 0.5
    window = min(_first(np.arange(n) >= WINDOW_FACTOR * integral), n - 1)
    return _memory(float(covariance[0]), float(integral[window]), window, n)


def autocorrelation(values: npt.ArrayLike, spacing: float, longest_lag: float) -> CorrelationFunction:
    """Return the autocorrelation function and its error.

    Parameters
    ----------
    values : array_like, shape (n,)
        Record at even spacing.
    spacing : float
        Time between samples.
    longest_lag : float
        Largest lag, in the units of the spacing; cut to half of the record.

    Returns
    -------
    CorrelationFunction
        For a constant record 1 at lag 0, otherwise 0 with an infinite error.

    Raises
    ------
    ValueError
        If the record or the spacing is not valid, or the lag is negative.

    Notes
    -----
    Error by Bartlett 1946, J. R. Statist. Soc. Suppl. 8, 27, with the autocorrelations beyond the window of
    `initial_monotone_memory` set to zero: n var r(k) = R(0) + R(2k) − 4 r(k) R(k) + 2 r(k)² R(0), where
    R(m) = Σ r(i) r(i + m) over all lags of either sign.
    """
    record, step = checked_record(values), checked_spacing(spacing)
    if not longest_lag >= 0.0:
        raise ValueError(f"longest lag {longest_lag}: must not be negative")
    count = 1 + min(math.floor(min(longest_lag / step, record.size) * (1 + 1e-12)), record.size // 2)
    lag = step * np.arange(count, dtype=np.float64)
    rest = standardise(record)
    if rest.scale == 0.0:
        first = np.arange(count) == 0
        return CorrelationFunction(lag, first.astype(np.float64), np.where(first, 0.0, np.inf))
    covariance = autocovariance(rest.values)
    value = covariance / covariance[0]
    window = initial_monotone_memory(rest.values).window
    return CorrelationFunction(lag, value[:count], _bartlett_error(value, window, count))


def correlation_time(values: npt.ArrayLike, spacing: float) -> Estimate:
    """Return the integral time scale of a record with its error.

    Parameters
    ----------
    values : array_like, shape (n,)
        Record at even spacing.
    spacing : float
        Time between samples.

    Returns
    -------
    Estimate
        In the units of the spacing; white noise has ½ spacing. Relative variance 2(2W + 1)/n of Madras &
        Sokal 1988.

    Raises
    ------
    ValueError
        If the record or the spacing is not valid.
    """
    record, step = checked_record(values), checked_spacing(spacing)
    rest = standardise(record)
    if rest.scale == 0.0:
        return unknown(0.5 * step, record.size, "undefined: constant record")
    memory = initial_monotone_memory(rest.values)
    time = step * memory.integral
    error = time * math.sqrt(2.0 / memory.degrees_of_freedom)
    enough = memory.effective_samples >= FEWEST_EFFECTIVE_SAMPLES
    width = half_width95(error, memory.degrees_of_freedom) if enough else math.inf
    return Estimate(
        time,
        error,
        width,
        time,
        memory.effective_samples,
        record.size,
        memory.degrees_of_freedom,
        "Madras & Sokal 1988",
    )


def _memory(variance: float, integral: float, window: int, samples: int) -> Memory:
    """Apply the correction for the removed mean and keep the integral time positive."""
    corrected = integral * (1.0 + (2.0 * window + 1.0) / samples)
    # a record cannot average better than one whose errors cancel but for its two ends
    return Memory(variance, max(corrected, 0.5 / samples), window, samples)


def _bartlett_error(value: Array, window: int, count: int) -> Array:
    """Estimate the errors of the first autocorrelations, the true ones taken as zero beyond the window."""
    one_sided = value[: window + 1]
    two_sided = np.concatenate((one_sided[:0:-1], one_sided))
    products = np.zeros(2 * count)
    overlap = autocovariance(two_sided) * two_sided.size
    products[: min(2 * count, overlap.size)] = overlap[: 2 * count]
    r = np.where(np.arange(count) <= window, value[:count], 0.0)
    variance = (1.0 + 2.0 * r**2) * products[0] + products[: 2 * count : 2] - 4.0 * r * products[:count]
    error: Array = np.sqrt(np.maximum(variance, 0.0) / value.size)
    error[0] = 0.0
    return error


def _first(condition: npt.NDArray[np.bool_]) -> int:
    """Index of the first true entry; the length if there is none."""
    return int(np.argmax(condition)) if condition.any() else condition.size
