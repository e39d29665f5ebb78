"""Steady rolls against published values, the time-stepping simulator and themselves on finer grids."""

from __future__ import annotations

import itertools
import tomllib
from math import log, pi
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from rbsim.dynamics.cell import Cell, Plate
from rbsim.dynamics.starts import single_roll
from rbsim.dynamics.stepper import Stepper
from rbsim.errors import ConfigError
from rbsim.stability.marginal import critical_mode
from rbsim.stability.rolls import Roll, refined, roll_path, solved, steady_roll
from rbsim.stability.steady import new_equations, transport

FOLDER = Path(__file__).parents[1] / "published"
NEAR_ONSET = tomllib.loads((FOLDER / "weakly_nonlinear.toml").read_text("utf-8"))
PUBLISHED = tomllib.loads((FOLDER / "steady_rolls.toml").read_text("utf-8"))
NO_SLIP, FREE_SLIP = Plate(), Plate("free-slip")


def to_zero(points: list[float], values: list[Any]) -> Any:
    """Value at zero of the polynomial through some points."""
    weights = [
        np.prod([-other / (x - other) for j, other in enumerate(points) if j != i])
        for i, x in enumerate(points)
    ]
    return sum(w * np.asarray(v) for w, v in zip(weights, values, strict=True))


def slope_at_onset(plate: Plate, prandtl: float, excesses: list[float]) -> float:
    """(Nu − 1) Ra/(Ra − Ra_c), extrapolated to onset."""
    onset = critical_mode(plate, plate)
    quotients = []
    for excess in excesses:
        cell = Cell(onset.rayleigh * (1 + excess), prandtl, 2 * pi / onset.wavenumber, plate, plate)
        quotients.append((steady_roll(cell, (32, 32)).nusselt - 1) * (1 + excess) / excess)
    return float(to_zero(excesses, quotients))


@pytest.mark.parametrize("prandtl", NEAR_ONSET["no_slip"]["prandtl"])
def test_slope_at_onset_is_that_of_schlueter_lortz_and_busse(prandtl: float) -> None:
    row = NEAR_ONSET["no_slip"]
    expected = 1 / (row["a"] + row["b"] / prandtl + row["c"] / prandtl**2)
    loose = prandtl == row["looser_prandtl"]
    tolerance = row["looser_tolerance"] if loose else row["relative_tolerance"]
    assert slope_at_onset(NO_SLIP, prandtl, [0.04, 0.02, 0.01]) == pytest.approx(expected, rel=tolerance)


def test_slope_at_onset_is_settled_to_1e_5() -> None:
    coarse = slope_at_onset(NO_SLIP, 0.71, [0.04, 0.02, 0.01])
    assert slope_at_onset(NO_SLIP, 0.71, [0.02, 0.01, 0.005]) == pytest.approx(coarse, rel=1e-5)


@pytest.mark.parametrize("prandtl", [0.2, 0.71, 1e3])
def test_slope_at_onset_between_free_slip_plates_is_two(prandtl: float) -> None:
    row = NEAR_ONSET["free_slip"]
    slope = slope_at_onset(FREE_SLIP, prandtl, [0.04, 0.02, 0.01])
    assert slope == pytest.approx(row["slope"], rel=row["relative_tolerance"])


def infinite_prandtl(row: dict[str, Any], grid: tuple[int, int]) -> np.ndarray:
    """Nu and v_rms (κ/H), extrapolated in 1/Pr."""
    inverses = [1e-4, 5e-5, 2.5e-5]
    values = []
    for inverse in inverses:
        roll = steady_roll(Cell(row["rayleigh"], 1 / inverse, row["period"], FREE_SLIP, FREE_SLIP), grid)
        values.append([roll.nusselt, roll.reynolds / inverse])
    return np.asarray(to_zero(inverses, values))


@pytest.mark.parametrize("number", [0, 1])
def test_infinite_prandtl_benchmark_is_reached_to_six_digits(number: int) -> None:
    row = PUBLISHED["infinite_prandtl"][number]
    found = infinite_prandtl(row, (128, 96))
    np.testing.assert_allclose(
        found, [row["nusselt"], row["velocity_rms"]], rtol=row["relative_tolerance"], atol=0
    )


@pytest.mark.physics
def test_infinite_prandtl_benchmark_at_a_million() -> None:
    row = PUBLISHED["infinite_prandtl"][2]
    found = infinite_prandtl(row, (320, 160))
    np.testing.assert_allclose(
        found, [row["nusselt"], row["velocity_rms"]], rtol=row["relative_tolerance"], atol=0
    )


def test_rolls_lie_in_the_band_of_clever_and_busse() -> None:
    row = PUBLISHED["clever_busse"]
    for rayleigh, nusselt in zip(row["rayleigh"], row["nusselt"], strict=True):
        roll = steady_roll(Cell(rayleigh, row["prandtl"], 2 * pi / row["wavenumber"]), (64, 48))
        assert roll.nusselt == pytest.approx(nusselt, rel=row["relative_tolerance"])
        assert roll.nusselt < nusselt


