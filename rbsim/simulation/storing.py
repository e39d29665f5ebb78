"""States to checkpoints and back."""

from __future__ import annotations

from pathlib import Path

from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.starts import from_state
from rbsim.dynamics.state import State
from rbsim.dynamics.stepsize import Stride
from rbsim.errors import ConfigError, RunFolderError
from rbsim.files.checkpoint import Checkpoint, read_checkpoint, read_newest
from rbsim.files.layout import open_run_folder


def pack(
    equations: BoussinesqEquations, state: State, stride: Stride | None, counts: dict[str, int]
) -> Checkpoint:
    """Return the checkpoint of a run at this moment.

    Parameters
    ----------
    equations : BoussinesqEquations
        Cell, grid and transform library.
    state : State
        The state.
    stride : Stride or None
        The stride under way.
    counts : dict of str to int
        Rows of the run file.
    """
    facts: dict[str, object] = {"time": state.time, "steps": state.steps, **_plates(equations)}
    facts |= {"transforms": equations.transforms.name, "threads": equations.team.threads}
    if stride is not None:
        facts |= {"stride_target": stride.target, "stride_left": stride.left, "stride_step": stride.step_size}
    return Checkpoint(state.theta, state.psi, facts, counts)


def unpack(checkpoint: Checkpoint) -> tuple[State, Stride | None]:
    """Return state and stride of a checkpoint."""
    facts = checkpoint.facts
    state = State(checkpoint.theta, checkpoint.psi, float(facts["time"]), int(facts["steps"]))
    if "stride_left" not in facts:
        return state, None
    return state, Stride(
        float(facts["stride_target"]), int(facts["stride_left"]), float(facts["stride_step"])
    )


def start_from_file(path: str, equations: BoussinesqEquations) -> State:
    """Return the state of a checkpoint or of a run's newest one, interpolated to this grid, clock at zero.

    Raises
    ------
    ConfigError
        If there is no such state, or its plates move differently.
    """
    place = Path(path)
    try:
        checkpoint = read_newest(open_run_folder(place))[0] if place.is_dir() else read_checkpoint(place)
    except RunFolderError as error:
        raise ConfigError(f"case: key 'start.path': {error.message}") from error
    wanted = _plates(equations)
    found = {key: checkpoint.facts[key] for key in wanted}
    if found != wanted:
        raise ConfigError(
            f"case: key 'start.path' = {path!r}: its plates are {found['bottom']} and {found['top']}, "
            f"this case has {wanted['bottom']} and {wanted['top']}; start from a run with the same plates"
        )
    return from_state(equations, unpack(checkpoint)[0])


def _plates(equations: BoussinesqEquations) -> dict[str, str]:
    return {"bottom": equations.cell.bottom.motion, "top": equations.cell.top.motion}
