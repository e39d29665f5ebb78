"""Newton's method on the simulator's operators."""

from __future__ import annotations

import numpy as np
import pytest

from rbsim.diagnostics.measure import Measurement
from rbsim.dynamics.cell import Cell, Plate
from rbsim.dynamics.stepper import Stepper
from rbsim.errors import NotConvergedError
from rbsim.stability.rolls import problem_of, steady_roll
from rbsim.stability.steady import new_equations, solve_steady, transport

CELL, GRID = Cell(5e3, 0.71, 2.0158), (64, 48)


def test_a_time_step_leaves_the_steady_state_alone() -> None:
    roll = steady_roll(CELL, GRID)
    stepper, state = Stepper(new_equations(CELL, *GRID)), roll.state.copy()
    stepper.set_step_size(0.02)
    for _ in range(20):
        stepper.evaluate(state)
        stepper.advance(state)
    np.testing.assert_allclose(state.theta, roll.state.theta, atol=1e-13)
    np.testing.assert_allclose(state.psi, roll.state.psi, atol=1e-13)


def test_all_six_nusselt_numbers_agree_on_a_steady_state() -> None:
    roll = steady_roll(CELL, (96, 64))
    history = Measurement(new_equations(CELL, 96, 64)).history(roll.state)
    for name in ("bottom", "top", "volume", "midplane", "thermal", "kinetic"):
        assert history[f"nusselt_{name}"] == pytest.approx(roll.nusselt, rel=1e-10)
        if name != "volume":
            assert abs(history[f"storage_{name}"]) < 1e-10
    assert history["reynolds"] == pytest.approx(roll.reynolds, rel=1e-12)


def test_the_tangent_is_the_derivative_of_the_residual() -> None:
    problem = problem_of(new_equations(CELL, 32, 32))
    draws = np.random.default_rng(4)
    here, direction = 0.01 * draws.standard_normal((2, problem.space.size))
    step = 1e-3
    sides = [problem.residual(here + s * step * direction) for s in (1, -1)]
    # the equations are quadratic: the central quotient is exact, the tangent's own has an error of 1e-7
    exact = (sides[0] - sides[1]) / (2 * step)
    np.testing.assert_allclose(problem.tangent(here)(direction), exact, atol=1e-5 * np.abs(exact).max())


def test_preconditioning_undoes_the_stiffness() -> None:
    problem = problem_of(new_equations(CELL, 32, 32))
    vector = np.random.default_rng(8).standard_normal(problem.space.size)
    np.testing.assert_allclose(problem.precondition(problem.implicit(vector)), vector, atol=1e-3)


def test_failure_says_where_and_why() -> None:
    problem = problem_of(new_equations(Cell(1e5, 0.71, 2.0), 24, 16))
    guess = np.random.default_rng(9).standard_normal(problem.space.size)
    with pytest.raises(NotConvergedError, match=r"Ra = 100000, Pr = 0.71, period 2 on 24 x 16: residual"):
        solve_steady(problem, guess)


def test_nusselt_number_at_fixed_flux_is_over_the_remaining_drop() -> None:
    """Flux 1 at both plates: Nu = 1/ΔT (check of the definition with the mean gradient, exact)."""
    plate = Plate("no-slip", 0.0)
    cell = Cell(2e3, 1.0, 3.0, plate, plate)
    roll = steady_roll(cell, (64, 48))
    equations = new_equations(cell, 64, 48)
    mean = equations.temperature_basis.to_chebyshev(roll.state.theta[:, 0].real)
    drop = 1.0 + mean.sum() - ((-1.0) ** np.arange(mean.size) * mean).sum()
    assert 0.3 < drop < 0.9
    assert roll.nusselt == pytest.approx(1.0 / drop, rel=1e-9)
    assert transport(equations, roll.state)[0] == roll.nusselt
