"""Marching in time: a generator of finished steps; recording, saving and progress live outside."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

from rbsim.dynamics.state import State
from rbsim.dynamics.stepper import Stepper
from rbsim.dynamics.stepsize import Agenda, StepControl, Stride, plan_stride
from rbsim.errors import DivergedError


@dataclass(frozen=True)
class FinishedStep:
    """What is known when a step is done.

    Parameters
    ----------
    time : float
        Free-fall times since the start.
    step_size : float
        Length of the step.
    courant : float
        Courant number at the beginning of the step.
    due : tuple of str
        Appointments that fall on `time`.
    """

    time: float
    step_size: float
    courant: float
    due: tuple[str, ...]


class March:
    """Marches a state through its appointments.

    Parameters
    ----------
    stepper : Stepper
        What advances the state.
    state : State
        Changes in place.
    agenda : Agenda
        Times to hit exactly, and the end.
    control : StepControl
        Limits of the step size.
    stride : Stride, optional
        What was under way when the state was saved.
    """

    def __init__(
        self,
        stepper: Stepper,
        state: State,
        agenda: Agenda,
        control: StepControl,
        stride: Stride | None = None,
    ) -> None:
        self.state = state
        self.stride = stride
        self._stepper = stepper
        self._agenda = agenda
        self._control = control

    def steps(self) -> Iterator[FinishedStep]:
        """Take steps until the end of the agenda, yielding after each one.

        Raises
        ------
        DivergedError
            The state is no longer finite, or the Courant limit asks for a vanishing step.
        """
        while "end" not in self._agenda.due_at(self.state.time):
            yield self._take_step()

    def _take_step(self) -> FinishedStep:
        state = self.state
        rate = self._stepper.evaluate(state)
        stride = plan_stride(self._control, self.stride, state.time, rate, self._agenda)
        if self._control.longest(rate) < self._control.smallest:
            raise self._divergence("fell below the smallest step", rate, stride.step_size)
        self._stepper.set_step_size(stride.step_size)
        self._stepper.advance(state)
        if not state.is_physical():
            raise self._divergence("left the physical range of temperatures", rate, stride.step_size)
        self.stride = stride.after_step()
        if self.stride.left == 0:
            state.time = stride.target
        due = self._agenda.due_at(state.time) if self.stride.left == 0 else ()
        return FinishedStep(state.time, stride.step_size, rate * stride.step_size, due)

    def _divergence(self, what: str, rate: float, step_size: float) -> DivergedError:
        time = self.state.time
        return DivergedError(
            f"the run {what} at time {time:.6g} (step {step_size:.3g}, Courant {rate * step_size:.3g}): "
            "use a finer grid, a smaller time.courant or a smaller time.step",
            time=time,
            step_size=step_size,
        )
