"""Growth and decay of small disturbances against a dense eigenvalue problem of another discretisation."""

from __future__ import annotations

import numpy as np
import pytest
import scipy.linalg

from rbsim.dynamics.cell import Cell, Plate
from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.starts import single_roll
from rbsim.dynamics.stepper import Stepper
from rbsim.spectral.grid import Grid
from rbsim.spectral.team import Team
from rbsim.spectral.transforms import choose_transforms


def collocation_growth(cell: Cell, k: float, points: int = 40) -> float:
    """Largest growth rate in free-fall units, by dense Chebyshev collocation of w and θ (no recombination).

    (D² − k²) ∂t w = ν (D² − k²)² w − k² θ,  ∂t θ = κ (D² − k²) θ + w.
    """
    n = points
    x = np.cos(np.pi * np.arange(n + 1) / n)
    c = np.where((np.arange(n + 1) % n) == 0, 2.0, 1.0) * (-1.0) ** np.arange(n + 1)
    gap = x[:, None] - x[None, :]
    d = np.outer(c, 1 / c) / (gap + np.eye(n + 1))
    d = 2 * (d - np.diag(d.sum(axis=1)))  # on a height of 1
    second, one, zero = d @ d, np.eye(n + 1), np.zeros((n + 1, n + 1))
    laplace = second - k**2 * one
    a = np.block([[cell.viscosity * laplace @ laplace, -(k**2) * one], [one, cell.diffusivity * laplace]])
    b = np.block([[laplace, zero], [zero, one]])
    top, bottom, wall = cell.top, cell.bottom, n + 1
    rows = {0: one[0], n: one[n], 1: _second_condition(top, d, 0), n - 1: _second_condition(bottom, d, n)}
    for row, condition in rows.items():
        a[row], b[row] = np.concatenate([condition, zero[0]]), 0.0
    for row, condition in ((wall, one[0]), (wall + n, one[n])):
        a[row], b[row] = np.concatenate([zero[0], condition]), 0.0
    values = scipy.linalg.eigvals(a, b)
    values = values[np.isfinite(values) & (np.abs(values) < 1e6)]
    leading = values[np.argmax(values.real)]
    assert abs(leading.imag) < 1e-8
    return float(leading.real)


def _second_condition(plate: Plate, d: np.ndarray, row: int) -> np.ndarray:
    return d[row] if plate.motion == "no-slip" else (d @ d)[row]


def simulated_growth(cell: Cell) -> float:
    """Growth rate of the first roll pair, from amplitudes so small that nonlinear terms vanish."""
    grid = Grid(16, 48, cell.width)
    equations = BoussinesqEquations(cell, grid, choose_transforms(grid, "scipy.fft"), Team(1))
    stepper, state = Stepper(equations), single_roll(equations, 1, 1e-9)
    stepper.set_step_size(0.005)
    previous = rate = 0.0
    for _ in range(40):
        amplitude = abs(state.theta[0, 1])
        for _ in range(200):
            stepper.evaluate(state)
            stepper.advance(state)
        previous, rate = rate, np.log(abs(state.theta[0, 1]) / amplitude) / (200 * 0.005)
        if abs(rate - previous) < 1e-9:
            return float(rate)
    raise AssertionError("the disturbance did not settle on one mode")


@pytest.mark.parametrize(
    "cell",
    [
        Cell(2000.0, 0.71, 2 * np.pi / 3.117),
        Cell(1500.0, 7.0, 2 * np.pi / 3.117),
        Cell(3000.0, 1.0, 2.0, Plate("free-slip"), Plate("free-slip")),
        Cell(900.0, 1.0, 2.3, Plate("no-slip"), Plate("free-slip")),
    ],
    ids=["growing", "decaying", "free-slip", "mixed plates"],
)
def test_growth_rates_equal_the_dense_eigenvalues_to_1e_6(cell: Cell) -> None:
    expected = collocation_growth(cell, 2 * np.pi / cell.width)
    assert simulated_growth(cell) == pytest.approx(expected, rel=1e-6)


def test_free_slip_growth_follows_the_closed_form_of_rayleigh() -> None:
    """(σ + q²)(σ/Pr + q²) q² = Ra k², q² = k² + π², σ in κ/H² (Rayleigh 1916, exact)."""
    ra, pr, k = 3000.0, 2.0, np.pi
    cell = Cell(ra, pr, 2.0, Plate("free-slip"), Plate("free-slip"))
    q2 = k**2 + np.pi**2
    roots = np.roots([q2 / pr, q2**2 * (1 + 1 / pr), q2**3 - ra * k**2])
    assert simulated_growth(cell) == pytest.approx(roots.real.max() * cell.diffusivity, rel=1e-6)
