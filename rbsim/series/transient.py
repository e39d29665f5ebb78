"""End of the transient: where a record, or several records of one run, become statistically steady."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from rbsim.series.records import Array, checked_record

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
        False if the rule would discard more than half, or the record is too short for it.
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
    """Return the end of the transient by the marginal standard error rule.

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
        batches.

    Raises
    ------
    ValueError
        If the record is not valid or the batch is not positive.

    Notes
    -----
    White 1997, Simulation 69, 323; batches of five: White, Cobb & Spratt 2000, Winter Simul. Conf., 755
    (both from memory). A minimum in the second half means that the record is too short (common practice);
    the best start in the first half is then returned and flagged.
    """
    record = checked_record(values)
    if batch < 1:
        raise ValueError(f"batch {batch}: must be at least 1")
    count = record.size // batch
    if count < FEWEST_BATCHES:
        return Transient(0, False, f"only {count} batches of {batch} samples, {FEWEST_BATCHES} needed")
    # the incomplete batch is left out at the beginning, where the transient is
    offset = record.size - count * batch
    means = record[offset:].reshape(count, batch).mean(axis=1)
    criterion = marginal_standard_error(means)[: int(LAST_CANDIDATE * count)]
    start = int(np.argmin(criterion))
    latest = int(LATEST * count)
    if start <= latest:
        return Transient(
            _sample(start, offset, batch), True, f"smallest standard error from batch {start} of {count}"
        )
    start = int(np.argmin(criterion[: latest + 1]))
    reason = "the standard error is smallest in the second half: still drifting or too short"
    return Transient(_sample(start, offset, batch), False, reason)


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


def _sample(start: int, offset: int, batch: int) -> int:
    """First sample of a batch; nothing is discarded for the first one."""
    return offset + start * batch if start else 0
