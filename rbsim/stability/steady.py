"""Steady states of the simulator's equations: 0 = L c + N(c), by Newton's method and Krylov's.

The linear systems are preconditioned by the implicit solve of one very long time step, (M − τ L)⁻¹ ≈ −(τ L)⁻¹
(Stokes preconditioning: Mamun & Tuckerman 1995, Phys. Fluids 7, 80; reference from memory), so that residuals
have the units of coefficients.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from rbsim.dynamics.cell import Cell
from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.state import State
from rbsim.errors import NotConvergedError
from rbsim.spectral.grid import Array, Grid
from rbsim.spectral.team import Team
from rbsim.spectral.transforms import choose_threads, choose_transforms
from rbsim.stability.kernels import length
from rbsim.stability.krylov import minimal_residual
from rbsim.stability.subspace import Sign, Subspace

#: Length τ of the time step of the preconditioner in thermal diffusion times.
LONG_STEP = 1e4
#: Residual, relative to the state, at which Newton's method stops.
TOLERANCE = 2e-13
#: A residual below this that no longer falls is rounding error.
ROUNDING = 1e-9
#: Size of the difference quotient relative to the state; the equations are quadratic, so 1e-7 costs 7 digits
#: of one correction and none of the result.
DIFFERENCE = 1e-7
#: Most Newton and Krylov iterations.
NEWTON_LIMIT, KRYLOV_LIMIT = 15, 1500


def new_equations(cell: Cell, nx: int, nz: int) -> BoussinesqEquations:
    """Return the equations of a cell on a dealiased grid, with as many threads as pay."""
    grid = Grid(nx, nz, cell.width)
    return BoussinesqEquations(cell, grid, choose_transforms(grid), Team(choose_threads(grid)))


class SteadyProblem:
    """The steady equations in one symmetry class, as maps of real vectors.

    Parameters
    ----------
    equations : BoussinesqEquations
        Cell and grid.
    mirror, half_turn : {1, −1, 0}
        Symmetry class as in `Subspace`.
    """

    def __init__(self, equations: BoussinesqEquations, mirror: Sign = 1, half_turn: Sign = 0) -> None:
        self.equations = equations
        self.space = Subspace(equations, mirror, half_turn)
        self._pairs = (equations.heat, equations.flow)
        self._step = LONG_STEP / equations.cell.diffusivity
        self._factors = (equations.heat.new_factors(), equations.flow.new_factors())
        for pair, factors in zip(self._pairs, self._factors, strict=True):
            pair.factorise(self._step, factors)

    def explicit(self, vector: Array) -> Array:
        """Return N(c)."""
        state = self.space.unpack(vector)
        heat, flow = np.empty_like(state.theta), np.empty_like(state.psi)
        self.equations.explicit_terms(state, heat, flow)
        return self.space.pack(heat, flow)

    def implicit(self, vector: Array) -> Array:
        """Return L c."""
        state = self.space.unpack(vector)
        heat, flow = self._pairs
        return self.space.pack(heat.apply_stiffness(state.theta), flow.apply_stiffness(state.psi))

    def equation(self, vector: Array) -> Array:
        """Return L c + N(c)."""
        return self.implicit(vector) + self.explicit(vector)

    def precondition(self, vector: Array) -> Array:
        """Return nearly L⁻¹ r."""
        state = self.space.unpack(vector)
        theta, psi = (
            pair.solve(factors, part)
            for pair, factors, part in zip(self._pairs, self._factors, (state.theta, state.psi), strict=True)
        )
        return -self._step * self.space.pack(theta, psi)

    def residual(self, vector: Array) -> Array:
        """Return nearly L⁻¹ (L c + N(c)), in the units of c."""
        return self.precondition(self.equation(vector))

    def tangent(self, vector: Array) -> Callable[[Array], Array]:
        """Return the preconditioned Jacobian at c, as a map of directions."""
        here, size = self.explicit(vector), DIFFERENCE * length(vector)

        def product(direction: Array) -> Array:
            step = size / length(direction)
            slope = (self.explicit(vector + step * direction) - here) / step
            return self.precondition(self.implicit(direction) + slope)

        return product


@dataclass(frozen=True, eq=False)
class NewtonResult:
    """A solution of the steady equations.

    Parameters
    ----------
    vector : ndarray
        Coefficients in the subspace of the problem.
    residual : float
        Norm of the preconditioned residual over that of the coefficients.
    newton, krylov : int
        Iterations of both kinds.
    """

    vector: Array
    residual: float
    newton: int
    krylov: int


def solve_steady(problem: SteadyProblem, guess: Array) -> NewtonResult:
    """Find the steady state near a guess.

    Parameters
    ----------
    problem : SteadyProblem
        Equations and symmetry class.
    guess : ndarray, shape (problem.space.size,)
        First approximation, not zero.

    Raises
    ------
    NotConvergedError
        The residual grew, or did not fall within the allowed iterations.
    """
    vector, krylov, sizes = guess, 0, []
    for newton in range(NEWTON_LIMIT + 1):
        rest = problem.residual(vector)
        sizes.append(length(rest) / length(vector))
        if _finished(sizes):
            return NewtonResult(vector, sizes[-1], newton, krylov)
        if not sizes[-1] < 1e3 * (sizes[0] + 1.0):
            break
        step = minimal_residual(problem.tangent(vector), -rest, _forcing(sizes[-1]), KRYLOV_LIMIT)
        krylov += step.iterations
        vector = vector + step.vector
    raise NotConvergedError(_failure(problem.equations, sizes, krylov))


def _finished(sizes: list[float]) -> bool:
    stalled = len(sizes) > 1 and sizes[-1] > 0.3 * sizes[-2]
    return sizes[-1] < TOLERANCE or (stalled and max(sizes[-2:]) < ROUNDING)


def _forcing(size: float) -> float:
    """Accuracy of one correction, as far as the next residual gains (Dembo, Eisenstat & Steihaug 1982)."""
    return min(3e-2, max(0.1 * size, 0.2 * TOLERANCE / size))


def _failure(equations: BoussinesqEquations, sizes: list[float], krylov: int) -> str:
    cell, grid = equations.cell, equations.grid
    return (
        f"steady state at Ra = {cell.rayleigh:.6g}, Pr = {cell.prandtl:.6g}, period {cell.width:.6g} on "
        f"{grid.nx} x {grid.nz}: residual {sizes[0]:.1e} became {sizes[-1]:.1e} after {len(sizes) - 1} "
        f"Newton and {krylov} Krylov iterations; start closer to the solution or use a finer grid"
    )


def transport(equations: BoussinesqEquations, state: State) -> tuple[float, float]:
    """Return the Nusselt and the Reynolds number of a steady state.

    Nu = 1 + ⟨wθ⟩/(κ δ) with the drop δ of the mean temperature between the fluid's faces, which is 1 between
    plates of fixed temperature; Re is that of the rms velocity, Re = ⟨u² + w²⟩^½/ν.
    """
    u, w, temperature = equations.fields(state)
    weights, cell = equations.grid.weights_z, equations.cell
    flux = float(weights @ np.mean(w * temperature, axis=1))
    square = float(weights @ np.mean(u * u + w * w, axis=1))
    mean = equations.temperature_basis.to_chebyshev(state.theta[:, 0].real)
    drop = 1.0 + 2.0 * float(np.sum(mean[1::2]))  # odd polynomials are 1 at z = 0 and −1 at z = 1
    return 1.0 + flux / (cell.diffusivity * drop), np.sqrt(square) / cell.viscosity
