"""Rate of excursions: how often a record leaves its mean by more than a threshold, as when a plume passes."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import numpy.typing as npt

from rbsim.series.averages import mean_with_error
from rbsim.series.distributions import RULE_OF_THREE
from rbsim.series.estimate import Estimate
from rbsim.series.records import checked_record, checked_spacing, standardise

THRESHOLD = 2.0
REARM = 0.5
"""An excursion ends below this share of the threshold, lest noise count twice (common practice)."""


def excursion_rate(
    values: npt.ArrayLike, spacing: float, side: str, threshold: float = THRESHOLD, rearm: float = REARM
) -> Estimate:
    """Return the number of excursions per unit of time.

    Parameters
    ----------
    values : array_like, shape (n,)
        Statistically steady record at even spacing.
    spacing : float
        Time between samples.
    side : str
        "upper" for excursions above the mean, "lower" for those below.
    threshold : float
        Distance from the mean at which an excursion begins, in rms of the record.
    rearm : float
        Share of the threshold below which it ends; 1 counts every crossing.

    Returns
    -------
    Estimate
        Per unit of the spacing. The interval takes the threshold as known, which errs on the safe side; if
        there is no excursion it is that of the rule of three, 3 over the length.

    Raises
    ------
    ValueError
        If the record, the spacing, the side, the threshold or the share is not valid.
    """
    record, step = checked_record(values), checked_spacing(spacing)
    if side not in ("upper", "lower"):
        raise ValueError(f"side {side!r}: must be 'upper' or 'lower'")
    if not threshold > 0.0 or not 0.0 <= rearm <= 1.0:
        raise ValueError(f"threshold {threshold}, rearm {rearm}: must be positive and between 0 and 1")
    rest = standardise(record).values
    level = threshold * float(np.sqrt(np.mean(rest**2)))
    starts = excursion_starts(rest if side == "upper" else -rest, level, rearm * level)
    estimate = mean_with_error(starts.astype(np.float64), step)
    error, width = estimate.standard_error / step, estimate.ci95 / step
    if not starts.any():
        error, width = 1.0 / (record.size * step), RULE_OF_THREE / (record.size * step)
    return replace(estimate, mean=estimate.mean / step, standard_error=error, ci95=width)


def excursion_starts(values: npt.NDArray[np.float64], begin: float, end: float) -> npt.NDArray[np.bool_]:
    """Return where the record rises above one level for the first time since it was below another.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Finite values.
    begin, end : float
        Level that begins an excursion and the lower one (or equal) that ends it.

    Returns
    -------
    ndarray of bool, shape (n,)
        A record that begins above the level does not begin an excursion there.
    """
    state = np.where(values > begin, 1, np.where(values <= end, -1, 0))
    last = np.maximum.accumulate(np.where(state != 0, np.arange(values.size), -1))
    known = np.where(last >= 0, state[last], 0)
    starts = np.zeros(values.size, dtype=np.bool_)
    starts[1:] = (known[1:] == 1) & (known[:-1] == -1)
    return starts
