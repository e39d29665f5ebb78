"""End of the transient: where a record, or several records of one run, become statistically steady."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from rbsim.series.records import Array, checked_record
from rbsim.series.stationarity import stationarity_test
from rbsim.series.steadiness import settled_half_width

BATCH = 5
"""Samples averaged before the rule is applied: MSER-5 (White, Cobb & Spratt 2000)."""
FEWEST_BATCHES = 20
LATEST = 0.5
"""A start later than this fraction of the record is not believed."""
LAST_CANDIDATE = 0.9
"""The last tenth is never a start: the variance of so few samples is small by chance (White 1997)."""


@dataclass(frozen=True)
class Transient:
    """Where the steady part of a record begins.

    Parameters
    ----------
    index : int
        First sample of the steady part; at most half of the record.
    trustworthy : bool
        False if more than half would have to go, a drift is left, or the record is too short.
    reason : str
        One phrase: what the rule found.
    record : str
        Name of the record that decided; empty for a single one.
    """

    index: int
    trustworthy: bool
    reason: str
    record: str = ""


def end_of_transient(values: npt.ArrayLike, batch: int = BATCH) -> Transient:
    """Return the end of the transient: the marginal standard error rule, then a test for a remaining drift.

    Parameters
    ----------
    values : array_like, shape (n,)
        Record at even spacing.
    batch : int
        Samples averaged first; 1 gives MSER, 5 gives MSER-5.

    Returns
    -------
    Transient
        The start d that minimises the squared standard error of the remaining means, var/(m − d) with m
        batches; later by tenths of the record while the rest is found to drift. A record whose second half
        settles to a constant is trusted too.

    Raises
    ------
    ValueError
        If the record is not valid or the batch is not positive.

    Notes
    -----
    White 1997, Simulation 69, 323; batches of five: White, Cobb & Spratt 2000, Winter Simul. Conf., 755
    (both from memory). Steps of a tenth up to one half: Heidelberger & Welch 1983, Oper. Res. 31, 1109. The
    first rule alone leaves a slow transient in a record of little noise, because it minimises the scatter
    and not the bias.
    """
    record = checked_record(values)
    if batch < 1:
        raise ValueError(f"batch {batch}: must be at least 1")
    count = record.size // batch
    if count < FEWEST_BATCHES:
        return Transient(0, False, f"only {count} batches of {batch} samples, {FEWEST_BATCHES} needed")
    latest = int(LATEST * record.size)
    best, first_half = _least_standard_error(record, batch, latest)
    if settled_half_width(record[latest:]) is not None:
        return Transient(min(best, latest), True, "settles to a constant")
    if best > latest:
        return Transient(
            first_half, False, "the standard error is smallest in the second half: drifting or too short"
        )
    return _steady_from(record, best, latest)


def _least_standard_error(record: Array, batch: int, latest: int) -> tuple[int, int]:
    """First samples of the best start of all, and of the best that is not too late."""
    count = record.size // batch
    # the incomplete batch is left out at the beginning, where the transient is
    offset = record.size - count * batch
    means = record[offset:].reshape(count, batch).mean(axis=1)
    criterion = marginal_standard_error(means)[: int(LAST_CANDIDATE * count)]
    starts = np.where(np.arange(criterion.size) > 0, offset + batch * np.arange(criterion.size), 0)
    early = criterion[starts <= latest]
    return int(starts[np.argmin(criterion)]), int(starts[np.argmin(early)])


def _steady_from(record: Array, start: int, latest: int) -> Transient:
    """Move the start by tenths of the record until the rest passes the test."""
    for moved in range(start, latest + 1, max(record.size // 10, 1)):
        test = stationarity_test(record[moved:])
        if not test.testable:
            return Transient(start, False, "too few correlation times to test for a drift")
        if test.steady:
            return Transient(moved, True, "smallest standard error, no drift after it")
    return Transient(start, False, "drifts in its second half: still transient")


def latest_transient(records: Mapping[str, npt.ArrayLike], batch: int = BATCH) -> Transient:
    """Return the latest end of the transient of several records of one run.

    The kinetic energy settles last in convection, the Nusselt number early; together they decide.

    Parameters
    ----------
    records : mapping of str to array_like, shape (n,)
        Records by name, all at the same times.
    batch : int
        As in `end_of_transient`.

    Returns
    -------
    Transient
        The latest index and the record it comes from; trustworthy only if every record is. The reason is
        that of the first record that is not, otherwise of the latest.

    Raises
    ------
    ValueError
        If there is no record or their lengths differ.
    """
    sizes = {name: np.size(values) for name, values in records.items()}
    if len(set(sizes.values())) != 1:
        raise ValueError(f"records of lengths {sizes}: at least one, and all of one length")
    found = {name: end_of_transient(values, batch) for name, values in records.items()}
    latest = max(found, key=lambda name: found[name].index)
    doubtful = [name for name, transient in found.items() if not transient.trustworthy]
    decisive = doubtful[0] if doubtful else latest
    return Transient(found[latest].index, not doubtful, found[decisive].reason, decisive)


def marginal_standard_error(values: Array) -> Array:
    """Return var/(n − d) of the values from d on, for every start d.

    Parameters
    ----------
    values : ndarray, shape (n,)
        Finite values.

    Returns
    -------
    ndarray, shape (n,)
        In squared units, of a record scaled to a largest departure of 1 from the mean of its second half.
    """
    # centred on the later part and summed from the end, so that a decayed transient does not swamp the rest
    size = float(np.abs(values).max()) or 1.0
    rest = values / size
    rest = rest - rest[rest.size // 2 :].mean()
    rest = rest / (float(np.abs(rest).max()) or 1.0)
    remaining = np.arange(rest.size, 0, -1)
    sums = np.cumsum(rest[::-1])[::-1]
    squares = np.cumsum(rest[::-1] ** 2)[::-1]
    criterion: Array = np.maximum(squares - sums**2 / remaining, 0.0) / remaining.astype(np.float64) ** 2
    return criterion
