"""Thermometers read the spectral fields exactly, anywhere."""

from __future__ import annotations

import numpy as np
import pytest

from rbsim.dynamics.cell import Cell, Plate
from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.starts import conduction_with_noise
from rbsim.dynamics.state import State
from rbsim.dynamics.stepper import Stepper
from rbsim.probes.thermometer import Thermometer, ThermometerArray
from rbsim.spectral.grid import Grid
from rbsim.spectral.team import Team
from rbsim.spectral.transforms import choose_transforms


@pytest.fixture(scope="module")
def moving() -> tuple[BoussinesqEquations, State]:
    cell, grid = Cell(1e5, 1.0, 2.0, Plate("no-slip"), Plate("free-slip")), Grid(48, 40, 2.0)
    equations = BoussinesqEquations(cell, grid, choose_transforms(grid, "scipy.fft"), Team(1))
    state, stepper = conduction_with_noise(equations, 0.1, 7), Stepper(equations)
    stepper.set_step_size(0.02)
    for _ in range(300):
        stepper.evaluate(state)
        stepper.advance(state)
    return equations, state


def test_readings_at_grid_points_equal_the_fields(moving: tuple[BoussinesqEquations, State]) -> None:
    equations, state = moving
    grid, places = equations.grid, [(0, 0), (7, 3), (47, 39), (20, 20)]
    array = ThermometerArray(
        equations, [Thermometer(f"t{i}{j}", grid.x[i], grid.z[j], 0.1) for i, j in places]
    )
    u, w, temperature = equations.fields(state)
    expected = [[temperature[j, i], u[j, i], w[j, i]] for i, j in places]
    np.testing.assert_allclose(array.sample(state), expected, atol=1e-13)


def test_readings_between_grid_points_equal_those_of_a_finer_grid(
    moving: tuple[BoussinesqEquations, State],
) -> None:
    equations, state = moving
    fine_grid = Grid(192, 160, 2.0)
    fine = BoussinesqEquations(equations.cell, fine_grid, choose_transforms(fine_grid, "scipy.fft"), Team(1))
    refined = state.resized(fine_grid.modes_z, fine_grid.modes_x)
    u, w, temperature = fine.fields(refined)
    i, j = 29, 71
    array = ThermometerArray(equations, [Thermometer("between", fine_grid.x[i], fine_grid.z[j], 0.1)])
    np.testing.assert_allclose(array.sample(state)[0], [temperature[j, i], u[j, i], w[j, i]], atol=1e-13)


def test_readings_at_the_plates_satisfy_the_plate_conditions(
    moving: tuple[BoussinesqEquations, State],
) -> None:
    equations, state = moving
    plates = [Thermometer("bottom", 0.4, 0.0, 0.1), Thermometer("top", 0.4, 1.0, 0.1)]
    bottom, top = ThermometerArray(equations, plates).sample(state)
    np.testing.assert_allclose(bottom, [1.0, 0.0, 0.0], atol=1e-13)
    assert top[0] == pytest.approx(0.0, abs=1e-13)
    assert abs(top[1]) > 0.01  # a free-slip plate lets the fluid pass along it
    assert top[2] == pytest.approx(0.0, abs=1e-13)
