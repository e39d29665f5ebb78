"""Grids that follow the solution: spectral tails of a state and the number of points they ask for."""

from __future__ import annotations

from math import ceil, log

import numpy as np

from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.state import State
from rbsim.errors import NotConvergedError

#: Last modes in each direction that count as the tail; three of them meet both parities.
TAIL = 3
#: Most points in either direction.
LARGEST = 2048


def tail_sizes(state: State) -> tuple[float, float]:
    """Return the largest |θ| coefficient of the last modes in x and in z, relative to the largest of all."""
    sizes = np.abs(state.theta)
    largest = float(sizes.max())
    return float(sizes[:, -TAIL:].max()) / largest, float(sizes[-TAIL:].max()) / largest


def finer_grid(equations: BoussinesqEquations, state: State, goal: float) -> tuple[int, int] | None:
    """Return the points in x and z on which the tails should reach a goal, or None if they do already.

    Coefficients fall exponentially, so the number of modes grows with the logarithm of the goal.

    Raises
    ------
    NotConvergedError
        More than 2048 points would be needed.
    """
    grid = equations.grid
    tails = tail_sizes(state)
    if max(tails) <= goal:
        return None
    nx, nz = (_points(count, tail, goal) for count, tail in zip((grid.nx, grid.nz), tails, strict=True))
    if max(nx, nz) > LARGEST:
        cell = equations.cell
        raise NotConvergedError(
            f"steady state at Ra = {cell.rayleigh:.6g}, Pr = {cell.prandtl:.6g}, period {cell.width:.6g}: "
            f"needs a grid of {nx} x {nz}, more than {LARGEST} points; choose a smaller Ra or period"
        )
    return nx, nz


def _points(count: int, tail: float, goal: float) -> int:
    if tail <= goal:
        return count
    wanted = count * log(0.3 * goal) / log(min(tail, 0.1))
    return comfortable(ceil(min(2.0 * count, max(1.15 * count, wanted))))


def comfortable(count: int) -> int:
    """Return the next multiple of 8 that transforms fast (prime factors 2, 3 and 5)."""
    count = 8 * ceil(count / 8)
    while not _is_smooth(count):
        count += 8
    return count


def _is_smooth(count: int) -> bool:
    for factor in (2, 3, 5):
        while count % factor == 0:
            count //= factor
    return count == 1
