"""Running a case into a folder, and going on where a run stopped."""

from __future__ import annotations

import threading
from collections.abc import Callable
from pathlib import Path

from rbsim.config.loading import load_case
from rbsim.config.schema import Case
from rbsim.config.writing import case_to_toml
from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.state import State
from rbsim.dynamics.stepper import compile_loops
from rbsim.errors import ConfigError, RunFolderError
from rbsim.files.atomic import write_text
from rbsim.files.checkpoint import Checkpoint, read_newest
from rbsim.files.layout import RunFolder, create_run_folder, open_run_folder
from rbsim.files.lock import locked
from rbsim.simulation.assembly import equations_of, fresh_state
from rbsim.simulation.loop import RunLoop, RunOptions
from rbsim.simulation.recorder import Recorder
from rbsim.simulation.storing import start_from_file, unpack
from rbsim.spectral.transforms import available_threads, installed_libraries

#: Seconds after which a start explains why it takes so long.
PATIENCE = 1.0


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
        _start(case, place, equations, state, options)
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
        case = _with_end(place, until)
        if place.checkpoint_files():
            _go_on(case, place, options)
        else:  # killed before its first checkpoint
            _say(options, "there is no checkpoint yet: starting over")
            equations = equations_of(case, options.threads, options.library)
            _warm_up(options.notice)
            state = _initial_state(case, equations)
            write_text(place.case, case_to_toml(case))
            _start(case, place, equations, state, options)
    return place


def _start(
    case: Case, place: RunFolder, equations: BoussinesqEquations, state: State, options: RunOptions
) -> None:
    """Record and save the initial state, then march."""
    recorder = Recorder(case, equations, place)
    recorder.begin(state)
    loop = RunLoop(case, place, equations, recorder, options)
    loop.save(state, None)
    loop.march(state, None)


def _go_on(case: Case, place: RunFolder, options: RunOptions) -> None:
    """March on from the newest checkpoint."""
    checkpoint, path, notices = read_newest(place)
    state, stride = unpack(checkpoint)
    if case.time.end < state.time:
        raise ConfigError(
            f"--until {case.time.end:g}: must be later than the present time {state.time:g} of the run"
        )
    for line in (*notices, f"resuming from {path.name} at time {state.time:.6g}"):
        _say(options, line)
    equations = equations_of(case, *_as_before(checkpoint, options))
    _warm_up(options.notice)
    _refuse_other_shape(place, equations, state)
    write_text(place.case, case_to_toml(case))
    recorder = Recorder(case, equations, place)
    recorder.resume(dict(checkpoint.counts))
    RunLoop(case, place, equations, recorder, options).march(state, stride)


def _with_end(place: RunFolder, until: float | None) -> Case:
    """Return the case of a run, with a later end if one is asked for."""
    case = load_case(place.case)
    if until is None:
        return case
    if not until > 0:
        raise ConfigError(f"--until {until:g}: must be a positive time")
    return case.model_copy(update={"time": case.time.model_copy(update={"end": until})})


def _as_before(checkpoint: Checkpoint, options: RunOptions) -> tuple[int, str]:
    """Return threads and transform library of the first part, where the user and the machine allow it."""
    threads = options.threads or min(int(checkpoint.facts["threads"]), available_threads())
    library = options.library or str(checkpoint.facts["transforms"])
    if library not in installed_libraries():
        _say(options, f"{library} is not installed here: going on with scipy.fft, equal to rounding only")
        library = "scipy.fft"
    return threads, library


def _say(options: RunOptions, line: str) -> None:
    if options.notice:
        options.notice(line)


def _warm_up(notice: Callable[[str], None] | None) -> None:
    """Make the compiled loops ready, and say so when that takes a while."""
    text = "compiling the numerical loops (once; later starts find them on disk) ..."
    timer = threading.Timer(PATIENCE, notice or (lambda _: None), (text,))
    timer.start()
    try:
        compile_loops()
    finally:
        timer.cancel()


def _initial_state(case: Case, equations: BoussinesqEquations) -> State:
    if case.start.kind == "state":
        return start_from_file(str(case.start.path), equations)
    return fresh_state(case, equations)


def _refuse_other_shape(folder: RunFolder, equations: BoussinesqEquations, state: State) -> None:
    wanted = equations.new_state()
    if (wanted.theta.shape, wanted.psi.shape) != (state.theta.shape, state.psi.shape):
        raise RunFolderError(
            f"{folder.path}: the checkpoint belongs to another grid than case.toml; restore case.toml, or "
            "start a new run with start.kind = 'state'"
        )
