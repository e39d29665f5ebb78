"""Branches of steady rolls in Ra, Pr or period by pseudo-arclength (Keller 1977); the best period."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from math import exp, log, sqrt
from typing import Literal

import numpy as np
from scipy.optimize import minimize_scalar

from rbsim.dynamics.cell import Cell
from rbsim.errors import NotConvergedError
from rbsim.spectral.grid import Array
from rbsim.stability.kernels import length
from rbsim.stability.krylov import minimal_residual
from rbsim.stability.rolls import Roll, measured, problem_of, refined, solved
from rbsim.stability.steady import NewtonResult, SteadyProblem, new_equations

Parameter = Literal["rayleigh", "prandtl", "period"]

#: Spectral tail allowed on a branch.
BRANCH_TAIL = 1e-7
#: Arclength steps: state relative to its norm at the start, and logarithm of the parameter.
FIRST_STEP, SMALLEST_STEP, LARGEST_STEP = 0.1, 1e-4, 0.35
#: Residual of a point, Newton iterations allowed, and those after which the step shrinks.
TOLERANCE, NEWTON_LIMIT, EASY = 1e-11, 8, 5
#: Accuracy of each linear solve, and its most iterations.
FORCING, KRYLOV_LIMIT = 1e-3, 1500
#: Difference of the logarithm of the parameter in derivatives.
DIFFERENCE = 1e-5
#: A branch whose Nu − 1 falls below this has come back to the conduction state.
VANISHING = 1e-3
#: Steps in the logarithm of the period on the way to a maximum, and the most of them.
BRACKET_STEP, BRACKET_LIMIT = 0.1, 23


def parameter_of(cell: Cell, parameter: Parameter) -> float:
    """Return the value of a parameter of a cell."""
    return {"rayleigh": cell.rayleigh, "prandtl": cell.prandtl, "period": cell.width}[parameter]


def with_parameter(cell: Cell, parameter: Parameter, value: float) -> Cell:
    """Return a cell with another value of a parameter."""
    if parameter == "period":
        return replace(cell, width=value)
    return replace(cell, rayleigh=value) if parameter == "rayleigh" else replace(cell, prandtl=value)


@dataclass(frozen=True, eq=False)
class _Place:
    """A point in the space of states and the logarithm of the parameter, or a direction in it."""

    vector: Array
    log: float

    def plus(self, step: float, direction: _Place) -> _Place:
        return _Place(self.vector + step * direction.vector, self.log + step * direction.log)


class _Corrector:
    """Newton's method on states and parameter together, on the plane through a predicted place.

    Parameters
    ----------
    roll : Roll
        Last roll; gives plates, grid and fixed parameters.
    parameter : {"rayleigh", "prandtl", "period"}
        What varies.
    size : float
        Norm of states that counts as arclength 1.
    """

    def __init__(self, roll: Roll, parameter: Parameter, size: float) -> None:
        self._roll, self._parameter, self._size = roll, parameter, size

    def problem(self, log_value: float) -> SteadyProblem:
        cell = with_parameter(self._roll.cell, self._parameter, exp(log_value))
        return problem_of(new_equations(cell, *self._roll.grid))

    def sensitivity(self, problem: SteadyProblem, place: _Place) -> Array:
        """Return the derivative of the preconditioned equations in the logarithm of the parameter."""
        sides = [self.problem(place.log + s * DIFFERENCE).equation(place.vector) for s in (1, -1)]
        return problem.precondition((sides[0] - sides[1]) / (2.0 * DIFFERENCE))

    def first_direction(self, place: _Place, sign: float) -> _Place:
        """Return the tangent of the branch, towards larger (+1) or smaller (−1) values of the parameter."""
        problem = self.problem(place.log)
        slope = minimal_residual(
            problem.tangent(place.vector), -self.sensitivity(problem, place), FORCING, KRYLOV_LIMIT
        ).vector
        return self.normalised(_Place(sign * slope, sign))

    def normalised(self, direction: _Place) -> _Place:
        scale = 1.0 / sqrt((length(direction.vector) / self._size) ** 2 + direction.log**2)
        return _Place(scale * direction.vector, scale * direction.log)

    def solve(self, predicted: _Place, direction: _Place) -> tuple[_Place, SteadyProblem, float, int]:
        """Return the place on the branch, its problem, its residual and the Newton iterations spent.

        Raises
        ------
        NotConvergedError
            The iteration did not contract.
        """
        place, last = predicted, np.inf
        for iteration in range(NEWTON_LIMIT + 1):
            problem = self.problem(place.log)
            rest = problem.residual(place.vector)
            residual = length(rest) / length(place.vector)
            if residual < TOLERANCE:
                return place, problem, residual, iteration
            if not residual < 2.0 * last:
                break
            last = residual
            place = place.plus(1.0, self._correction(problem, place, rest, direction))
        raise NotConvergedError(f"residual {last:.1e} did not fall")

    def _correction(self, problem: SteadyProblem, place: _Place, rest: Array, direction: _Place) -> _Place:
        """Solve the bordered system; it stays regular where the branch turns back."""
        tangent, slope, size = problem.tangent(place.vector), self.sensitivity(problem, place), self._size

        def product(long: Array) -> Array:
            change = long[:-1] * size
            above = tangent(change) if np.any(change) else np.zeros_like(change)
            along = direction.vector @ change / size**2 + direction.log * long[-1]
            return np.append((above + slope * long[-1]) / size, along)

        found = minimal_residual(product, np.append(-rest / size, 0.0), FORCING, KRYLOV_LIMIT).vector
        return _Place(found[:-1] * size, float(found[-1]))


def branch(roll: Roll, parameter: Parameter, target: float) -> Iterator[Roll]:
    """Follow a roll in one parameter, round folds, until the parameter reaches a target.

    Parameters
    ----------
    roll : Roll
        Where to start.
    parameter : {"rayleigh", "prandtl", "period"}
        What to vary.
    target : float
        Value of the parameter at which to stop; the last roll is exactly there.

    Yields
    ------
    Roll
        The starting roll, then further ones in the order of the branch.

    Raises
    ------
    NotConvergedError
        The branch ends in the conduction state, or cannot be followed; all rolls before were yielded.
    """
    walk = _Walk(refined(roll, BRANCH_TAIL), parameter, target)
    yield walk.roll
    while not walk.finished:
        walk.advance()
        yield walk.roll


class _Walk:
    """The last two rolls of a branch, the step and the aim."""

    def __init__(self, roll: Roll, parameter: Parameter, target: float) -> None:
        self.roll, self.finished = roll, target == parameter_of(roll.cell, parameter)
        self._parameter, self._target, self._step = parameter, target, FIRST_STEP
        self._previous: Roll | None = None
        self._sign = 1.0 if target > parameter_of(roll.cell, parameter) else -1.0
        self._size = length(_packed(roll, roll))

    def advance(self) -> None:
        """Take one step, halved as often as need be."""
        corrector = _Corrector(self.roll, self._parameter, self._size)
        here, direction = self._place(self.roll), self._direction(corrector)
        while True:
            try:
                following = self._attempt(corrector, here, direction)
                break
            except NotConvergedError as error:
                self._step *= 0.5
                if self._step < SMALLEST_STEP:
                    raise self._failure(error.message) from error
        if following.nusselt - 1.0 < VANISHING or _packed(following, self.roll) @ here.vector <= 0.0:
            raise self._failure("the rolls vanish there: onset")
        self._previous, self.roll = self.roll, refined(following, BRANCH_TAIL)

    def _attempt(self, corrector: _Corrector, here: _Place, direction: _Place) -> Roll:
        ahead = here.plus(self._step, direction)
        if self._sign * (ahead.log - log(self._target)) >= 0.0:
            last = here.plus((log(self._target) - here.log) / direction.log, direction)
            cell = with_parameter(self.roll.cell, self._parameter, self._target)
            following = solved(cell, self.roll.grid, corrector.problem(last.log).space.unpack(last.vector))
            self.finished = True
            return following
        place, problem, residual, iterations = corrector.solve(ahead, direction)
        self._step = min(LARGEST_STEP, self._step * (1.5 if iterations < EASY else 0.7))
        return measured(problem, NewtonResult(place.vector, residual, iterations, 0))

    def _place(self, roll: Roll) -> _Place:
        return _Place(_packed(roll, self.roll), log(parameter_of(roll.cell, self._parameter)))

    def _direction(self, corrector: _Corrector) -> _Place:
        if self._previous is None:
            return corrector.first_direction(self._place(self.roll), self._sign)
        return corrector.normalised(self._place(self.roll).plus(-1.0, self._place(self._previous)))

    def _failure(self, reason: str) -> NotConvergedError:
        here = parameter_of(self.roll.cell, self._parameter)
        return NotConvergedError(
            f"branch in {self._parameter} ended near {here:.6g}, before {self._target:.6g}: {reason}; "
            "the rolls up to there are kept"
        )


def _packed(roll: Roll, like: Roll) -> Array:
    """Return the free coefficients of a roll on the grid of another one."""
    problem = problem_of(new_equations(like.cell, *like.grid))
    grid = problem.equations.grid
    state = roll.state.resized(grid.modes_z, grid.modes_x)
    return problem.space.pack(state.theta, state.psi)


def best_period(roll: Roll, tolerance: float = 1e-6) -> Roll:
    """Return the roll of the period that carries most heat at given Ra and Pr, near the period of a roll.

    Parameters
    ----------
    roll : Roll
        Where to start; the nearest maximum uphill is found.
    tolerance : float
        Relative accuracy of the period; Nu is far more accurate, since it is stationary.

    Raises
    ------
    NotConvergedError
        No maximum was met within a factor of about ten.
    """
    rolls: dict[float, Roll] = {log(roll.cell.width): roll}

    def loss(log_period: float) -> float:
        nearest = min(rolls, key=lambda known: abs(known - log_period))
        start = rolls[nearest]
        cell = replace(start.cell, width=exp(log_period))
        rolls[log_period] = refined(solved(cell, start.grid, start.state), BRANCH_TAIL)
        return -rolls[log_period].nusselt

    bracket = _bracket(loss, log(roll.cell.width), roll.cell)
    found = minimize_scalar(loss, bracket=bracket, method="brent", options={"xtol": tolerance})
    return rolls[min(rolls, key=lambda known: abs(known - float(found.x)))]


def _bracket(loss: Callable[[float], float], start: float, cell: Cell) -> tuple[float, float, float]:
    """Walk downhill by equal steps until the loss grows again."""
    stride = BRACKET_STEP
    left, middle = loss(start), loss(start + stride)
    if middle > left:
        start, stride, left, middle = start + stride, -stride, middle, left
    for _ in range(BRACKET_LIMIT):
        right = loss(start + 2.0 * stride)
        if right > middle:
            return start, start + stride, start + 2.0 * stride
        start, middle = start + stride, right
    raise NotConvergedError(
        f"period of most heat at Ra = {cell.rayleigh:.6g}, Pr = {cell.prandtl:.6g}: none between "
        f"{exp(start):.4g} and {cell.width:.4g}; start from another period"
    )


def follow_best_period(roll: Roll, rayleigh: Array) -> Iterator[Roll]:
    """Follow the period of most heat through increasing or decreasing Rayleigh numbers.

    Parameters
    ----------
    roll : Roll
        Where to start.
    rayleigh : ndarray, shape (n,)
        Rayleigh numbers, neighbours within a factor of about two.

    Yields
    ------
    Roll
        The roll of most heat at each Rayleigh number.
    """
    best = roll
    for value in rayleigh:
        cell = replace(best.cell, rayleigh=float(value))
        best = best_period(refined(solved(cell, best.grid, best.state), BRANCH_TAIL))
        yield best
