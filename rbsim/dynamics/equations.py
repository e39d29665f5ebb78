"""The Oberbeck–Boussinesq equations in streamfunction form, discretised.

    ∂t ∇²ψ = (∂zz − ∂xx)(uw) − ∂xz(w² − u²) + ∂xθ + sqrt(Pr/Ra) ∇⁴ψ
    ∂t θ   = −∂x(uθ) − ∂z(wθ) + w + (Ra Pr)^(−1/2) ∇²θ

in free-fall units with u = −∂zψ, w = ∂xψ, T = 1 − z + θ (products as in Basdevant 1983, J. Comput. Phys. 50,
209). The k = 0 column of ψ carries the mean horizontal flow; ψ = 0 on both plates keeps its net flux zero, by
a mean pressure gradient that varies in time (no-slip or mixed plates).
"""

from __future__ import annotations

import numpy as np
from scipy import sparse

from rbsim.dynamics import kernels
from rbsim.dynamics.cell import Cell
from rbsim.dynamics.state import State
from rbsim.spectral.banded import BandedPair, ComplexArray
from rbsim.spectral.grid import Array, Grid
from rbsim.spectral.recombination import Recombination, recombine
from rbsim.spectral.team import Team
from rbsim.spectral.transforms import Transforms, product_scale
from rbsim.spectral.ultraspherical import derivative, diagonal_table, recombining

#: Values and products of one block of rows, which should stay in the second-level cache.
BLOCK_BYTES = 1 << 19


