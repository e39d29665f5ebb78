"""Horizontal spectra of a state at the heights of the grid, from which every average is formed.

Horizontal averages of products are exact. Vertical ones use Fejér's rule, exact to degree nz − 1, where
products reach 4 nz/3: the difference is as small as the spectral tails squared.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.state import State
from rbsim.spectral.banded import ComplexArray
from rbsim.spectral.chebyshev import differentiate
from rbsim.spectral.grid import Array
from rbsim.spectral.transforms import coefficient_scale


@dataclass(frozen=True, eq=False)
class Heights:
    """Fourier coefficients at the grid heights, each of shape (nz, modes_x).

    Parameters
    ----------
    u, w, theta : complex ndarray
        Horizontal and vertical velocity, departure from conduction.
    u_z, theta_z : complex ndarray
        Their vertical derivatives.
    wavenumbers : ndarray, shape (modes_x,)
        Horizontal wavenumbers.
    """

    u: ComplexArray
    w: ComplexArray
    theta: ComplexArray
    u_z: ComplexArray
    theta_z: ComplexArray
    wavenumbers: Array

    def mean_product(self, a: ComplexArray, b: ComplexArray) -> Array:
        """Return the horizontal average of the product of two fields at each height, shape (nz,)."""
        products = a.real * b.real + a.imag * b.imag
        return np.asarray(products[:, 0] + 2.0 * products[:, 1:].sum(axis=1))

    def mean_square_slope(self, a: ComplexArray) -> Array:
        """Return the horizontal average of (∂x a)² at each height, shape (nz,)."""
        slope = self.wavenumbers * a
        return self.mean_product(slope, slope)


def raise_to_heights(equations: BoussinesqEquations, state: State) -> Heights:
    """Evaluate velocities, temperature and vertical derivatives at the heights of the grid.

    Parameters
    ----------
    equations : BoussinesqEquations
        Cell, grid and transforms; the transforms' buffer is overwritten.
    state : State
        What to evaluate.
    """
    wavenumbers = equations.grid.wavenumbers
    theta = equations.temperature_basis.to_chebyshev(state.theta)
    psi = equations.flow_basis.to_chebyshev(state.psi)
    u = -differentiate(psi)
    along, upward, warm = _transform(equations, [u, 1j * wavenumbers * psi, theta])
    shear, gradient = _transform(equations, [differentiate(u), differentiate(theta)])
    return Heights(along, upward, warm, shear, gradient, wavenumbers)


def _transform(equations: BoussinesqEquations, series: list[ComplexArray]) -> ComplexArray:
    grid = equations.grid
    stack = np.zeros((len(series), grid.nz, grid.modes_x), dtype=np.complex128)
    for target, coefficients in zip(stack, series, strict=True):
        target[: len(coefficients)] = coefficients
    stack *= coefficient_scale(grid)[:, None]
    return equations.transforms.at_heights(stack)
