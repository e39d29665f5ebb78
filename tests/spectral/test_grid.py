"""The dealiased grid and its quadrature."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.polynomial import chebyshev

from rbsim.spectral.chebyshev import differentiate, first_moments, integrals, slopes_at, values_at
from rbsim.spectral.grid import Grid, fejer_weights


@pytest.mark.parametrize(("nx", "nz"), [(16, 16), (64, 48), (256, 128), (250, 98)])
def test_retained_modes_leave_quadratic_products_unaliased(nx: int, nz: int) -> None:
    grid = Grid(nx, nz, 2.0)
    top_x, top_z = grid.modes_x - 1, grid.modes_z - 1
    assert nx - 2 * top_x > top_x  # lowest image of a product lies above the retained modes
    assert 2 * nz - 2 * top_z > top_z
    assert nx - 2 * (top_x + 1) <= top_x + 1  # and not one mode is given away
    assert 2 * nz - 2 * (top_z + 1) <= top_z + 1


def test_points_ascend_from_bottom_to_top_without_touching_the_plates() -> None:
    grid = Grid(32, 24, 2.0)
    assert np.all(np.diff(grid.z) > 0)
    assert 0 < grid.z[0] < 1 - grid.z[-1] + 1e-12 < 0.01
    np.testing.assert_allclose(1 - 2 * grid.z, np.cos(grid.angles), atol=1e-15)


@pytest.mark.parametrize("count", [16, 17, 48])
def test_fejer_weights_integrate_polynomials_exactly(count: int) -> None:
    z = (1 - np.cos(np.pi * (np.arange(count) + 0.5) / count)) / 2
    for power in range(count):
        assert fejer_weights(count) @ z**power == pytest.approx(1 / (power + 1), rel=1e-12)


@pytest.mark.parametrize(("nx", "nz", "width"), [(15, 32, 1.0), (32, 14, 1.0), (32, 32, 0.0)])
def test_unusable_grids_are_refused(nx: int, nz: int, width: float) -> None:
    with pytest.raises(ValueError, match=r"must be"):
        Grid(nx, nz, width)


def test_chebyshev_series_agree_with_numpy_polynomials() -> None:
    coefficients = np.random.default_rng(1).standard_normal(20)
    slope = -2 * chebyshev.chebder(coefficients)
    antiderivative = chebyshev.chebint(coefficients)
    np.testing.assert_allclose(differentiate(coefficients)[:-1], slope, rtol=1e-12)
    for z in (0.0, 0.3, 0.5, 1.0):
        xi = 1 - 2 * z
        assert values_at(20, z) @ coefficients == pytest.approx(
            chebyshev.chebval(xi, coefficients), rel=1e-12
        )
        assert slopes_at(20, z) @ coefficients == pytest.approx(chebyshev.chebval(xi, slope), rel=1e-11)
    expected = (chebyshev.chebval(0.4, antiderivative) - chebyshev.chebval(-0.2, antiderivative)) / 2
    assert integrals(20, 0.3, 0.6) @ coefficients == pytest.approx(expected, rel=1e-12)


def test_first_moments_agree_with_gauss_legendre_quadrature() -> None:
    nodes, weights = np.polynomial.legendre.leggauss(30)
    z = (1 + nodes) / 2
    table = np.array([values_at(24, value) for value in z])
    np.testing.assert_allclose(first_moments(24), (weights / 2 * z) @ table, atol=1e-15)