class BoussinesqEquations:
    """Operators and explicit terms of one cell on one grid.

    Parameters
    ----------
    cell : Cell
        Pure numbers and plates.
    grid : Grid
        Dealiased grid; its width must equal that of the cell.
    transforms : Transforms
        Transform library bound to the grid.
    team : Team
        Threads that share the work.
    """

    def __init__(self, cell: Cell, grid: Grid, transforms: Transforms, team: Team) -> None:
        if cell.width != grid.width:
            raise ValueError(f"grid width {grid.width} differs from the cell width {cell.width}")
        self.team = team
        self.cell = cell
        self.grid = grid
        self.transforms = transforms
        self.temperature_basis = recombine(cell.temperature_conditions, grid.modes_z)
        self.flow_basis = recombine(cell.flow_conditions, grid.modes_z)
        squares = grid.wavenumbers**2
        self.heat = _heat_pair(self.temperature_basis, squares, cell.diffusivity)
        self.flow = _flow_pair(self.flow_basis, squares, cell.viscosity)
        gain = 2.0 * grid.nx * grid.nz
        heat_tables = (*_projection_tables(grid, order=2, rows=self.heat.rows), gain)
        flow_tables = (*_projection_tables(grid, order=4, rows=self.flow.rows), gain)
        self._tables = (heat_tables, flow_tables)
        warm, flow = self.temperature_basis, self.flow_basis
        self._bases = (warm.stencil, warm.stride, flow.stencil, flow.stride)
        self._stack = np.zeros((3, grid.nz, grid.modes_x), dtype=np.complex128)
        self._products = np.empty((4, grid.nz, grid.modes_x), dtype=np.complex128)
        self._rates = np.empty((team.threads, grid.nx))
        self._waves = (grid.wavenumbers, self.flow.paired_squares, np.empty(2 * grid.modes_x))
        self._inverse_spacings = np.append(1.0 / grid.spacing_z, grid.nx / grid.width)
        self.block = max(1, min(grid.nz, BLOCK_BYTES // (7 * 8 * grid.nx)))
        self._scratch = [
            (np.empty((3, self.block, grid.nx)), np.empty((4, self.block, grid.nx)))
            for _ in range(team.threads)
        ]

    def new_state(self) -> State:
        """Return the conduction state at rest."""
        columns = self.grid.modes_x
        return State(
            np.zeros((self.heat.rows, columns), dtype=np.complex128),
            np.zeros((self.flow.rows, columns), dtype=np.complex128),
        )

    def explicit_terms(self, state: State, heat: ComplexArray, flow: ComplexArray) -> float:
        """Evaluate everything but diffusion, projected on the test functions.

        Parameters
        ----------
        state : State
            Where to evaluate.
        heat, flow : complex ndarray
            Results, of the shapes of ``state.theta`` and ``state.psi``.

        Returns
        -------
        float
            Courant rate max(|u|/Δx + |w|/Δz) in 1/free-fall time.
        """
        columns = self.grid.modes_x
        self.team.share(columns, lambda start, stop, _: self.load_columns(state, start, stop))
        rate = self.multiply_rows()
        self.team.share(columns, lambda start, stop, _: self.unload_columns((heat, flow), start, stop))
        return rate

    def load_columns(self, state: State, start: int, stop: int) -> None:
        """Bring u, w and θ of some wavenumbers to the heights of the grid."""
        kernels.synthesise(
            state.theta, state.psi, self._bases, self.grid.wavenumbers, self._stack, start, stop
        )
        self.transforms.columns_to_rows(self._stack, start, stop)

    def multiply_rows(self) -> float:
        """Replace u, w and θ at all heights by their products and return the Courant rate."""
        self.team.share(self.grid.nz, self._multiply_share)
        return float(self._rates.max())

    def _multiply_share(self, start: int, stop: int, member: int) -> None:
        values, products = self._scratch[member]
        rates = self._rates[member]
        rates[:] = 0.0
        for first in range(start, stop, self.block):
            last = min(stop, first + self.block)
            self.transforms.rows_to_values(first, last, values[:, : last - first])
            kernels.multiply_fields(values, self._inverse_spacings, products, rates, first, last)
            self.transforms.values_to_rows(first, last, products[:, : last - first])

    def unload_columns(self, terms: tuple[ComplexArray, ComplexArray], start: int, stop: int) -> None:
        """Project the products of some wavenumbers, and buoyancy and lift, on the test functions."""
        self.transforms.rows_to_columns(self._products, start, stop)
        spectra = (self._stack, self._products)
        kernels.assemble(spectra, self._tables, self._waves, terms, start, stop)

    def fields(self, state: State) -> tuple[Array, Array, Array]:
        """Return horizontal and vertical velocity and temperature on the grid, each of shape (nz, nx)."""
        self.load_columns(state, 0, self.grid.modes_x)
        values = np.empty((3, self.grid.nz, self.grid.nx))
        self.transforms.rows_to_values(0, self.grid.nz, values)
        u, w, theta = values
        return u, w, theta + (1.0 - self.grid.z)[:, None]


def _heat_pair(basis: Recombination, squares: Array, diffusivity: float) -> BandedPair:
    """Mass 1 and stiffness κ(∂zz − k²), tested in C⁽²⁾."""
    modes = basis.size + basis.conditions
    value, curve = derivative(0, modes, 2), derivative(2, modes, 2)
    zero = sparse.csr_array(value.shape)
    mass = (value, zero, zero)
    stiffness = (diffusivity * curve, -diffusivity * value, zero)
    return _pair(basis, squares, (mass, stiffness))


def _flow_pair(basis: Recombination, squares: Array, viscosity: float) -> BandedPair:
    """Mass ∂zz − k² and stiffness ν(∂zz − k²)², tested in C⁽⁴⁾."""
    modes = basis.size + basis.conditions
    value, curve, fourth = (derivative(order, modes, 4) for order in (0, 2, 4))
    zero = sparse.csr_array(value.shape)
    mass = (curve, -1.0 * value, zero)
    stiffness = (viscosity * fourth, -2.0 * viscosity * curve, viscosity * value)
    return _pair(basis, squares, (mass, stiffness))


def _pair(
    basis: Recombination, squares: Array, operators: tuple[tuple[sparse.csr_array, ...], ...]
) -> BandedPair:
    """Recombine operators on Chebyshev coefficients and store their diagonals."""
    trial = recombining(basis.stencil)
    offsets = range(-basis.conditions, 2 * basis.conditions + 1, basis.stride)
    bands = [
        [diagonal_table(sparse.csr_array(op @ trial), offsets, basis.size)[:, : basis.size] for op in powers]
        for powers in operators
    ]
    tables = np.ascontiguousarray(np.array(bands))
    lower = basis.conditions // basis.stride
    for j, offset in enumerate(offsets):
        if offset > 0:
            tables[:, :, j, basis.size - offset :] = 0.0
    return BandedPair(tables, squares, lower, basis.stride)


def _projection_tables(grid: Grid, order: int, rows: int) -> tuple[Array, ...]:
    """Diagonals that take unscaled product coefficients to value, (∂zz,) and −∂z in C⁽order⁾."""
    modes = grid.modes_z
    scale = sparse.diags_array(product_scale(grid)[:modes])
    kinds = [(derivative(0, modes, order), range(0, 2 * order + 1, 2))]
    if order == 4:
        kinds.append((derivative(2, modes, order), range(0, 2 * order + 1, 2)))
    kinds.append((-1.0 * derivative(1, modes, order), range(1, 2 * order, 2)))
    return tuple(
        np.ascontiguousarray(diagonal_table(sparse.csr_array(op @ scale), offsets, rows))
        for op, offsets in kinds
    )
