"""Whether statistics of two independent records differ more than chance."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy.special import stdtr, stdtrit

from rbsim.series.estimate import Estimate
from rbsim.series.moments import flatness_scale, moments_with_errors

LEVEL = 0.05
"""Chance that two equal records are told apart by any of the compared statistics together."""

DIFFERENT = "different"
EQUAL = "equal within chance"
UNDECIDED = "undecided: a record is too short"


@dataclass(frozen=True)
class Comparison:
    """One statistic of two records compared.

    Parameters
    ----------
    quantity : str
        Name of the statistic.
    first, second : Estimate
        The statistic of either record.
    difference : float
        Second minus first, in the units of the statistic.
    p_value : float
        Chance of a difference at least as large between equal records, this statistic alone.
    adjusted_p_value : float
        The same with Holm's correction for all statistics compared together.
    detectable : float
        Approximate difference that the two records could just tell from zero, this statistic alone;
        infinite for records that are too short.
    verdict : str
        "different", "equal within chance" or "undecided: a record is too short".
    """

    quantity: str
    first: Estimate
    second: Estimate
    difference: float
    p_value: float
    adjusted_p_value: float
    detectable: float
    verdict: str


@dataclass(frozen=True)
class Agreement:
    """Several statistics of two records compared at a common level.

    Parameters
    ----------
    comparisons : tuple of Comparison
        One per statistic.
    level : float
        Chance of calling any of them different although the records are equal.
    """

    comparisons: tuple[Comparison, ...]
    level: float

    @property
    def differs(self) -> bool:
        """Whether any statistic differs more than chance."""
        return any(c.verdict == DIFFERENT for c in self.comparisons)

    @property
    def verdict(self) -> str:
        """One sentence over all statistics."""
        named = {
            v: [c.quantity for c in self.comparisons if c.verdict == v] for v in (DIFFERENT, EQUAL, UNDECIDED)
        }
        if named[DIFFERENT]:
            return f"The records differ in {', '.join(named[DIFFERENT])} more than chance."
        if named[UNDECIDED]:
            return f"The records are too short to compare {', '.join(named[UNDECIDED])}."
        return f"The records do not differ in {', '.join(named[EQUAL])} more than chance."


def compare_records(
    first: npt.ArrayLike, second: npt.ArrayLike, spacings: tuple[float, float], level: float = LEVEL
) -> Agreement:
    """Compare mean, rms, skewness and flatness of two independent records.

    Parameters
    ----------
    first, second : array_like, shape (n,) and (m,)
        Statistically steady records.
    spacings : tuple of float
        Time between samples of the first and of the second record.
    level : float
        Chance of a false alarm over the four statistics together.

    Raises
    ------
    ValueError
        If a record, a spacing or the level is not valid.
    """
    a, b = (
        moments_with_errors(record, spacing)
        for record, spacing in zip((first, second), spacings, strict=True)
    )
    pairs = {name: (getattr(a, name), getattr(b, name)) for name in ("mean", "rms", "skewness", "flatness")}
    return compare_estimates(pairs, level)


def compare_estimates(pairs: Mapping[str, tuple[Estimate, Estimate]], level: float = LEVEL) -> Agreement:
    """Compare pairs of independent estimates.

    Parameters
    ----------
    pairs : mapping of str to (Estimate, Estimate)
        The two estimates of every statistic. Those named rms, correlation_time and flatness, which scatter
        unevenly, are compared as they are and as logarithms or 1/(F − 1); the larger p-value counts.
    level : float
        Chance of a false alarm over all statistics together.

    Raises
    ------
    ValueError
        If the level is not between 0 and 1.

    Notes
    -----
    Difference over its standard error against Student's t with the degrees of freedom of Welch 1947,
    Biometrika 34, 28; the p-values adjusted after Holm 1979, Scand. J. Statist. 6, 65. An estimate of
    infinite interval is compared with nothing: p-value 1 and the verdict undecided.
    """
    if not 0.0 < level < 1.0:
        raise ValueError(f"level {level}: must lie between 0 and 1")
    p_values = {name: _larger_p_value(name, *pair) for name, pair in pairs.items()}
    adjusted = dict(zip(p_values, holm(list(p_values.values())), strict=True))
    comparisons = tuple(
        Comparison(
            name,
            first,
            second,
            second.mean - first.mean,
            p_values[name],
            adjusted[name],
            _detectable(first, second),
            _verdict(first, second, adjusted[name] < level),
        )
        for name, (first, second) in pairs.items()
    )
    return Agreement(comparisons, level)


def holm(p_values: list[float]) -> list[float]:
    """Return the p-values adjusted for their number by Holm 1979: reject those below the level."""
    order = np.argsort(p_values, kind="stable")
    factors = np.arange(len(p_values), 0, -1)
    rising = np.maximum.accumulate(np.asarray(p_values)[order] * factors)
    adjusted = np.empty(len(p_values))
    adjusted[order] = np.minimum(rising, 1.0)
    return [float(p) for p in adjusted]


# value to the scale on which the estimate scatters nearly normally, and the size of the derivative there
_Scale = Callable[[float], tuple[float, float]]


def _plain(value: float) -> tuple[float, float]:
    """Scale of statistics that scatter evenly."""
    return value, 1.0


def _logarithm(value: float) -> tuple[float, float]:
    """Scale of positive statistics with a constant relative scatter."""
    return (math.log(value), 1.0 / value) if value > 0.0 else (-math.inf, 0.0)


def _flatness(value: float) -> tuple[float, float]:
    """Scale of the flatness."""
    scaled = flatness_scale(value)
    return (scaled, scaled**2) if math.isfinite(scaled) else (math.inf, 0.0)


_SCALES: dict[str, _Scale] = {"rms": _logarithm, "correlation_time": _logarithm, "flatness": _flatness}


def _larger_p_value(quantity: str, first: Estimate, second: Estimate) -> float:
    """Larger p-value of the plain difference and that on the statistic's own scale."""
    scales = {_plain, _SCALES.get(quantity, _plain)}
    return max(_p_value(scale, first, second) for scale in scales)


