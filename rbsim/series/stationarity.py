"""Whether a record has the same mean throughout: a test on its partial sums."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from rbsim.series.averages import mean_with_error
from rbsim.series.records import checked_record, standardise

CRITICAL = 0.461
"""5 % point of the Cramér–von Mises statistic of a Brownian bridge (Anderson & Darling 1952)."""


@dataclass(frozen=True)
class Stationarity:
    """Outcome of the test.

    Parameters
    ----------
    statistic : float
        Cramér–von Mises statistic of the partial sums; infinite if the record is too short.
    steady : bool
        Whether the statistic is below its 5 % point.
    testable : bool
        False if the second half has too few effective samples to know its variance.
    """

    statistic: float
    steady: bool
    testable: bool


def stationarity_test(values: npt.ArrayLike) -> Stationarity:
    """Test a record for a drifting mean.

    Parameters
    ----------
    values : array_like, shape (n,)
        Finite values at even spacing, n ≥ 4.

    Raises
    ------
    ValueError
        If the record is not one-dimensional and finite with at least four samples.

    Notes
    -----
    Heidelberger & Welch 1983, Oper. Res. 31, 1109: the partial sums of the departures from the mean, over
    the root of the long-run variance times n, are a Brownian bridge for a steady record. The long-run
    variance is that of the second half, which a transient spoils least.
    """
    rest = standardise(checked_record(values, 4))
    n = rest.values.size
    if rest.scale == 0.0:
        return Stationarity(0.0, True, True)
    half = rest.values[n // 2 :]
    error = mean_with_error(half, 1.0)
    if math.isinf(error.ci95):
        return Stationarity(math.inf, False, False)
    long_run = error.standard_error**2 * half.size
    squares = float(np.mean(np.cumsum(rest.values) ** 2))
    statistic = squares / (n * long_run) if long_run > 0.0 else math.inf
    return Stationarity(statistic, statistic < CRITICAL, True)
