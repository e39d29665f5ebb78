"""From a case to the objects that march: cell, grid, equations, step control, start."""

from __future__ import annotations

from rbsim.config.schema import MOST_POINTS, Case
from rbsim.diagnostics.resolution import recommended_points
from rbsim.dynamics.cell import Cell, Plate
from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.starts import conduction_with_noise, single_roll
from rbsim.dynamics.state import State
from rbsim.dynamics.stepsize import Agenda, StepControl
from rbsim.errors import ConfigError
from rbsim.probes.thermometer import Thermometer
from rbsim.spectral.grid import Grid
from rbsim.spectral.team import Team
from rbsim.spectral.transforms import choose_threads, choose_transforms

#: Kinds of appointments besides the readings of thermometers.
HISTORY_TIMES, PROFILE_TIMES, FIELD_TIMES = "history", "profiles", "field"


def cell_of(case: Case) -> Cell:
    """Return the ideal cell of a case."""
    return Cell(
        rayleigh=case.numbers.rayleigh,
        prandtl=case.numbers.prandtl,
        width=case.cell.aspect_ratio,
        bottom=Plate(case.plates.bottom.motion),
        top=Plate(case.plates.top.motion),
    )


def grid_of(case: Case) -> Grid:
    """Return the grid of a case, the recommended one for `grid = "auto"`.

    Raises
    ------
    ConfigError
        If the grid is too coarse for the wanted number of rolls.
    """
    if isinstance(case.grid, str):
        nx, nz = recommended_points(cell_of(case))
    else:
        nx, nz = case.grid.nx, case.grid.nz
    if max(nx, nz) > MOST_POINTS:
        raise ConfigError(
            f"case: key 'grid' = \"auto\": would need {nx} x {nz} points, more than {MOST_POINTS} in a "
            "direction; give grid.nx and grid.nz, or a smaller numbers.rayleigh or cell.aspect_ratio"
        )
    grid = Grid(nx, nz, case.cell.aspect_ratio)
    if case.start.kind == "roll" and case.start.pairs >= grid.modes_x:
        raise ConfigError(
            f"case: key 'start.pairs' = {case.start.pairs}: must be less than {grid.modes_x} on the grid "
            f"{nx} x {nz}; ask for fewer pairs or a finer grid"
        )
    return grid


def equations_of(case: Case, threads: int | None = None, library: str | None = None) -> BoussinesqEquations:
    """Return the discretised equations of a case.

    Parameters
    ----------
    case : Case
        What was asked for.
    threads : int, optional
        Number of threads instead of the one chosen by grid size.
    library : {"scipy.fft", "ducc0.fft"}, optional
        Transform library instead of the fastest one installed.
    """
    grid = grid_of(case)
    team = Team(threads or choose_threads(grid))
    return BoussinesqEquations(cell_of(case), grid, choose_transforms(grid, library), team)


def thermometers_of(case: Case) -> tuple[Thermometer, ...]:
    """Return the thermometers of a case."""
    return tuple(Thermometer(t.name, t.x, t.z, t.interval) for t in case.thermometers)


def agenda_of(case: Case, end: float) -> Agenda:
    """Return the appointments of a case: history, profiles, fields and one for each sampling interval."""
    intervals = {HISTORY_TIMES: case.output.history_interval, PROFILE_TIMES: case.output.profile_interval}
    if case.output.field_interval > 0:
        intervals[FIELD_TIMES] = case.output.field_interval
    for thermometer in case.thermometers:
        intervals[reading_name(thermometer.interval)] = thermometer.interval
    return Agenda(intervals, end)


def reading_name(interval: float) -> str:
    """Return the name of the appointment at which thermometers of this interval are read."""
    return f"readings every {interval!r}"


def control_of(case: Case) -> StepControl:
    """Return the limits of the step size."""
    if case.time.step is not None:
        return StepControl(courant=case.time.courant, largest=case.time.step, fixed=True)
    return StepControl(courant=case.time.courant)


def fresh_state(case: Case, equations: BoussinesqEquations) -> State:
    """Return the initial state of a case that does not start from a file."""
    start = case.start
    if start.kind == "roll":
        return single_roll(equations, start.pairs, start.amplitude)
    return conduction_with_noise(equations, start.amplitude, start.seed)