def _p_value(scale: _Scale, first: Estimate, second: Estimate) -> float:
    """Two-sided p-value of the difference of two independent estimates."""
    if math.isinf(first.ci95 + second.ci95) or first.mean == second.mean:
        return 1.0
    (a, slope_a), (b, slope_b) = scale(first.mean), scale(second.mean)
    error, freedom = _combined(first, second, slope_a, slope_b)
    if error == 0.0 or math.isinf(a - b):
        return 0.0
    return float(2.0 * stdtr(freedom, -abs(a - b) / error))


def _combined(first: Estimate, second: Estimate, slope_a: float, slope_b: float) -> tuple[float, float]:
    """Combine into the standard error of a difference and its degrees of freedom (Welch 1947)."""
    a, b = slope_a * first.standard_error, slope_b * second.standard_error
    error = math.hypot(a, b)
    if error == 0.0:
        return 0.0, 1.0
    # shares of the variance, so that tiny errors do not underflow when squared twice
    share_a, share_b = (a / error) ** 2, (b / error) ** 2
    freedom = 1.0 / (share_a**2 / first.degrees_of_freedom + share_b**2 / second.degrees_of_freedom)
    return error, freedom


def _detectable(first: Estimate, second: Estimate) -> float:
    """Half width of the 95 % interval of the difference."""
    if math.isinf(first.ci95 + second.ci95):
        return math.inf
    error, freedom = _combined(first, second, 1.0, 1.0)
    return float(stdtrit(freedom, 0.975)) * error


def _verdict(first: Estimate, second: Estimate, rejected: bool) -> str:
    """Word for the outcome of one comparison."""
    if math.isinf(first.ci95 + second.ci95):
        return UNDECIDED
    return DIFFERENT if rejected else EQUAL
