"""Which times a march must hit, and how long its steps are between them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from math import ceil, floor, inf, ulp

#: Two times closer than this fraction of the shortest interval are the same time.
SAME_TIME = 1e-6

#: So are two times closer than this, or than a few roundings of the time itself.
SAME_MOMENT, ROUNDINGS = 1e-7, 8.0

#: A stride is planned anew when its steps could be longer by this factor.
GROWTH = 1.5

#: Fresh strides aim a little below the Courant limit, so that they seldom need to be cut.
AIM = 0.9


@dataclass(frozen=True)
class Agenda:
    """Regular appointments of a march, and its end.

    Parameters
    ----------
    intervals : mapping of str to float
        Interval of each kind of appointment in free-fall times; they fall on its multiples.
    end : float
        Last time in free-fall times, an appointment called "end".
    """

    intervals: Mapping[str, float]
    end: float

    def _tolerance(self, time: float) -> float:
        """Return how close two times near `time` must be to be the same, below half the shortest interval."""
        shortest = min(self.intervals.values(), default=self.end or 1.0)
        return min(0.4 * shortest, max(SAME_TIME * shortest, SAME_MOMENT, ROUNDINGS * ulp(time)))

    def next_after(self, time: float) -> float:
        """Return the first appointment later than `time`."""
        soonest, tolerance = self.end, self._tolerance(time)
        for interval in self.intervals.values():
            soonest = min(soonest, interval * (floor((time + tolerance) / interval) + 1))
        return self.end if self.end - soonest < tolerance else soonest

    def due_at(self, time: float) -> tuple[str, ...]:
        """Return the kinds of appointments that fall on `time`."""
        due = [
            name
            for name, interval in self.intervals.items()
            if abs(time - interval * round(time / interval)) < self._tolerance(time)
        ]
        return (*due, "end") if time >= self.end - self._tolerance(time) else tuple(due)


@dataclass(frozen=True)
class StepControl:
    """Limits of the step size.

    Parameters
    ----------
    courant : float
        Largest Courant number Δt·max(|u|/Δx + |w|/Δz) on the dealiased grid. Pure advection is stable up to
        √3·3/(2π) = 0.83; more only where diffusion damps the last modes.
    largest : float
        Largest step in free-fall times.
    fixed : bool
        Ignore the Courant number: the way to each appointment is split evenly into steps up to `largest`.
    smallest : float
        A Courant limit that asks for a smaller step means that the state explodes.
    """

    courant: float = 0.8
    largest: float = 0.05
    fixed: bool = False
    smallest: float = 1e-8

    def longest(self, rate: float, aim: float = 1.0) -> float:
        """Return the longest step allowed at a Courant rate, times `aim` where the rate decides."""
        if self.fixed:
            return self.largest
        return min(self.largest, aim * self.courant / rate if rate > 0 else inf)


@dataclass(frozen=True)
class Stride:
    """Equal steps towards the next appointment; part of what a checkpoint must keep.

    Parameters
    ----------
    target : float
        Time of the appointment.
    left : int
        Steps still to take.
    step_size : float
        Their length in free-fall times.
    """

    target: float
    left: int
    step_size: float

    def after_step(self) -> Stride:
        """Return the stride with one step less to take."""
        return replace(self, left=self.left - 1)


def plan_stride(
    control: StepControl, stride: Stride | None, time: float, rate: float, agenda: Agenda
) -> Stride:
    """Continue a stride, fit its steps to the Courant limit when need be, or begin the next one.

    A pure function of its arguments, so that a resumed march takes the very same steps.

    Parameters
    ----------
    control : StepControl
        Limits of the step size.
    stride : Stride or None
        What is under way.
    time : float
        Present time.
    rate : float
        Courant rate of the present state.
    agenda : Agenda
        Appointments.
    """
    if stride is not None and stride.left > 0:
        too_long = stride.step_size > control.longest(rate) * (1.0 + SAME_TIME)
        too_short = stride.left > 1 and stride.step_size * GROWTH < control.longest(rate, AIM)
        if not too_long and not too_short:
            return stride
        target = stride.target
    else:
        target = agenda.next_after(time)
    span = target - time
    count = max(1, ceil(span / control.longest(rate, AIM) - SAME_TIME))
    step_size = span / count
    if stride is not None and abs(step_size - stride.step_size) < 1e-9 * step_size:
        step_size = stride.step_size  # spares a factorisation for a difference of rounding
    return Stride(target, count, step_size)
