"""Compiled banded loops against dense linear algebra and a manufactured fourth-order problem."""

from __future__ import annotations

import numpy as np
import pytest

from rbsim.dynamics.cell import Cell, Plate
from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.spectral import kernels
from rbsim.spectral.banded import BandedPair
from rbsim.spectral.grid import Grid
from rbsim.spectral.team import Team
from rbsim.spectral.transforms import choose_transforms


def _equations(nz: int, top: str, nx: int = 32) -> BoussinesqEquations:
    grid = Grid(nx, nz, 2.0)
    cell = Cell(1e4, 2.0, 2.0, Plate("no-slip"), Plate(top))
    return BoussinesqEquations(cell, grid, choose_transforms(grid, "scipy.fft"), Team(1))


def dense(pair: BandedPair, which: int, column: int) -> np.ndarray:
    """Plain twin of the band storage: the full matrix of one wavenumber."""
    matrix = np.zeros((pair.rows, pair.rows))
    square = pair.squares[column]
    for d in range(pair.bands.shape[2]):
        offset = (d - pair.lower) * pair.stride
        values = sum(pair.bands[which, p, d] * square**p for p in range(3))
        for n in range(pair.rows):
            if 0 <= n + offset < pair.rows:
                matrix[n, n + offset] = values[n]
    return matrix


def _random(pair: BandedPair, seed: int) -> np.ndarray:
    rng = np.random.default_rng(seed)
    shape = (pair.rows, pair.squares.size)
    return rng.standard_normal(shape) + 1j * rng.standard_normal(shape)


@pytest.mark.parametrize("top", ["no-slip", "free-slip"])
@pytest.mark.parametrize("name", ["heat", "flow"])
def test_products_with_mass_and_stiffness_equal_dense_ones(name: str, top: str) -> None:
    pair = getattr(_equations(24, top), name)
    values = _random(pair, 4)
    for which, product in ((0, pair.apply_mass(values)), (1, pair.apply_stiffness(values))):
        for column in (0, 3, pair.squares.size - 1):
            expected = dense(pair, which, column) @ values[:, column]
            np.testing.assert_allclose(product[:, column], expected, rtol=1e-11, atol=1e-9)


@pytest.mark.parametrize("top", ["no-slip", "free-slip"])
@pytest.mark.parametrize("name", ["heat", "flow"])
@pytest.mark.parametrize("shift", [0.0, 1e-3, 1.0])
def test_solves_equal_dense_ones(name: str, top: str, shift: float) -> None:
    pair = getattr(_equations(24, top), name)
    factors, right = pair.new_factors(), _random(pair, 5)
    pair.factorise(shift, factors)
    solution = pair.solve(factors, right)
    for column in (0, 1, pair.squares.size - 1):
        matrix = dense(pair, 0, column) - shift * dense(pair, 1, column)
        np.testing.assert_allclose(solution[:, column], np.linalg.solve(matrix, right[:, column]), rtol=1e-9)


def test_combine_adds_its_three_terms_on_its_own_columns_only() -> None:
    pair = _equations(24, "free-slip").flow
    values, first, second, result = (_random(pair, seed) for seed in (6, 7, 8, 9))
    untouched = result.copy()
    kernels.combine(
        pair.bands[1],
        pair.paired_squares,
        pair.lower,
        pair.stride,
        (0.5, -2.0, 3.0),
        (values, first, second),
        result,
        2,
        7,
    )
    expected = 0.5 * pair.apply_stiffness(values) - 2.0 * first + 3.0 * second
    np.testing.assert_allclose(result[:, 2:7], expected[:, 2:7], rtol=1e-11, atol=1e-11)
    np.testing.assert_array_equal(result[:, :2], untouched[:, :2])
    np.testing.assert_array_equal(result[:, 7:], untouched[:, 7:])


@pytest.mark.parametrize("top", ["no-slip", "free-slip"])
@pytest.mark.parametrize("nz", [96, 384, 1536])
@pytest.mark.parametrize("shift", [1e-9, 1e-4, 1.0])
def test_factorisation_without_pivots_keeps_full_accuracy(nz: int, top: str, shift: float) -> None:
    """Known smooth coefficients come back to rounding for k = 0 … 100 and up to 1024 modes."""
    equations = _equations(nz, top, nx=192)
    for pair in (equations.heat, equations.flow):
        truth = _random(pair, 10) * np.exp(-0.5 * np.arange(pair.rows))[:, None]
        factors = pair.new_factors()
        pair.factorise(shift, factors)
        solution = pair.solve(factors, pair.apply_mass(truth) - shift * pair.apply_stiffness(truth))
        error = np.max(np.abs(solution - truth), axis=0) / np.max(np.abs(truth), axis=0)
        assert error.max() < 1e-11
