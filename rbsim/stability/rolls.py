"""Steady rolls of one pair per period, from the onset mode to any Rayleigh number, on grids that suffice."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from math import exp, log, pi, sqrt

import numpy as np

from rbsim.dynamics.cell import Cell
from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.state import State
from rbsim.errors import ConfigError, NotConvergedError
from rbsim.stability.marginal import MarginalMode, marginal_mode
from rbsim.stability.resolution import finer_grid
from rbsim.stability.steady import NewtonResult, SteadyProblem, new_equations, solve_steady, transport

#: First grid; the first rolls are smooth.
FIRST_GRID = (32, 32)
#: First Rayleigh number over that of onset.
FIRST_EXCESS = 1.3
#: Smallest and largest step in ln Ra.
SMALLEST_STEP, LARGEST_STEP = 0.02, log(2.0)
#: Guesses of (Nu − 1) Ra/(Ra − Ra_c) for the first roll, tried in turn: about 1.43 between no-slip plates,
#: 2 between free-slip ones.
STRENGTHS = (1.43, 2.0, 1.0, 0.6, 3.0)
#: Spectral tail on the way and at the end.
ROUGH_TAIL, FINE_TAIL = 1e-5, 1e-9
#: Change of Nu and Re on doubling the grid, relative, below which all printed digits stand.
SETTLED = 5e-11


@dataclass(frozen=True, eq=False)
class Roll:
    """One steady state with a single roll pair in the period.

    Parameters
    ----------
    cell : Cell
        Pure numbers, period and plates.
    grid : tuple of int
        Dealiased points in x and z.
    state : State
        Coefficients; warm fluid rises at x = 0.
    nusselt, reynolds : float
        Heat transport and Reynolds number of the rms velocity.
    residual : float
        Norm of the preconditioned residual over that of the state.
    nusselt_change, reynolds_change : float
        Relative change on the last doubling of the grid; NaN if it was not doubled.
    krylov : int
        Krylov iterations spent on this state.
    """

    cell: Cell
    grid: tuple[int, int]
    state: State
    nusselt: float
    reynolds: float
    residual: float
    nusselt_change: float = float("nan")
    reynolds_change: float = float("nan")
    krylov: int = 0


def steady_roll(cell: Cell, grid: tuple[int, int] | None = None) -> Roll:
    """Return the steady roll pair of a cell.

    The rolls are followed from onset in steps of up to a factor of two in Ra. Where several rolls of the same
    symmetry coexist (no-slip, Pr = 1, Γ = 2: above Ra ≈ 1.6e7) such a step may meet another one; `branch`
    follows one solution in small steps.

    Parameters
    ----------
    cell : Cell
        Its width is the period of the roll pair.
    grid : tuple of int, optional
        Points in x and z of the result. By default the grid is refined until the spectral tails vanish, and
        doubled until neither the Nusselt nor the Reynolds number changes in its first ten digits.

    Raises
    ------
    ConfigError
        The Rayleigh number does not exceed that of onset for this period, or the plates are not covered.
    NotConvergedError
        The branch could not be followed up to the Rayleigh number.
    """
    *_, roll = roll_path(cell)
    return settled(roll) if grid is None else solved(cell, grid, roll.state)


def roll_path(cell: Cell) -> Iterator[Roll]:
    """Follow the rolls from onset to the Rayleigh number of a cell, on rough grids.

    Parameters
    ----------
    cell : Cell
        Where to end.

    Yields
    ------
    Roll
        States of increasing Rayleigh number, the last at that of the cell.
    """
    onset = onset_of(cell)
    first = replace(cell, rayleigh=min(cell.rayleigh, FIRST_EXCESS * onset.rayleigh))
    path = [_first_roll(first, onset)]
    yield path[-1]
    step = LARGEST_STEP
    while path[-1].cell.rayleigh < cell.rayleigh:
        here = path[-1].cell.rayleigh
        there = cell.rayleigh if log(cell.rayleigh / here) < 1.001 * step else here * exp(step)
        try:
            path.append(_next_roll(path, replace(cell, rayleigh=there)))
        except NotConvergedError as error:
            step *= 0.5
            if step < SMALLEST_STEP:
                raise NotConvergedError(
                    f"rolls followed up to Ra = {here:.6g} only: {error.message}"
                ) from error
        else:
            step = min(1.5 * step, LARGEST_STEP)
            path = path[-3:]
            yield path[-1]


def onset_of(cell: Cell) -> MarginalMode:
    """Return the marginal mode of the period of a cell, after checking that rolls exist."""
    bottom, top = cell.bottom, cell.top
    if bottom.biot == 0.0 == top.biot and bottom.motion != top.motion:
        raise ConfigError(
            "plates: rolls between two plates of fixed flux need the same motion at both, since the mean "
            "temperature is arbitrary; choose equal plates or another thermal condition"
        )
    onset = marginal_mode(bottom, top, 2.0 * pi / cell.width)
    if cell.rayleigh <= onset.rayleigh:
        raise ConfigError(
            f"rayleigh {cell.rayleigh:.10g}: rolls of period {cell.width:.6g} exist above Ra = "
            f"{onset.rayleigh:.10g} only; choose a larger Ra or another period"
        )
    return onset


def problem_of(equations: BoussinesqEquations) -> SteadyProblem:
    """Return the steady problem of a roll pair: even in x, and under the half turn between equal plates."""
    cell = equations.cell
    return SteadyProblem(equations, mirror=1, half_turn=1 if cell.bottom == cell.top else 0)


def solved(cell: Cell, grid: tuple[int, int], guess: State) -> Roll:
    """Return the steady roll near a guess, on a given grid.

    Parameters
    ----------
    cell : Cell
        Pure numbers, period and plates.
    grid : tuple of int
        Points in x and z.
    guess : State
        State on any grid, between plates of the same kind.
    """
    problem = problem_of(new_equations(cell, *grid))
    points = problem.equations.grid
    start = guess.resized(points.modes_z, points.modes_x)
    return measured(problem, solve_steady(problem, problem.space.pack(start.theta, start.psi)))


def refined(roll: Roll, goal: float) -> Roll:
    """Return a roll on a grid on which its spectral tails fall below a goal."""
    while True:
        wanted = finer_grid(new_equations(roll.cell, *roll.grid), roll.state, goal)
        if wanted is None:
            return roll
        roll = solved(roll.cell, wanted, roll.state)


def settled(roll: Roll) -> Roll:
    """Return a roll on a grid whose doubling changed neither Nu nor Re in their first ten digits."""
    roll = refined(roll, FINE_TAIL)
    while True:
        nx, nz = roll.grid
        finer = solved(roll.cell, (2 * nx, 2 * nz), roll.state)
        changes = (
            abs(finer.nusselt / roll.nusselt - 1.0),
            abs(finer.reynolds / roll.reynolds - 1.0),
        )
        roll = replace(finer, nusselt_change=changes[0], reynolds_change=changes[1])
        if max(changes) < SETTLED:
            return roll


def measured(problem: SteadyProblem, result: NewtonResult) -> Roll:
    """Return a solution as a roll, with its Nusselt and Reynolds number."""
    equations = problem.equations
    state = problem.space.unpack(result.vector)
    nusselt, reynolds = transport(equations, state)
    grid = (equations.grid.nx, equations.grid.nz)
    return Roll(equations.cell, grid, state, nusselt, reynolds, result.residual, krylov=result.krylov)


def _next_roll(path: list[Roll], cell: Cell) -> Roll:
    """Extrapolate the last rolls in ln Ra, solve, and refine where the tails ask for it."""
    points = [log(roll.cell.rayleigh) for roll in path]
    guess = extrapolated([roll.state for roll in path], points, log(cell.rayleigh))
    return refined(solved(cell, path[-1].grid, guess), ROUGH_TAIL)


def extrapolated(states: list[State], points: list[float], target: float) -> State:
    """Return the polynomial through some states at another parameter, on the grid of the last one."""
    last = states[-1]
    theta, psi = np.zeros_like(last.theta), np.zeros_like(last.psi)
    rows, columns = last.theta.shape[0] + 2, last.theta.shape[1]
    for i, state in enumerate(states):
        others = [p for j, p in enumerate(points) if j != i]
        weight = float(np.prod([(target - p) / (points[i] - p) for p in others]))
        same = state.resized(rows, columns)
        theta += weight * same.theta
        psi += weight * same.psi
    return State(theta, psi)


def _first_roll(cell: Cell, onset: MarginalMode) -> Roll:
    """Solve close to onset, with the amplitude that some weakly nonlinear slope would give."""
    equations = new_equations(cell, *FIRST_GRID)
    mode = onset_state(equations, onset)
    flux = transport(equations, mode)[0] - 1.0
    failure: NotConvergedError | None = None
    for strength in STRENGTHS:
        amplitude = sqrt(strength * (1.0 - onset.rayleigh / cell.rayleigh) / flux)
        try:
            roll = solved(cell, FIRST_GRID, State(amplitude * mode.theta, amplitude * mode.psi))
        except NotConvergedError as error:
            failure = error
        else:
            return refined(roll, ROUGH_TAIL)
    raise NotConvergedError(f"no roll found near onset: {failure}")


def onset_state(equations: BoussinesqEquations, onset: MarginalMode) -> State:
    """Return a marginal mode as a state with warm fluid rising at x = 0, largest θ about 1.

    Parameters
    ----------
    equations : BoussinesqEquations
        Cell and grid; the period of the cell must be that of the mode.
    onset : MarginalMode
        Mode of wavenumber k > 0.
    """
    modes = equations.grid.modes_z
    state = equations.new_state()
    heat = equations.temperature_basis.from_chebyshev(_fitted(onset.heat, modes))
    flow = equations.flow_basis.from_chebyshev(_fitted(onset.flow, modes))
    size = 2.0 * float(np.abs(heat).max())
    state.theta[:, 1] = heat / size
    # w = ∂x ψ in free-fall units, from κ/H
    state.psi[:, 1] = flow * (equations.cell.diffusivity / (1j * onset.wavenumber * size))
    return state


def _fitted(coefficients: np.ndarray, modes: int) -> np.ndarray:
    result = np.zeros(modes)
    kept = min(modes, coefficients.size)
    result[:kept] = coefficients[:kept]
    return result
