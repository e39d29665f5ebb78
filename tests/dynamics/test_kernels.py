"""Compiled loops and explicit terms against plain NumPy twins."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.polynomial import chebyshev

from rbsim.dynamics import kernels
from rbsim.dynamics.cell import Cell, Plate
from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.state import State
from rbsim.spectral.chebyshev import differentiate, values_at
from rbsim.spectral.grid import Grid
from rbsim.spectral.team import Team
from rbsim.spectral.transforms import choose_transforms, coefficient_scale
from rbsim.spectral.ultraspherical import derivative

PLATES = [("no-slip", "no-slip"), ("free-slip", "free-slip"), ("no-slip", "free-slip")]


def _equations(plates: tuple[str, str], threads: int = 1) -> BoussinesqEquations:
    grid = Grid(36, 28, 2.3)
    cell = Cell(3e4, 0.7, 2.3, Plate(plates[0]), Plate(plates[1]))
    return BoussinesqEquations(cell, grid, choose_transforms(grid, "scipy.fft"), Team(threads))


def _random_state(equations: BoussinesqEquations) -> State:
    rng = np.random.default_rng(12)
    state = equations.new_state()
    for values in (state.theta, state.psi):
        values[:] = rng.standard_normal(values.shape) + 1j * rng.standard_normal(values.shape)
        values[:, 0] = values[:, 0].real
    return state


def plain_fields(equations: BoussinesqEquations, state: State) -> np.ndarray:
    """u, w and θ on the grid by direct sums over all modes."""
    grid = equations.grid
    theta = equations.temperature_basis.to_chebyshev(state.theta)
    psi = equations.flow_basis.to_chebyshev(state.psi)
    vertical = np.array([values_at(grid.modes_z, z) for z in grid.z])
    waves = np.exp(1j * np.outer(grid.wavenumbers, grid.x))
    waves[1:] *= 2
    series = (-differentiate(psi), 1j * grid.wavenumbers * psi, theta)
    return np.array([((vertical @ s) @ waves).real for s in series])


def plain_modes(equations: BoussinesqEquations, values: np.ndarray) -> np.ndarray:
    """Fourier–Chebyshev coefficients of grid values by dense projection, shape (modes_z, modes_x)."""
    grid = equations.grid
    waves = np.exp(-1j * np.outer(grid.x, grid.wavenumbers)) / grid.nx
    vandermonde = chebyshev.chebvander(1 - 2 * grid.z, grid.nz - 1)
    return np.linalg.solve(vandermonde, values @ waves)[: grid.modes_z]


def plain_terms(equations: BoussinesqEquations, state: State) -> tuple[np.ndarray, np.ndarray]:
    """Explicit terms of both equations by dense operators, straight from the formulas."""
    grid, k = equations.grid, equations.grid.wavenumbers
    u, w, theta = plain_fields(equations, state)
    uw, difference, ut, wt = (plain_modes(equations, p) for p in (u * w, w * w - u * u, u * theta, w * theta))
    lift, warm = plain_modes(equations, w), plain_modes(equations, theta)
    heat = derivative(0, grid.modes_z, 2) @ (lift - 1j * k * ut) - derivative(1, grid.modes_z, 2) @ wt
    flow = (
        derivative(0, grid.modes_z, 4) @ (k**2 * uw + 1j * k * warm)
        + derivative(2, grid.modes_z, 4) @ uw
        - derivative(1, grid.modes_z, 4) @ (1j * k * difference)
    )
    return heat[: equations.heat.rows], flow[: equations.flow.rows]


@pytest.mark.parametrize("plates", PLATES)
def test_synthesis_fills_the_stack_of_velocities_and_temperature(plates: tuple[str, str]) -> None:
    equations = _equations(plates)
    state, grid = _random_state(equations), equations.grid
    stack = np.full((3, grid.nz, grid.modes_x), np.nan, dtype=complex)
    stack[:, grid.modes_z :] = 0.0
    warm, flow = equations.temperature_basis, equations.flow_basis
    bases = (warm.stencil, warm.stride, flow.stencil, flow.stride)
    for start, stop in ((0, 5), (5, grid.modes_x)):
        kernels.synthesise(state.theta, state.psi, bases, grid.wavenumbers, stack, start, stop)
    psi = flow.to_chebyshev(state.psi)
    expected = (-differentiate(psi), 1j * grid.wavenumbers * psi, warm.to_chebyshev(state.theta))
    scale = coefficient_scale(grid)[: grid.modes_z, None]
    for got, series in zip(stack, expected, strict=True):
        np.testing.assert_allclose(got[: grid.modes_z], series * scale, rtol=1e-11, atol=1e-9)


def test_products_and_courant_rates_equal_plain_ones() -> None:
    rng = np.random.default_rng(13)
    values, inverse = rng.standard_normal((3, 6, 33)), rng.uniform(1, 9, 13)
    products, rates = np.full((4, 6, 33), -1.0), np.zeros(33)
    kernels.multiply_fields(values, inverse, products, rates, 4, 9)
    u, w, t = values[:, :5]
    expected = np.array([u * w, w**2 - u**2, u * t, w * t])
    np.testing.assert_allclose(products[:, :5], expected, rtol=1e-12, atol=1e-14)
    np.testing.assert_array_equal(products[:, 5], -1.0)
    plain = np.max(np.abs(u) * inverse[12] + np.abs(w) * inverse[4:9, None], axis=0)
    np.testing.assert_allclose(rates, plain, rtol=1e-13)


@pytest.mark.parametrize("plates", PLATES)
@pytest.mark.parametrize("threads", [1, 2])
def test_explicit_terms_equal_dense_ones(plates: tuple[str, str], threads: int) -> None:
    equations = _equations(plates, threads)
    state = _random_state(equations)
    heat, flow = np.empty_like(state.theta), np.empty_like(state.psi)
    rate = equations.explicit_terms(state, heat, flow)
    for got, expected in zip((heat, flow), plain_terms(equations, state), strict=True):
        # both sides round sums of terms of this size
        np.testing.assert_allclose(got, expected, atol=1e-11 * np.abs(expected).max())
    u, w, _ = plain_fields(equations, state)
    grid = equations.grid
    expected_rate = np.max(np.abs(u) * grid.nx / grid.width + np.abs(w) / grid.spacing_z[:, None])
    assert rate == pytest.approx(expected_rate, rel=1e-11)


def test_fields_equal_direct_sums_and_temperature_includes_conduction() -> None:
    equations = _equations(PLATES[2])
    state = _random_state(equations)
    u, w, theta = plain_fields(equations, state)
    got = equations.fields(state)
    np.testing.assert_allclose(got[0], u, atol=1e-9)
    np.testing.assert_allclose(got[1], w, atol=1e-9)
    np.testing.assert_allclose(got[2], theta + 1 - equations.grid.z[:, None], atol=1e-11)


def test_a_stage_solves_the_implicit_system_and_adds_the_increment() -> None:
    pair = _equations(PLATES[2]).flow
    rng = np.random.default_rng(14)
    shape = (pair.rows, pair.squares.size)
    values, new, old = (rng.standard_normal(shape) + 1j * rng.standard_normal(shape) for _ in range(3))
    factors, increment, before = pair.new_factors(), np.empty(shape, dtype=complex), values.copy()
    pair.factorise(1e-3, factors)
    operator = (pair.bands[1], pair.paired_squares, pair.lower, pair.stride)
    kernels.solve_stage(operator, (0.2, 0.5, -0.1), factors, (values, new, old), increment, 0, shape[1])
    right = 0.2 * pair.apply_stiffness(before) + 0.5 * new - 0.1 * old
    residual = pair.apply_mass(increment) - 1e-3 * pair.apply_stiffness(increment) - right
    assert np.abs(residual).max() < 1e-9 * np.abs(right).max()
    np.testing.assert_allclose(values, before + increment, rtol=1e-13, atol=1e-13)
