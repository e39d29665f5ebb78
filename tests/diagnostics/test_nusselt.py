"""Six definitions of the Nusselt number and the terms that tie them together."""

from __future__ import annotations

import numpy as np
import pytest

from rbsim.diagnostics.heights import raise_to_heights
from rbsim.diagnostics.layers import kinetic_layers, thermal_layers
from rbsim.diagnostics.measure import Measurement
from rbsim.diagnostics.nusselt import DEFINITIONS, RateOfChange
from rbsim.dynamics.cell import Cell, Plate
from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.march import March
from rbsim.dynamics.starts import conduction_with_noise, single_roll
from rbsim.dynamics.state import State
from rbsim.dynamics.stepper import Stepper
from rbsim.dynamics.stepsize import Agenda, StepControl
from rbsim.spectral.grid import Grid
from rbsim.spectral.team import Team
from rbsim.spectral.transforms import choose_transforms


def _equations(cell: Cell, nx: int, nz: int) -> BoussinesqEquations:
    grid = Grid(nx, nz, cell.width)
    return BoussinesqEquations(cell, grid, choose_transforms(grid, "scipy.fft"), Team(1))


def _evolve(equations: BoussinesqEquations, state: State, end: float) -> State:
    for _ in March(Stepper(equations), state, Agenda({}, end), StepControl()).steps():
        pass
    return state


def _corrected(history: dict[str, float]) -> dict[str, float]:
    return {name: history[f"nusselt_{name}"] + history.get(f"storage_{name}", 0.0) for name in DEFINITIONS}


@pytest.mark.parametrize(
    "plates",
    [("no-slip", "no-slip"), ("free-slip", "free-slip"), ("no-slip", "free-slip")],
)
def test_definitions_with_storage_agree_at_every_moment_of_an_unsteady_flow(plates: tuple[str, str]) -> None:
    """At Ra = 5e4 on this grid the spectra fall by eight decades; what is left is truncation."""
    equations = _equations(Cell(5e4, 0.8, 2.0, Plate(plates[0]), Plate(plates[1])), 96, 80)
    state = _evolve(equations, conduction_with_noise(equations, 0.05, 3), 11.0)
    history = Measurement(equations).history(state)
    values = _corrected(history)
    assert abs(history["storage_kinetic"]) > 0.05  # unsteady indeed: without storage they disagree
    for name in DEFINITIONS:
        assert values[name] == pytest.approx(values["volume"], rel=2e-5), name


def test_storage_is_the_rate_of_change_of_the_contents() -> None:
    """The storage terms equal finite differences of the contents they belong to."""
    equations = _equations(Cell(2e4, 1.0, 2.0), 48, 48)
    state = _evolve(equations, conduction_with_noise(equations, 0.05, 4), 8.0)
    history = Measurement(equations).history(state)

    def contents(s: State) -> dict[str, float]:
        heights, grid = raise_to_heights(equations, s), equations.grid
        mean, weights = heights.theta[:, 0].real, grid.weights_z
        square = heights.mean_product(heights.theta, heights.theta)
        energy = heights.mean_product(heights.u, heights.u) + heights.mean_product(heights.w, heights.w)
        return {
            "bottom": -float(weights @ ((1 - grid.z) * mean)),
            "top": float(weights @ (grid.z * mean)),
            "thermal": 0.5 * float(weights @ square),
            "kinetic": 0.5 * float(weights @ energy),
        }

    change, h = RateOfChange(equations).evaluate(state), 1e-4
    ahead = State(state.theta + h * change.theta, state.psi + h * change.psi)
    behind = State(state.theta - h * change.theta, state.psi - h * change.psi)
    later, earlier = contents(ahead), contents(behind)
    for name, value in later.items():
        rate = (value - earlier[name]) / (2 * h) / equations.cell.diffusivity
        assert history[f"storage_{name}"] == pytest.approx(rate, rel=1e-6, abs=1e-9), name


def test_rate_of_change_is_what_the_stepper_follows() -> None:
    equations = _equations(Cell(2e4, 1.0, 2.0), 48, 48)
    state = _evolve(equations, conduction_with_noise(equations, 0.05, 4), 8.0)
    change = RateOfChange(equations).evaluate(state)
    stepper, ahead = Stepper(equations), state.copy()
    stepper.set_step_size(1e-5)
    stepper.evaluate(ahead)
    stepper.advance(ahead)
    for later, now, rate in ((ahead.theta, state.theta, change.theta), (ahead.psi, state.psi, change.psi)):
        # a one-sided difference errs by half a step times the second derivative
        np.testing.assert_allclose((later - now) / 1e-5, rate, atol=1e-3 * np.abs(rate).max())


