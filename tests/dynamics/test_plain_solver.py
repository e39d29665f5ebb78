"""The compiled stepper against the straightforward solver of the benchmark."""

from __future__ import annotations

import importlib.util
from pathlib import Path
from types import ModuleType

import numpy as np
import pytest

from rbsim.dynamics.cell import Cell, Plate
from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.starts import conduction_with_noise
from rbsim.dynamics.stepper import Stepper
from rbsim.spectral.grid import Grid
from rbsim.spectral.team import Team
from rbsim.spectral.transforms import choose_transforms


@pytest.fixture(scope="module")
def plain() -> ModuleType:
    path = Path(__file__).parents[2] / "scripts" / "plain_solver.py"
    spec = importlib.util.spec_from_file_location("plain_solver", path)
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


@pytest.mark.parametrize("top", ["no-slip", "free-slip"])
@pytest.mark.parametrize("threads", [1, 2])
def test_ten_steps_of_a_nonlinear_flow_are_the_same(plain: ModuleType, top: str, threads: int) -> None:
    cell, grid = Cell(1e5, 0.7, 2.0, Plate("no-slip"), Plate(top)), Grid(48, 36, 2.0)
    equations = BoussinesqEquations(cell, grid, choose_transforms(grid, "scipy.fft"), Team(threads))
    stepper, state = Stepper(equations), conduction_with_noise(equations, 0.1, 3)
    stepper.set_step_size(0.02)
    for _ in range(300):
        stepper.evaluate(state)
        stepper.advance(state)
    solver = plain.PlainSolver(cell, grid, 0.02)
    theta, psi = state.theta.copy(), state.psi.copy()
    for _ in range(10):
        stepper.evaluate(state)
        stepper.advance(state)
        theta, psi = solver.step(theta, psi)
    np.testing.assert_allclose(state.theta, theta, atol=1e-12 * np.abs(theta).max())
    np.testing.assert_allclose(state.psi, psi, atol=1e-12 * np.abs(psi).max())
