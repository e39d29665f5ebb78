"""One time step: stages of an implicit–explicit scheme on caller-owned storage, nothing allocated."""

from __future__ import annotations

from functools import partial

import numpy as np

from rbsim.dynamics import kernels
from rbsim.dynamics.cell import Cell
from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.schemes import SPALART_MOSER_ROGERS, LowStorageScheme
from rbsim.dynamics.state import State
from rbsim.spectral.grid import SMALLEST, Array, Grid
from rbsim.spectral.team import Team
from rbsim.spectral.transforms import choose_transforms


def compile_loops() -> None:
    """Take one step on the smallest grid, so that all compiled loops are ready (fast if on disk)."""
    cell = Cell(1e3, 1.0, 2.0)
    grid = Grid(SMALLEST, SMALLEST, cell.width)
    stepper = Stepper(BoussinesqEquations(cell, grid, choose_transforms(grid), Team(1)))
    state = stepper.equations.new_state()
    stepper.evaluate(state)
    stepper.set_step_size(1e-3)
    stepper.advance(state)


class Stepper:
    """Advances a state of given equations.

    A step has two halves: `evaluate` finds the explicit terms and the Courant rate of the state as it is, so
    that the caller may choose the step size; `advance` then completes the step.

    Parameters
    ----------
    equations : BoussinesqEquations
        What to integrate.
    scheme : LowStorageScheme
        How to integrate it.
    """

    def __init__(
        self, equations: BoussinesqEquations, scheme: LowStorageScheme = SPALART_MOSER_ROGERS
    ) -> None:
        self.equations = equations
        self.scheme = scheme
        self.step_size = 0.0
        self._weights: list[tuple[float, float, float]] = []
        state = equations.new_state()
        self._terms = [(np.zeros_like(state.theta), np.zeros_like(state.psi)) for _ in range(2)]
        self._increment = (np.empty_like(state.theta), np.empty_like(state.psi))
        self._pairs = (equations.heat, equations.flow)
        self._operators = [(p.bands[1], p.paired_squares, p.lower, p.stride) for p in self._pairs]
        self._factors: list[tuple[Array, Array]] = [
            (equations.heat.new_factors(), equations.flow.new_factors()) for _ in range(scheme.stages)
        ]

    def evaluate(self, state: State) -> float:
        """Form the products of the state for the next `advance` and return its Courant rate."""
        equations = self.equations
        equations.team.share(
            equations.grid.modes_x, lambda start, stop, _: equations.load_columns(state, start, stop)
        )
        return equations.multiply_rows()

    def set_step_size(self, step_size: float) -> None:
        """Factorise the implicit operators for another step size in free-fall times."""
        if step_size == self.step_size:
            return
        for beta, factors in zip(self.scheme.beta, self._factors, strict=True):
            for pair, storage in zip(self._pairs, factors, strict=True):
                pair.factorise(float(beta) * step_size, storage)
        scheme = self.scheme
        self._weights = [
            (step_size * float(a + b), step_size * float(g), step_size * float(z))
            for a, b, g, z in zip(scheme.alpha, scheme.beta, scheme.gamma, scheme.zeta, strict=True)
        ]
        self.step_size = step_size

    def advance(self, state: State) -> None:
        """Complete the step that `evaluate` began; the state changes in place, its clock included."""
        equations, last = self.equations, self.scheme.stages - 1
        for stage in range(self.scheme.stages):
            equations.team.share(equations.grid.modes_x, partial(self._advance_columns, state, stage))
            self._terms.reverse()
            if stage < last:
                equations.multiply_rows()
        state.time += self.step_size
        state.steps += 1

    def _advance_columns(self, state: State, stage: int, start: int, stop: int, _: int) -> None:
        """Finish one stage for some wavenumbers and begin the next one."""
        new, old = self._terms
        self.equations.unload_columns(new, start, stop)
        for i, values in enumerate((state.theta, state.psi)):
            kernels.solve_stage(
                self._operators[i],
                self._weights[stage],
                self._factors[stage][i],
                (values, new[i], old[i]),
                self._increment[i],
                start,
                stop,
            )
        if stage < self.scheme.stages - 1:
            self.equations.load_columns(state, start, stop)