def test_conduction_at_rest_has_nusselt_one_everywhere() -> None:
    equations = _equations(Cell(1e5, 1.0, 2.0), 32, 32)
    measurement, state = Measurement(equations), equations.new_state()
    history = measurement.history(state)
    for name in DEFINITIONS:
        assert history[f"nusselt_{name}"] == pytest.approx(1.0, abs=1e-14)
    assert history["reynolds"] == 0.0
    assert history["roll_pairs"] == 0
    assert history["temperature_mean"] == pytest.approx(0.5)
    assert history["thermal_layer_bottom"] == pytest.approx(0.5)
    profiles = measurement.profiles(state)
    np.testing.assert_allclose(profiles["nusselt_profile"], 1.0, atol=1e-13)
    np.testing.assert_allclose(profiles["temperature_profile"], 1 - equations.grid.z, atol=1e-15)


def test_profiles_and_reynolds_number_equal_plain_averages_of_the_fields() -> None:
    equations = _equations(Cell(5e4, 1.0, 2.0), 64, 64)
    state = _evolve(equations, conduction_with_noise(equations, 0.05, 5), 9.0)
    measurement, grid = Measurement(equations), equations.grid
    u, w, temperature = equations.fields(state)
    history, profiles = measurement.history(state), measurement.profiles(state)
    np.testing.assert_allclose(profiles["temperature_profile"], temperature.mean(axis=1), atol=1e-13)
    np.testing.assert_allclose(profiles["temperature_rms_profile"], temperature.std(axis=1), atol=1e-13)
    np.testing.assert_allclose(
        profiles["vertical_velocity_rms_profile"], np.sqrt((w**2).mean(axis=1)), atol=1e-13
    )
    np.testing.assert_allclose(
        profiles["horizontal_velocity_rms_profile"], np.sqrt((u**2).mean(axis=1)), atol=1e-13
    )
    energy = grid.weights_z @ np.mean(u**2 + w**2, axis=1)
    assert history["reynolds"] == pytest.approx(np.sqrt(energy) / equations.cell.viscosity, rel=1e-12)
    mean_flux = grid.weights_z @ profiles["nusselt_profile"]
    assert mean_flux == pytest.approx(history["nusselt_volume"], rel=1e-10)


def test_roll_pairs_and_tails_describe_a_single_roll() -> None:
    equations = _equations(Cell(1e4, 1.0, 4.0), 64, 48)
    state = single_roll(equations, 2, 0.1)
    stepper = Stepper(equations)
    stepper.set_step_size(0.01)
    for _ in range(5):
        stepper.evaluate(state)
        stepper.advance(state)
    history = Measurement(equations).history(state)
    assert history["roll_pairs"] == 2
    assert history["tail_x"] < 1e-12
    assert history["tail_z"] < 1e-5


def test_mean_temperature_energy_and_layers_equal_plain_averages_of_an_asymmetric_flow() -> None:
    equations = _equations(Cell(5e4, 1.0, 2.0, Plate("no-slip"), Plate("free-slip")), 64, 64)
    state = _evolve(equations, conduction_with_noise(equations, 0.05, 5), 9.0)
    state.theta[0, 0] += 0.1  # warm the middle: top and bottom differ for certain
    history, grid = Measurement(equations).history(state), equations.grid
    u, w, temperature = equations.fields(state)
    mean = temperature.mean(axis=1)
    assert history["temperature_mean"] == pytest.approx(grid.weights_z @ mean, rel=1e-12)
    energy = 0.5 * grid.weights_z @ np.mean(u**2 + w**2, axis=1)
    assert history["kinetic_energy"] == pytest.approx(energy, rel=1e-12)
    middle = np.interp(0.5, grid.z, mean)
    bottom = (1 - middle) / ((1 - mean[0]) / grid.z[0])
    top = middle / (mean[-1] / (1 - grid.z[-1]))
    # slopes from the first grid point, the middle from a line between two points
    assert history["thermal_layer_bottom"] == pytest.approx(bottom, rel=2e-3)
    assert history["thermal_layer_top"] == pytest.approx(top, rel=2e-3)
    assert abs(bottom - top) > 0.02


def test_tails_are_the_amplitude_of_the_last_modes_over_the_largest() -> None:
    equations = _equations(Cell(1e4, 1.0, 2.0), 64, 48)
    state = equations.new_state()
    state.theta[0, 1], state.theta[0, -1], state.theta[-1, 1] = 1.0, 3e-3, 2e-4
    history = Measurement(equations).history(state)
    assert history["tail_x"] == pytest.approx(3e-3, rel=1e-3)
    assert 1e-4 < history["tail_z"] < 4e-4


def test_thermal_layers_end_where_the_plate_tangent_meets_the_middle() -> None:
    assert thermal_layers((10.0, 4.0), 0.4) == (pytest.approx(0.06), pytest.approx(0.1))


def test_kinetic_layers_find_the_peaks_between_grid_points() -> None:
    z = np.linspace(0.01, 0.99, 99)
    rms = np.exp(-(((z - 0.123) / 0.05) ** 2)) + np.exp(-(((z - 0.8) / 0.05) ** 2))
    bottom, top = kinetic_layers(z, rms)
    assert bottom == pytest.approx(0.123, abs=2e-4)
    assert top == pytest.approx(0.2, abs=2e-4)
    assert kinetic_layers(z, np.cos(np.pi * z) ** 2)[0] == pytest.approx(0.01)  # free-slip: at the plate
