"""The loop of a run: march, record, save now and then, report, stop when asked to."""

from __future__ import annotations

import json
import time
from collections.abc import Callable
from dataclasses import dataclass

from rbsim.config.schema import Case
from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.march import FinishedStep, March
from rbsim.dynamics.state import State
from rbsim.dynamics.stepper import Stepper
from rbsim.dynamics.stepsize import Stride
from rbsim.errors import DivergedError, InterruptedRunError
from rbsim.files.atomic import write_text
from rbsim.files.checkpoint import write_checkpoint
from rbsim.files.layout import RunFolder
from rbsim.files.reader import open_run
from rbsim.simulation.assembly import agenda_of, control_of
from rbsim.simulation.recorder import Recorder
from rbsim.simulation.storing import pack
from rbsim.simulation.summary import Summary, summarise

#: Saving may take at most one part in this many of the time, whatever the case asks for.
SHARE_OF_SAVING = 20.0


@dataclass(frozen=True)
class Progress:
    """What is known of a run while it goes on.

    Parameters
    ----------
    time, end : float
        Present and last time in free-fall times.
    steps : int
        Steps since the start.
    step_size, courant : float
        Of the last step.
    nusselt : float
        Latest volume-mean Nusselt number.
    seconds_left : float
        Expected wall clock to the end.
    """

    time: float
    end: float
    steps: int
    step_size: float
    courant: float
    nusselt: float
    seconds_left: float


@dataclass(frozen=True)
class RunOptions:
    """How to run, as opposed to what.

    Parameters
    ----------
    threads : int, optional
        Number of threads instead of the one chosen by grid size.
    library : {"scipy.fft", "ducc0.fft"}, optional
        Transform library instead of the fastest one installed.
    watch : callable, optional
        Called with a `Progress` after every step.
    should_stop : callable, optional
        Asked after every step; True ends the run with a checkpoint and `InterruptedRunError`.
    notice : callable, optional
        Called with one line of text when something is worth saying.
    """

    threads: int | None = None
    library: str | None = None
    watch: Callable[[Progress], None] | None = None
    should_stop: Callable[[], bool] | None = None
    notice: Callable[[str], None] | None = None


class RunLoop:
    """Ties march, recorder, checkpoints and progress together.

    Parameters
    ----------
    case : Case
        What to simulate; its end is the end of the run.
    folder : RunFolder
        Where; its lock must be held.
    equations : BoussinesqEquations
        Discretised equations.
    recorder : Recorder
        What records.
    options : RunOptions
        How to run.
    """

    def __init__(
        self,
        case: Case,
        folder: RunFolder,
        equations: BoussinesqEquations,
        recorder: Recorder,
        options: RunOptions,
    ) -> None:
        self._case = case
        self._end = case.time.end
        self._folder = folder
        self._equations = equations
        self._recorder = recorder
        self._options = options
        self._saved_at = time.monotonic()
        self._saving_took = 0.0
        self._began: tuple[float, float] | None = None

    def march(self, state: State, stride: Stride | None) -> None:
        """March to the end, recording and saving on the way."""
        agenda = agenda_of(self._case, self._end)
        march = March(Stepper(self._equations), state, agenda, control_of(self._case), stride)
        try:
            for step in march.steps():
                self._recorder.record(state, step)
                self._look_up(state, step, march.stride)
        except DivergedError as error:
            self._recorder.flush()
            newest = self._folder.checkpoint_files()[0]
            raise DivergedError(
                f"{error.message}; the last good state is {newest}", error.time, error.step_size
            ) from error
        self.save(state, march.stride)
        write_summary(self._folder)

    def save(self, state: State, stride: Stride | None) -> None:
        """Bring the records to the disk, then the state."""
        began = time.monotonic()
        self._recorder.flush()
        checkpoint = pack(self._equations, state, stride, self._recorder.counts())
        write_checkpoint(self._folder, state.steps, checkpoint)
        self._saved_at = time.monotonic()
        self._saving_took = self._saved_at - began

    def _look_up(self, state: State, step: FinishedStep, stride: Stride | None) -> None:
        """Between two steps: report, save when it is time, stop when asked to."""
        options = self._options
        if options.watch:
            options.watch(self._progress(state, step))
        stopping = options.should_stop is not None and options.should_stop()
        pause = max(self._case.output.checkpoint_seconds, SHARE_OF_SAVING * self._saving_took)
        if stopping or time.monotonic() - self._saved_at > pause:
            self.save(state, stride)
        if stopping and "end" not in step.due:
            raise InterruptedRunError(
                f"{self._folder.path}: stopped at time {state.time:.6g} after a checkpoint; "
                f"go on with `rbsim resume {self._folder.path}`"
            )

    def _progress(self, state: State, step: FinishedStep) -> Progress:
        now = time.monotonic()
        if self._began is None:  # after the first step, which may have compiled the loops
            self._began = (now, state.time)
        began, from_time = self._began
        done = state.time - from_time
        left = (now - began) / done * (self._end - state.time) if done > 0 else float("nan")
        nusselt = self._recorder.latest.get("nusselt_volume", float("nan"))
        return Progress(state.time, self._end, state.steps, step.step_size, step.courant, nusselt, left)


def write_summary(folder: RunFolder) -> Summary | None:
    """Average a run, write summary.json and return the summary (None for very short runs)."""
    summary = summarise(open_run(folder.path))
    if summary is not None:
        write_text(folder.summary, json.dumps(summary.as_dict(), indent=2) + "\n")
    return summary
