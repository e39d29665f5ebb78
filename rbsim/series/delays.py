"""Cross-correlation of two records and the delay between them, with significance under autocorrelation."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt
from scipy.special import ndtr

from rbsim.series.averages import mean_with_error
from rbsim.series.correlation import autocovariance, initial_monotone_memory
from rbsim.series.estimate import Estimate, unknown
from rbsim.series.records import Array, checked_record, checked_spacing, standardise

LEVEL = 0.05
"""Chance that two unrelated records are called correlated at any of the delays searched."""
LONGEST_SHARE = 0.25
"""Delays of more than a quarter of the record are not searched (common practice, no source)."""


@dataclass(frozen=True)
class CrossCorrelation:
    """Correlation of two records over the delay of the second.

    Parameters
    ----------
    delay : ndarray, shape (2m + 1,)
        Delay of the second record behind the first, in the units of the spacing.
    value : ndarray, shape (2m + 1,)
        Correlation coefficient, from the samples that overlap over the full length.
    standard_error : float
        Standard deviation of every value if the records are unrelated.
    tries : float
        Number of effectively independent values among them.
    """

    delay: Array
    value: Array
    standard_error: float
    tries: float


@dataclass(frozen=True)
class Delay:
    """The delay at which two records are most alike.

    Parameters
    ----------
    delay : Estimate
        Delay of the second record behind the first, in the units of the spacing, between samples by a
        parabola; infinite interval unless the correlation is significant and its peak lies inside the
        search.
    correlation : float
        Correlation coefficient there; negative if the records are opposite.
    p_value : float
        Chance of a correlation at least as strong at any of the delays between unrelated records.
    significant : bool
        Whether that chance is below 5 %.
    """

    delay: Estimate
    correlation: float
    p_value: float
    significant: bool


def cross_correlation(
    first: npt.ArrayLike, second: npt.ArrayLike, spacing: float, longest_delay: float
) -> CrossCorrelation:
    """Return the correlation of two simultaneous records over the delay of the second.

    Parameters
    ----------
    first, second : array_like, shape (n,)
        Statistically steady records at the same times.
    spacing : float
        Time between samples.
    longest_delay : float
        Largest delay of either sign, cut to a quarter of the record.

    Returns
    -------
    CrossCorrelation
        0 with an infinite error if a record is constant.

    Raises
    ------
    ValueError
        If a record or the spacing is not valid, their lengths differ or the delay is negative.

    Notes
    -----
    Unrelated records: n var r = Σ ρ₁(j) ρ₂(j) over all lags of either sign (Bartlett 1935, J. R. Statist.
    Soc. 98, 536; 1955), each autocorrelation taken as zero beyond the window of Geyer's initial sequence.
    A search over m samples counts as 1 + m/Σ ρ₁ρ₂ tries.
    """
    x, y = checked_record(first), checked_record(second)
    step = checked_spacing(spacing)
    if x.size != y.size:
        raise ValueError(f"records of {x.size} and {y.size} samples: must be simultaneous")
    if not longest_delay >= 0.0:
        raise ValueError(f"longest delay {longest_delay}: must not be negative")
    reach = min(math.floor(min(longest_delay / step, x.size) * (1 + 1e-12)), int(LONGEST_SHARE * x.size))
    delay = step * np.arange(-reach, reach + 1, dtype=np.float64)
    a, b = _unit_rms(x), _unit_rms(y)
    if a is None or b is None:
        return CrossCorrelation(delay, np.zeros(delay.size), math.inf, float(delay.size))
    value = _lagged_products(a, b, reach)
    common = _common_memory(a, b)
    return CrossCorrelation(delay, value, math.sqrt(common / x.size), 1.0 + 2.0 * reach / common)


def delay_between(first: npt.ArrayLike, second: npt.ArrayLike, spacing: float, longest_delay: float) -> Delay:
    """Return the delay at which two records are most alike, its error and its significance.

    Parameters and errors as in `cross_correlation`.

    Notes
    -----
    The delay d solves ⟨x(t) y′(t + d)⟩ = 0, so its error is that of this average over the curvature ⟨x y″⟩
    of the correlation (linearised as any root of an average, Huber 1967). The p-value is 1 − (1 − p)^m for
    m tries.
    """
    function = cross_correlation(first, second, spacing, longest_delay)
    best = int(np.argmax(np.abs(function.value)))
    correlation = float(function.value[best])
    single = 2.0 * float(ndtr(-abs(correlation) / function.standard_error))
    p_value = float(-np.expm1(function.tries * np.log1p(-single))) if single < 1.0 else 1.0
    significant = p_value < LEVEL
    place = float(function.delay[best])
    samples = np.size(first)
    if not significant:
        return Delay(unknown(place, samples, "no significant correlation"), correlation, p_value, False)
    if best in (0, function.value.size - 1):
        return Delay(
            unknown(place, samples, "strongest at the end of the search"), correlation, p_value, True
        )
    lag = best - function.value.size // 2
    located = _located(np.asarray(first, np.float64), np.asarray(second, np.float64), lag, spacing)
    return Delay(located, correlation, p_value, True)


def _located(x: Array, y: Array, lag: int, spacing: float) -> Estimate:
    """Delay near a lag by the parabola through three correlations, with its linearised error."""
    a, b = standardise(x).values, standardise(y).values
    base = np.arange(max(0, 1 - lag), min(a.size, a.size - lag - 1))
    before, at, after = (b[base + lag + shift] for shift in (-1, 0, 1))
    slope = 0.5 * a[base] * (after - before)
    curvature = float(np.mean(a[base] * (after - 2.0 * at + before)))
    if curvature == 0.0:
        return unknown(lag * spacing, x.size, "flat correlation")
    moved = float(np.clip(-slope.mean() / curvature, -1.0, 1.0))
    error = mean_with_error(slope, spacing)
    factor = spacing / abs(curvature)
    return replace(
        error,
        mean=(lag + moved) * spacing,
        standard_error=error.standard_error * factor,
        ci95=error.ci95 * factor,
    )


def _unit_rms(record: Array) -> Array | None:
    """Record of zero mean and unit rms; None for a constant one."""
    rest = standardise(record)
    if rest.scale == 0.0:
        return None
    scaled: Array = rest.values / np.sqrt(np.mean(rest.values**2))
    return scaled


def _lagged_products(a: Array, b: Array, reach: int) -> Array:
    """Means of a(t) b(t + lag), divisor n, for the lags −reach … reach."""
    padded = 1 << (2 * a.size - 1).bit_length()
    products = np.fft.irfft(np.conj(np.fft.rfft(a, padded)) * np.fft.rfft(b, padded), padded) / a.size
    ordered: Array = np.concatenate((products[padded - reach :], products[: reach + 1]))
    return ordered


def _common_memory(a: Array, b: Array) -> float:
    """Sum over all lags of the product of both autocorrelations, in samples; kept positive."""
    window = min(initial_monotone_memory(a).window, initial_monotone_memory(b).window)
    products = autocovariance(a)[: window + 1] * autocovariance(b)[: window + 1]
    return max(float(products[0] + 2.0 * products[1:].sum()), 1.0 / a.size)
