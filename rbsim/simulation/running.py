"""Running a case into a folder, and going on where a run stopped."""

from __future__ import annotations

import json
import threading
import time
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

from rbsim.config.loading import load_case
from rbsim.config.schema import Case
from rbsim.config.writing import case_to_toml
from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.march import FinishedStep, March
from rbsim.dynamics.state import State
from rbsim.dynamics.stepper import Stepper, compile_loops
from rbsim.dynamics.stepsize import Stride
from rbsim.errors import ConfigError, DivergedError, InterruptedRunError, RunFolderError
from rbsim.files.atomic import write_text
from rbsim.files.checkpoint import read_newest, write_checkpoint
from rbsim.files.layout import RunFolder, create_run_folder, open_run_folder
from rbsim.files.lock import locked
from rbsim.files.reader import open_run
from rbsim.simulation.assembly import agenda_of, control_of, equations_of, fresh_state
from rbsim.simulation.recorder import Recorder
from rbsim.simulation.storing import pack, start_from_file, unpack
from rbsim.simulation.summary import Summary, summarise

#: Seconds after which a start explains why it takes so long.
PATIENCE = 1.0


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


def simulate(case: Case, folder: str | Path, options: RunOptions | None = None) -> RunFolder:
    """Run a case into a new folder.

    Parameters
    ----------
    case : Case
        What to simulate.
    folder : str or Path
        New or empty folder.
    options : RunOptions, optional
        Threads, library, progress.

    Returns
    -------
    RunFolder
        The finished run; read it with `open_run`.

    Raises
    ------
    ConfigError
        The case cannot be started.
    RunFolderError
        The folder is in use or cannot be written.
    DivergedError
        The state stopped being finite; the last good checkpoint is named.
    InterruptedRunError
        `should_stop` said so.
    """
    options = options or RunOptions()
    equations = equations_of(case, options.threads, options.library)
    _warm_up(options.notice)
    state = _initial_state(case, equations)
    place = create_run_folder(folder)
    with locked(place):
        write_text(place.case, case_to_toml(case))
        recorder = Recorder(case, equations, place)
        recorder.begin(state)
        run = _Run(case, case.time.end, place, equations, recorder, options)
        run.save(state, None)
        run.march(state, None)
    return place


def resume(folder: str | Path, until: float | None = None, options: RunOptions | None = None) -> RunFolder:
    """Go on with an interrupted run, or with a finished one to a later end.

    Parameters
    ----------
    folder : str or Path
        Run folder.
    until : float, optional
        New end in free-fall times.
    options : RunOptions, optional
        Threads, library, progress.

    Returns
    -------
    RunFolder
        The finished run.

    Raises
    ------
    ConfigError
        The new end lies before the present time.
    RunFolderError, DivergedError, InterruptedRunError
        As in `simulate`.
    """
    options = options or RunOptions()
    open_run_folder(folder)
    place = RunFolder(Path(folder))
    with locked(place):
        open_run_folder(folder, for_writing=True)
        case = load_case(place.case)
        checkpoint, path, notices = read_newest(place)
        state, stride = unpack(checkpoint)
        end = _new_end(case, until, state.time)
        for line in (*notices, f"resuming from {path.name} at time {state.time:.6g}"):
            if options.notice:
                options.notice(line)
        if until is not None:
            case = case.model_copy(update={"time": case.time.model_copy(update={"end": end})})
            write_text(place.case, case_to_toml(case))
        equations = equations_of(case, options.threads, options.library)
        _warm_up(options.notice)
        _refuse_other_shape(place, equations, state)
        recorder = Recorder(case, equations, place)
        recorder.resume(dict(checkpoint.counts))
        _Run(case, end, place, equations, recorder, options).march(state, stride)
    return place


def write_summary(folder: RunFolder) -> Summary | None:
    """Average a run, write summary.json and return the summary (None for very short runs)."""
    summary = summarise(open_run(folder.path).history)
    if summary is not None:
        write_text(folder.summary, json.dumps(summary.as_dict(), indent=2) + "\n")
    return summary


def _warm_up(notice: Callable[[str], None] | None) -> None:
    """Make the compiled loops ready, and say so when that takes a while."""
    text = "compiling the numerical loops (once; later starts find them on disk) ..."
    timer = threading.Timer(PATIENCE, notice or (lambda _: None), (text,))
    timer.start()
    try:
        compile_loops()
    finally:
        timer.cancel()


class _Run:
    """The loop that ties march, recorder, checkpoints and progress together."""

    def __init__(
        self,
        case: Case,
        end: float,
        folder: RunFolder,
        equations: BoussinesqEquations,
        recorder: Recorder,
        options: RunOptions,
    ) -> None:
        self._case = case
        self._end = end
        self._folder = folder
        self._equations = equations
        self._recorder = recorder
        self._options = options
        self._saved_at = time.monotonic()
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
        self._recorder.flush()
        checkpoint = pack(self._equations, state, stride, self._recorder.counts())
        write_checkpoint(self._folder, state.steps, checkpoint)
        self._saved_at = time.monotonic()

    def _look_up(self, state: State, step: FinishedStep, stride: Stride | None) -> None:
        """Between two steps: report, save when it is time, stop when asked to."""
        options = self._options
        if options.watch:
            options.watch(self._progress(state, step))
        stopping = options.should_stop is not None and options.should_stop()
        if stopping or time.monotonic() - self._saved_at > self._case.output.checkpoint_seconds:
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


def _initial_state(case: Case, equations: BoussinesqEquations) -> State:
    if case.start.kind == "state":
        return start_from_file(str(case.start.path), equations)
    return fresh_state(case, equations)


def _new_end(case: Case, until: float | None, now: float) -> float:
    end = case.time.end if until is None else until
    if until is not None and not until > now:
        raise ConfigError(f"--until {until:g}: must be later than the present time {now:g} of the run")
    return end


def _refuse_other_shape(folder: RunFolder, equations: BoussinesqEquations, state: State) -> None:
    wanted = equations.new_state()
    if (wanted.theta.shape, wanted.psi.shape) != (state.theta.shape, state.psi.shape):
        raise RunFolderError(
            f"{folder.path}: the checkpoint belongs to another grid than case.toml; restore case.toml, or "
            "start a new run with start.kind = 'state'"
        )
