"""Order of the time stepping, and a manufactured solution of the whole solver."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from itertools import pairwise

import numpy as np
import pytest
from numpy.polynomial import chebyshev

from rbsim.dynamics.cell import Cell, Plate
from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.schemes import SPALART_MOSER_ROGERS
from rbsim.dynamics.starts import conduction_with_noise, single_roll
from rbsim.dynamics.state import State
from rbsim.dynamics.stepper import Stepper
from rbsim.spectral.banded import ComplexArray
from rbsim.spectral.grid import Grid
from rbsim.spectral.team import Team
from rbsim.spectral.transforms import choose_transforms
from rbsim.spectral.ultraspherical import derivative


def _equations(cell: Cell, nx: int, nz: int) -> BoussinesqEquations:
    grid = Grid(nx, nz, cell.width)
    return BoussinesqEquations(cell, grid, choose_transforms(grid, "scipy.fft"), Team(1))


def _run(equations: BoussinesqEquations, start: State, end: float, steps: int) -> State:
    stepper, state = Stepper(equations), start.copy()
    stepper.set_step_size(end / steps)
    for _ in range(steps):
        stepper.evaluate(state)
        stepper.advance(state)
    return state


def _orders(equations: BoussinesqEquations, start: State, end: float, steps: tuple[int, ...]) -> list[float]:
    """Observed orders between successive step numbers, against a run with many more steps."""
    truth = _run(equations, start, end, 8 * steps[-1])
    errors = [np.abs(_run(equations, start, end, n).theta - truth.theta).max() for n in steps]
    return [float(np.log2(a / b)) for a, b in pairwise(errors)]


def test_tables_that_do_not_add_up_are_refused() -> None:
    with pytest.raises(ValueError, match="span"):
        replace(SPALART_MOSER_ROGERS, alpha=(Fraction(1), Fraction(0), Fraction(0)))
    with pytest.raises(ValueError, match="one step"):
        replace(
            SPALART_MOSER_ROGERS,
            alpha=SPALART_MOSER_ROGERS.alpha[:1],
            beta=SPALART_MOSER_ROGERS.beta[:1],
            gamma=SPALART_MOSER_ROGERS.gamma[:1],
            zeta=SPALART_MOSER_ROGERS.zeta[:1],
        )


def test_explicit_part_is_third_order_on_a_nonlinear_flow() -> None:
    """Diffusion is so weak here that the explicit part alone decides the error."""
    equations = _equations(Cell(1e12, 1.0, 2.0), 48, 48)
    start = single_roll(equations, 1, 0.4)
    start = _run(equations, start, 1.0, 200)
    orders = _orders(equations, start, 1.0, (20, 40, 80))
    assert min(orders) > 2.8


def test_whole_scheme_is_at_least_second_order_on_a_diffusive_flow() -> None:
    equations = _equations(Cell(2e4, 1.0, 2.0), 32, 32)
    start = _run(equations, conduction_with_noise(equations, 0.05, 3), 10.0, 400)
    orders = _orders(equations, start, 1.0, (20, 40, 80))
    assert min(orders) > 1.9


Z = np.polynomial.Polynomial([0, 1])

#: Shapes of ψ that satisfy the plate conditions: no-slip, free-slip, no-slip below free-slip.
FLOW_SHAPES = {
    ("no-slip", "no-slip"): Z**2 * (1 - Z) ** 2,
    ("free-slip", "free-slip"): Z - 2 * Z**3 + Z**4,
    ("no-slip", "free-slip"): 3 * Z**2 - 5 * Z**3 + 2 * Z**4,
}


class _ForcedEquations(BoussinesqEquations):
    """Boussinesq equations with sources that make a chosen smooth flow the exact solution.

    θ = e^{−t} a(z) cos kx + sin(t) b(z),  ψ = cos(2t) c(z) sin kx + 0.3 sin(3t) c(z): a roll and a mean flow.
    """

    stage_times = (0.0, 8 / 15, 2 / 3)

    def __init__(self, plates: tuple[str, str]) -> None:
        cell, grid = Cell(500.0, 0.8, 2.2, Plate(plates[0]), Plate(plates[1])), Grid(24, 24, 2.2)
        super().__init__(cell, grid, choose_transforms(grid, "scipy.fft"), Team(1))
        self.k = 2 * np.pi / cell.width
        self.clock, self.step, self.stage = 0.0, 0.0, 0
        self.a, self.b, self.c = Z * (1 - Z) * (1 + Z), Z * (1 - Z), FLOW_SHAPES[plates]

    def exact_coefficients(self, t: float) -> State:
        state = self.new_state()
        modes = self.grid.modes_z
        a, b, c = (self._chebyshev(p, modes) for p in (self.a, self.b, self.c))
        state.theta[:, 1] = 0.5 * np.exp(-t) * self.temperature_basis.from_chebyshev(a)
        state.theta[:, 0] = np.sin(t) * self.temperature_basis.from_chebyshev(b)
        state.psi[:, 1] = -0.5j * np.cos(2 * t) * self.flow_basis.from_chebyshev(c)
        state.psi[:, 0] = 0.3 * np.sin(3 * t) * self.flow_basis.from_chebyshev(c)
        state.time = t
        return state

    @staticmethod
    def _chebyshev(polynomial: np.polynomial.Polynomial, modes: int) -> np.ndarray:
        half = np.polynomial.Polynomial([0.5, -0.5])  # z of 1 − 2z
        series = chebyshev.poly2cheb(polynomial(half).coef)
        return np.pad(series, (0, modes - series.size))

    def sources(self, t: float) -> tuple[np.ndarray, np.ndarray]:
        """θ_t + u·∇θ − w − κ∇²θ and ω_t + u·∇ω − ∂xθ − ν∇²ω on the grid, from the closed forms."""
        x, z, k = self.grid.x[None, :], self.grid.z[:, None], self.k
        cos, sin = np.cos(k * x), np.sin(k * x)
        e, s, g, h = np.exp(-t), np.sin(t), np.cos(2 * t), 0.3 * np.sin(3 * t)

        def d(p: np.polynomial.Polynomial, n: int = 0) -> np.ndarray:
            return (p.deriv(n) if n else p)(z)

        u, w = -d(self.c, 1) * (g * sin + h), k * g * d(self.c) * cos
        theta_x = -k * e * d(self.a) * sin
        theta_z = e * d(self.a, 1) * cos + s * d(self.b, 1)
        lap_theta = e * (d(self.a, 2) - k**2 * d(self.a)) * cos + s * d(self.b, 2)
        theta_t = -e * d(self.a) * cos + np.cos(t) * d(self.b)
        heat = theta_t + u * theta_x + w * theta_z - w - self.cell.diffusivity * lap_theta
        o, o_z = d(self.c, 2) - k**2 * d(self.c), d(self.c, 3) - k**2 * d(self.c, 1)
        bilaplace = d(self.c, 4) - 2 * k**2 * d(self.c, 2) + k**4 * d(self.c)
        omega_t = -2 * np.sin(2 * t) * o * sin + 0.9 * np.cos(3 * t) * d(self.c, 2)
        advection = u * k * g * o * cos + w * (g * o_z * sin + h * d(self.c, 3))
        friction = self.cell.viscosity * (g * bilaplace * sin + h * d(self.c, 4))
        return heat, omega_t + advection - theta_x - friction

    def unload_columns(self, terms: tuple[ComplexArray, ComplexArray], start: int, stop: int) -> None:
        super().unload_columns(terms, start, stop)
        t = self.clock + self.stage_times[self.stage] * self.step
        self.stage = (self.stage + 1) % 3
        waves = np.exp(-1j * np.outer(self.grid.x, self.grid.wavenumbers)) / self.grid.nx
        inverse = np.linalg.inv(chebyshev.chebvander(1 - 2 * self.grid.z, self.grid.nz - 1))
        for term, source, order in zip(terms, self.sources(t), (2, 4), strict=True):
            modes = (inverse @ (source @ waves))[: self.grid.modes_z]
            term += (derivative(0, self.grid.modes_z, order) @ modes)[: len(term)]


def _forced_error(plates: tuple[str, str], steps: int) -> float:
    equations = _ForcedEquations(plates)
    stepper, state = Stepper(equations), equations.exact_coefficients(0.0)
    stepper.set_step_size(1.0 / steps)
    equations.step = 1.0 / steps
    for _ in range(steps):
        equations.clock = state.time
        stepper.evaluate(state)
        stepper.advance(state)
    truth = equations.exact_coefficients(1.0)
    return float(max(np.abs(state.theta - truth.theta).max(), np.abs(state.psi - truth.psi).max()))


@pytest.mark.parametrize("plates", FLOW_SHAPES, ids="-".join)
def test_manufactured_solution_is_reached_with_the_order_of_the_scheme(plates: tuple[str, str]) -> None:
    errors = [_forced_error(plates, steps) for steps in (20, 40, 80)]
    assert np.log2(errors[0] / errors[1]) > 1.9
    assert np.log2(errors[1] / errors[2]) > 1.9
    assert errors[2] < 1e-5
