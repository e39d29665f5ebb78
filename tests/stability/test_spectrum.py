"""Stability of rolls against dense eigenvalues and against the time-stepping simulator."""

from __future__ import annotations

import numpy as np
import pytest
import scipy.linalg

from rbsim.dynamics.cell import Cell, Plate
from rbsim.dynamics.stepper import Stepper
from rbsim.stability.rolls import Roll, refined, roll_path, steady_roll
from rbsim.stability.spectrum import RollMode, followed_mode, leading_modes, oscillatory_onset
from rbsim.stability.steady import SteadyProblem, new_equations
from rbsim.stability.subspace import Subspace

CELL, GRID = Cell(4e3, 0.71, 2.0), (32, 32)


@pytest.fixture(scope="module")
def roll() -> Roll:
    return steady_roll(CELL, GRID)


@pytest.fixture(scope="module")
def modes(roll: Roll) -> list[RollMode]:
    return leading_modes(roll, 2)


def dense_eigenvalues(roll: Roll) -> np.ndarray:
    """All eigenvalues without symmetry classes, from columns of quotients of the plain equations."""
    equations = new_equations(roll.cell, *roll.grid)
    problem = SteadyProblem(equations, 0, 0)
    space = problem.space
    base = space.pack(roll.state.theta, roll.state.psi)
    units = np.eye(space.size)
    # the equations are quadratic, so the central quotient is exact
    jacobian = np.array([0.5 * (problem.equation(base + e) - problem.equation(base - e)) for e in units]).T
    masses = []
    for unit in units:
        state = space.unpack(unit)
        masses.append(
            space.pack(equations.heat.apply_mass(state.theta), equations.flow.apply_mass(state.psi))
        )
    return np.asarray(scipy.linalg.eigvals(jacobian, np.array(masses).T))


def test_leading_modes_are_the_dense_eigenvalues(roll: Roll, modes: list[RollMode]) -> None:
    dense = dense_eigenvalues(roll)
    dense = dense[np.isfinite(dense)]
    for mode in modes:
        assert np.abs(dense - complex(mode.growth, mode.frequency)).min() < 1e-7
    slowest = dense[np.argsort(-dense.real)][:4].real
    assert modes[0].growth == pytest.approx(slowest[0], abs=1e-7)
    assert modes[1].growth == pytest.approx(slowest[1], abs=1e-7)


def test_translation_is_neutral_and_all_else_decays(modes: list[RollMode]) -> None:
    neutral = modes[0]
    assert (neutral.mirror, neutral.half_turn) == (-1, 1)
    assert abs(neutral.growth) < 1e-9
    assert all(mode.growth < -0.01 for mode in modes[1:])
    assert all(mode.residual < 1e-9 for mode in modes)


def assert_simulated(roll: Roll, mode: RollMode, time: float, step: float) -> None:
    """A run from roll + ε Re x must lead to roll + ε Re(x e^{σt})."""
    equations = new_equations(roll.cell, *roll.grid)
    space = Subspace(equations, mode.mirror, mode.half_turn)
    small = 1e-7
    state = space.unpack(small * mode.vector.real)
    state.theta += roll.state.theta
    state.psi += roll.state.psi
    stepper = Stepper(equations)
    stepper.set_step_size(step)
    for _ in range(round(time / step)):
        stepper.evaluate(state)
        stepper.advance(state)
    found = space.pack(state.theta - roll.state.theta, state.psi - roll.state.psi) / small
    expected = (mode.vector * np.exp(complex(mode.growth, mode.frequency) * time)).real
    # time steps of second order in the stiff terms
    np.testing.assert_allclose(found, expected, atol=2e-4 * np.abs(expected).max())


def test_a_run_decays_and_oscillates_as_predicted(roll: Roll, modes: list[RollMode]) -> None:
    mode = next(mode for mode in modes if mode.frequency > 0.1)
    assert_simulated(roll, mode, time=3.0, step=0.01)


def test_a_mode_is_followed_to_a_neighbour(roll: Roll, modes: list[RollMode]) -> None:
    mode = next(mode for mode in modes if mode.frequency > 0.1)
    there = steady_roll(Cell(4.2e3, 0.71, 2.0), (48, 32))
    moved = followed_mode(mode, roll, there)
    again = followed_mode(moved, there, roll)
    assert moved.growth != pytest.approx(mode.growth, rel=1e-4)
    assert complex(again.growth, again.frequency) == pytest.approx(complex(mode.growth, mode.frequency))


def test_unequal_plates_leave_the_mirror_only() -> None:
    found = leading_modes(steady_roll(Cell(3e3, 1.0, 2.0, Plate(), Plate("free-slip")), GRID), 1)
    assert [mode.half_turn for mode in found] == [0, 0]
    assert abs(found[0].growth) < 1e-9


@pytest.mark.physics
def test_rolls_turn_oscillatory_and_a_run_confirms_it() -> None:
    """Pr = 0.71, Γ = 2, no-slip: the rolls begin to sway near Ra = 8.34e5 (own converged value)."""
    *_, last = roll_path(Cell(6e5, 0.71, 2.0))
    start = refined(last, 1e-6)
    swaying = next(mode for mode in leading_modes(start, 1) if mode.frequency > 0.1)
    critical, mode = oscillatory_onset(start, swaying)
    assert critical.cell.rayleigh == pytest.approx(8.340e5, rel=1e-3)
    assert abs(mode.growth) < 1e-6
    above = steady_roll(Cell(1.05 * critical.cell.rayleigh, 0.71, 2.0), critical.grid)
    growing = followed_mode(mode, critical, above)
    assert growing.growth > 1e-4
    assert_simulated(above, growing, time=22.0, step=0.01)
