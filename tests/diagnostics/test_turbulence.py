"""Turbulent convection at Ra = 1e7: budgets over a long window and the published heat transport."""

from __future__ import annotations

import tomllib
from pathlib import Path

import numpy as np
import pytest

from rbsim.diagnostics.measure import Measurement
from rbsim.diagnostics.nusselt import DEFINITIONS
from rbsim.diagnostics.resolution import recommended_points
from rbsim.dynamics.cell import Cell
from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.march import March
from rbsim.dynamics.starts import conduction_with_noise
from rbsim.dynamics.stepper import Stepper
from rbsim.dynamics.stepsize import Agenda, StepControl
from rbsim.spectral.grid import Grid
from rbsim.spectral.team import Team
from rbsim.spectral.transforms import choose_threads, choose_transforms

PUBLISHED = tomllib.loads(
    (Path(__file__).parents[1] / "published" / "johnston_doering_2009.toml").read_text(encoding="utf-8")
)
TRANSIENT, WINDOW = 200.0, 200.0


@pytest.fixture(scope="module")
def history() -> dict[str, np.ndarray]:
    cell = Cell(PUBLISHED["rayleigh"], PUBLISHED["prandtl"], PUBLISHED["aspect_ratio"])
    grid = Grid(*recommended_points(cell), cell.width)
    equations = BoussinesqEquations(cell, grid, choose_transforms(grid), Team(choose_threads(grid)))
    state, measurement = conduction_with_noise(equations, 0.05, 1), Measurement(equations)
    march = March(Stepper(equations), state, Agenda({"history": 0.2}, TRANSIENT + WINDOW), StepControl())
    rows = [
        measurement.history(state)
        for step in march.steps()
        if "history" in step.due and step.time > TRANSIENT
    ]
    return {name: np.array([row[name] for row in rows]) for name in rows[0]}


@pytest.mark.physics
def test_six_definitions_agree_within_one_percent_over_200_free_fall_times(
    history: dict[str, np.ndarray],
) -> None:
    raw = {name: history[f"nusselt_{name}"].mean() for name in DEFINITIONS}
    balanced = {
        name: raw[name] + (history[f"storage_{name}"].mean() if name != "volume" else 0.0)
        for name in DEFINITIONS
    }
    values = np.array(list(balanced.values()))
    assert np.ptp(values) < 0.01 * values.mean()
    assert np.ptp(list(raw.values())) < 0.03 * values.mean()  # what 200 free-fall times leave of the storage


@pytest.mark.physics
def test_nusselt_number_lies_within_six_percent_of_the_published_law(history: dict[str, np.ndarray]) -> None:
    law = PUBLISHED["prefactor"] * PUBLISHED["rayleigh"] ** PUBLISHED["exponent"]
    nusselt = history["nusselt_volume"].mean()
    assert nusselt == pytest.approx(law, rel=PUBLISHED["tolerance"])
    assert nusselt < 1 + 0.02634 * np.sqrt(
        PUBLISHED["rayleigh"]
    )  # Plasting & Kerswell 2003, value from memory
