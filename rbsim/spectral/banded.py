"""Banded systems mass − shift·stiffness for all wavenumbers at once, as numbers in band storage."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from rbsim.spectral import kernels
from rbsim.spectral.grid import Array

ComplexArray = NDArray[np.complex128]


@dataclass(frozen=True, eq=False)
class BandedPair:
    """Mass M and stiffness L of one evolution equation M ċ = L c + N, for every wavenumber.

    Parameters
    ----------
    bands : ndarray, shape (2, 3, diagonals, rows)
        Diagonal tables of M and L; entry p of the second axis multiplies (k²)ᵖ.
    squares : ndarray, shape (columns,)
        k² of each column.
    lower : int
        Number of sub-diagonals.
    stride : int
        Distance of neighbouring diagonals.
    """

    bands: Array
    squares: Array
    lower: int
    stride: int

    @property
    def rows(self) -> int:
        """Number of unknowns of each wavenumber."""
        return int(self.bands.shape[3])

    @cached_property
    def paired_squares(self) -> Array:
        """k² of each column twice, for real and imaginary parts, shape (2·columns,)."""
        return np.repeat(self.squares, 2)

    def new_factors(self) -> Array:
        """Return uninitialised storage for one factorisation, shape (rows, diagonals, columns)."""
        return np.empty((self.rows, self.bands.shape[2], self.squares.size))

    def factorise(self, shift: float, factors: Array) -> None:
        """Fill `factors` with the LU decomposition of M − shift·L."""
        kernels.factorise(self.bands, self.squares, shift, self.lower, self.stride, factors)

    def solve(self, factors: Array, values: ComplexArray) -> ComplexArray:
        """Return the solutions of the factorised systems for right-hand sides of shape (rows, columns)."""
        total = np.zeros_like(values)
        kernels.substitute(factors, self.lower, self.stride, values.copy(), total, 0, values.shape[1])
        return total

    def apply_mass(self, values: ComplexArray) -> ComplexArray:
        """Return M·values, of shape (rows, columns)."""
        return self._apply(self.bands[0], values)

    def apply_stiffness(self, values: ComplexArray) -> ComplexArray:
        """Return L·values, of shape (rows, columns)."""
        return self._apply(self.bands[1], values)

    def _apply(self, bands: Array, values: ComplexArray) -> ComplexArray:
        result = np.empty_like(values)
        operands = (values, values, values)
        kernels.combine(
            bands,
            self.paired_squares,
            self.lower,
            self.stride,
            (1.0, 0.0, 0.0),
            operands,
            result,
            0,
            values.shape[1],
        )
        return result
