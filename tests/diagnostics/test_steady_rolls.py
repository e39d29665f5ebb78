"""Steady rolls by time stepping: spectral convergence, six equal definitions, a second discretisation."""

from __future__ import annotations

import tomllib
from functools import lru_cache
from pathlib import Path

import numpy as np
import pytest
from scipy.integrate import solve_bvp

from rbsim.diagnostics.measure import Measurement
from rbsim.diagnostics.nusselt import DEFINITIONS
from rbsim.dynamics.cell import Cell
from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.starts import single_roll
from rbsim.dynamics.state import State
from rbsim.dynamics.stepper import Stepper
from rbsim.spectral.grid import Grid
from rbsim.spectral.team import Team
from rbsim.spectral.transforms import choose_transforms

PUBLISHED = tomllib.loads(
    (Path(__file__).parents[1] / "published" / "clever_busse_1974.toml").read_text(encoding="utf-8")
)
WAVENUMBER = 3.117


@lru_cache(maxsize=64)
def steady_history(rayleigh: float, prandtl: float, points: int) -> dict[str, float]:
    """March a single roll until its Nusselt number no longer changes and measure it."""
    cell = Cell(rayleigh, prandtl, 2 * np.pi / WAVENUMBER)
    grid = Grid(points, points, cell.width)
    equations = BoussinesqEquations(cell, grid, choose_transforms(grid), Team(1))
    stepper, state, measurement = Stepper(equations), single_roll(equations, 1, 0.2), Measurement(equations)
    stepper.set_step_size(min(0.05, 0.5 / stepper.evaluate(_typical_roll(equations))))
    previous = 0.0
    for _ in range(400):
        for _ in range(200):
            stepper.evaluate(state)
            stepper.advance(state)
        history = measurement.history(state)
        if abs(history["nusselt_volume"] - previous) < 1e-11:
            return history
        previous = history["nusselt_volume"]
    raise AssertionError("the roll did not become steady")


def _typical_roll(equations: BoussinesqEquations) -> State:
    """A roll with the velocity scale of the steady one, to choose one fixed step for the whole march."""
    typical = equations.new_state()
    grid = equations.grid
    shape = np.zeros(grid.modes_z)
    shape[[0, 2, 4]] = 0.375, -0.5, 0.125  # (1 − ξ²)² = 16 z²(1 − z)²
    typical.psi[:, 1] = -0.5j * 0.12 * equations.flow_basis.from_chebyshev(shape)
    return typical


#: Ra, Pr and the grid points at which the spectra have decayed (at Pr = 7 the thermal layers are thin).
CASES = [
    (2000.0, 0.71, 48),
    (5000.0, 0.71, 64),
    (30000.0, 0.71, 64),
    (2000.0, 1.0, 48),
    (30000.0, 1.0, 64),
    (2000.0, 7.0, 48),
    pytest.param(30000.0, 7.0, 96, marks=pytest.mark.physics),
]


@pytest.mark.parametrize(("rayleigh", "prandtl", "points"), CASES)
def test_six_definitions_of_a_steady_roll_agree_to_1e_8(rayleigh: float, prandtl: float, points: int) -> None:
    history = steady_history(rayleigh, prandtl, points)
    values = np.array([history[f"nusselt_{name}"] for name in DEFINITIONS])
    assert np.ptp(values) < 1e-8 * values.mean()


@pytest.mark.parametrize("prandtl", [0.71, pytest.param(7.0, marks=pytest.mark.physics)])
def test_nusselt_number_converges_spectrally(prandtl: float) -> None:
    """The error falls faster than any power: by more and more decades for each 16 points."""
    grids = (32, 48, 64) if prandtl < 1 else (48, 64, 80)
    truth = steady_history(30000.0, prandtl, grids[-1] + 16)["nusselt_volume"]
    errors = [abs(steady_history(30000.0, prandtl, n)["nusselt_volume"] - truth) for n in grids]
    assert errors[1] < errors[0] / 30
    assert errors[2] < 1e-9


@pytest.mark.parametrize("row", PUBLISHED["row"], ids=lambda row: f"Ra={row['rayleigh']:g}")
def test_published_steady_rolls_are_met_within_their_band(row: dict[str, float]) -> None:
    nusselt = steady_history(row["rayleigh"], PUBLISHED["prandtl"], 64)["nusselt_volume"]
    assert nusselt == pytest.approx(row["nusselt"], rel=PUBLISHED["tolerance"])


def collocation_nusselt(rayleigh: float, prandtl: float, modes: int = 7) -> float:
    """Nusselt number of the same roll by Fourier series in x and fourth-order collocation in z (scipy).

    ψ = Σ ψ_m sin(mkx), θ = Σ θ_m cos(mkx); unknowns of each m: ψ, ψ', ω, ω', θ, θ'; advection in its
    u·∇ form, nothing in common with the simulator but the equations.
    """
    nu, kappa = np.sqrt(prandtl / rayleigh), 1 / np.sqrt(rayleigh * prandtl)
    k = WAVENUMBER * np.arange(modes)[:, None]
    x = np.arange(3 * modes) * 2 * np.pi / (3 * modes)
    cos, sin = np.cos(np.outer(x, np.arange(modes))), np.sin(np.outer(x, np.arange(modes)))
    to_cos, to_sin = 2 * cos.T / x.size, 2 * sin.T / x.size
    to_cos[0] /= 2

    def slopes(_: np.ndarray, y: np.ndarray) -> np.ndarray:
        psi, dpsi, omega, domega, theta, dtheta = y.reshape(6, modes, -1)
        u, w = -(sin @ dpsi), cos @ (k * psi)
        heat = to_cos @ (u * (sin @ (-k * theta)) + w * (cos @ dtheta)) - k * psi
        flow = to_sin @ (u * (cos @ (k * omega)) + w * (sin @ domega)) + k * theta
        flow[0] = 0.0
        second = (
            dpsi,
            omega + k**2 * psi,
            domega,
            k**2 * omega + flow / nu,
            dtheta,
            k**2 * theta + heat / kappa,
        )
        return np.concatenate(second).reshape(6 * modes, -1)

    def plates(bottom: np.ndarray, top: np.ndarray) -> np.ndarray:
        b, t = bottom.reshape(6, modes), top.reshape(6, modes)
        return np.concatenate([b[0], t[0], b[1], t[1], b[4], t[4]])

    z = np.linspace(0, 1, 41)
    guess = np.zeros((6, modes, z.size))
    bell = z**2 * (1 - z) ** 2
    guess[0, 1], guess[4, 1] = 1.2 * bell, 1.2 * z * (1 - z)
    guess[1, 1] = np.gradient(guess[0, 1], z)
    guess[4, 0] = 0.2 * np.sin(2 * np.pi * z) * -1
    solution = solve_bvp(slopes, plates, z, guess.reshape(6 * modes, -1), tol=1e-5, max_nodes=2000)
    assert solution.success, solution.message
    return float(1 - solution.sol(0.0).reshape(6, modes)[5, 0])


def test_a_second_discretisation_gives_the_same_four_digits() -> None:
    assert steady_history(5000.0, 0.71, 64)["nusselt_volume"] == pytest.approx(
        collocation_nusselt(5000.0, 0.71), rel=5e-5
    )