def test_the_primary_branch_follows_its_published_fit() -> None:
    row = PUBLISHED["primary_branch"]
    period = 2 * pi / critical_mode(NO_SLIP, NO_SLIP).wavenumber
    for rayleigh in row["rayleigh"]:
        roll = steady_roll(Cell(rayleigh, row["prandtl"], period), (128, 80))
        fit = row["coefficient"] * rayleigh ** row["exponent"]
        assert roll.nusselt - 1 == pytest.approx(fit, rel=row["relative_tolerance"])


def test_time_stepping_and_newton_agree_to_ten_digits() -> None:
    cell, grid = Cell(5e3, 0.71, 2.0158), (48, 48)
    equations = new_equations(cell, *grid)
    stepper, state = Stepper(equations), single_roll(equations, 1, 0.2)
    stepper.set_step_size(0.1)
    for _ in range(6000):
        stepper.evaluate(state)
        stepper.advance(state)
    nusselt, reynolds = transport(equations, state)
    roll = steady_roll(cell, grid)
    assert nusselt == pytest.approx(roll.nusselt, rel=1e-10)
    assert reynolds == pytest.approx(roll.reynolds, rel=1e-10)


def test_doubling_the_grid_changes_nothing_printed() -> None:
    roll = steady_roll(Cell(1e4, 0.71, 2.0158))
    assert max(roll.nusselt_change, roll.reynolds_change) < 5e-11
    nx, nz = roll.grid
    again = solved(roll.cell, (nx, 2 * nz), roll.state)
    assert f"{again.nusselt:.10g} {again.reynolds:.10g}" == f"{roll.nusselt:.10g} {roll.reynolds:.10g}"


def test_another_start_and_path_lead_to_the_same_roll() -> None:
    cell = Cell(2e4, 1.0, 2.0)
    direct = steady_roll(cell, (64, 64))
    other = steady_roll(Cell(2e4, 5.0, 2.4), (64, 64))
    moved = solved(cell, (64, 64), solved(Cell(2e4, 2.0, 2.2), (64, 64), other.state).state)
    assert moved.nusselt == pytest.approx(direct.nusselt, rel=1e-11)


def test_the_path_climbs_from_onset_to_the_target() -> None:
    path = list(roll_path(Cell(3e4, 1.0, 2.0)))
    values = [roll.cell.rayleigh for roll in path]
    assert values == sorted(values)
    assert values[-1] == 3e4
    assert all(roll.residual < 1e-9 for roll in path)
    assert [roll.nusselt for roll in path] == sorted(roll.nusselt for roll in path)


def test_just_above_onset_the_roll_is_small_but_there() -> None:
    onset = critical_mode(NO_SLIP, NO_SLIP)
    cell = Cell(onset.rayleigh * 1.0001, 1.0, 2 * pi / onset.wavenumber)
    assert steady_roll(cell, (32, 32)).nusselt - 1 == pytest.approx(1.422e-4, rel=1e-3)


@pytest.mark.parametrize(
    "plates",
    [
        (NO_SLIP, FREE_SLIP),
        (Plate("no-slip", 0.0), Plate("no-slip", 2.0)),
        (Plate("free-slip", 0.5), Plate("free-slip", 0.5)),
    ],
    ids=["mixed motion", "flux and Biot", "equal Biot"],
)
def test_other_plates_give_rolls_with_equal_flux_at_all_heights(plates: tuple[Plate, Plate]) -> None:
    cell = Cell(5e3, 2.0, 2.5, *plates)
    roll = refined(steady_roll(cell, (48, 48)), 1e-9)
    equations = new_equations(cell, *roll.grid)
    _, w, temperature = equations.fields(roll.state)
    mean = equations.temperature_basis.to_chebyshev(roll.state.theta[:, 0].real)
    slope = np.polynomial.chebyshev.chebval(
        1 - 2 * equations.grid.z, -2 * np.polynomial.chebyshev.chebder(mean)
    )
    flux = np.mean(w * temperature, axis=1) / cell.diffusivity + 1 - slope
    np.testing.assert_allclose(flux, flux.mean(), rtol=1e-8)
    assert roll.nusselt > 1.3


def test_below_onset_the_fault_names_the_onset() -> None:
    with pytest.raises(ConfigError, match=r"rayleigh 1500: rolls of period 2 exist above Ra = 1707\.9"):
        steady_roll(Cell(1500.0, 1.0, 2.0))


def test_an_arbitrary_mean_temperature_is_refused() -> None:
    plates = Plate("no-slip", 0.0), Plate("free-slip", 0.0)
    with pytest.raises(ConfigError, match="fixed flux need the same motion"):
        steady_roll(Cell(1e4, 1.0, 2.0, *plates))


@pytest.mark.physics
def test_the_exponent_of_nusselt_approaches_one_quarter() -> None:
    """No-slip, Γ = 2, Pr = 1: local exponents fall towards 1/4 up to Ra = 1e8."""
    exponent = PUBLISHED["large_rayleigh"]["exponent"]
    path: list[Roll] = [roll for roll in roll_path(Cell(1e8, 1.0, 2.0)) if roll.cell.rayleigh > 1e6]
    local = [
        log(b.nusselt / a.nusselt) / log(b.cell.rayleigh / a.cell.rayleigh)
        for a, b in itertools.pairwise(path)
        if b.cell.rayleigh > 1.5 * a.cell.rayleigh
    ]
    gaps = np.abs(np.array(local) - exponent)
    assert gaps[-1] < 0.01
    assert gaps[-1] == gaps.min()
