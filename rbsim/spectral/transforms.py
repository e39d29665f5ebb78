"""Transforms between Fourier–Chebyshev coefficients and the dealiased grid, in shares.

Coefficients of several fields form a stack of shape (fields, nz, modes_x), rows of degree ≥ modes_z zero.
Vertical transforms work on columns start … stop−1 of all heights, horizontal ones on rows first … last−1 of
all wavenumbers; between the two lies one buffer of half-transformed rows. Shares do not touch each other, so
threads may take them at will, and a block of rows can be transformed, multiplied and transformed back while
it lies in the cache. The buffer serves both ways: a block of rows must be read before it is written.
"""

from __future__ import annotations

import importlib.util
import os
from typing import Any, Protocol

import numpy as np
import scipy.fft

from rbsim.spectral.banded import ComplexArray
from rbsim.spectral.grid import Array, Grid

#: Below this number of grid points a second thread costs more than it saves (measured).
POINTS_PER_THREAD = 16384

#: Most fields that are transformed together.
FIELDS = 4


class Transforms(Protocol):
    """What the dynamics need of a transform library."""

    name: str

    def columns_to_rows(self, stack: ComplexArray, start: int, stop: int) -> None:
        """Transform columns of a stack, scaled by `coefficient_scale`, to heights; the stack stays."""

    def rows_to_values(self, first: int, last: int, values: Array) -> None:
        """Transform rows to the values on the grid, shape (fields, last − first, nx)."""

    def values_to_rows(self, first: int, last: int, values: Array) -> None:
        """Transform values on the grid back to rows."""

    def rows_to_columns(self, stack: ComplexArray, start: int, stop: int) -> None:
        """Transform columns from heights to coefficients that want `product_scale`."""

    def at_heights(self, stack: ComplexArray) -> ComplexArray:
        """Return Fourier coefficients at all heights, shape (fields, nz, modes_x), in their own storage."""


def coefficient_scale(grid: Grid) -> Array:
    """Factors from Chebyshev coefficients to stack rows, shape (nz,)."""
    scale = np.full(grid.nz, 0.5)
    scale[0] = 1.0
    return scale


def product_scale(grid: Grid) -> Array:
    """Factors from unscaled coefficients of a forward transform to Chebyshev coefficients, shape (nz,)."""
    scale = np.full(grid.nz, 1.0 / (grid.nx * grid.nz))
    scale[0] *= 0.5
    return scale


def _new_rows(grid: Grid) -> ComplexArray:
    return np.zeros((FIELDS, grid.nz, grid.nx // 2 + 1), dtype=np.complex128)


class ScipyTransforms:
    """Transforms by scipy.fft, which allocates its results; they are copied to the rows at once."""

    name = "scipy.fft"

    def __init__(self, grid: Grid) -> None:
        self._grid = grid
        self._rows = _new_rows(grid)

    def columns_to_rows(self, stack: ComplexArray, start: int, stop: int) -> None:
        """Transform columns of a stack to heights."""
        self._rows[: len(stack), :, start:stop] = _cosine(stack[:, :, start:stop], 3)

    def rows_to_values(self, first: int, last: int, values: Array) -> None:
        """Transform rows to values on the grid."""
        rows = self._rows[: len(values), first:last, : self._grid.modes_x]
        values[...] = scipy.fft.irfft(rows, n=self._grid.nx, norm="forward")

    def values_to_rows(self, first: int, last: int, values: Array) -> None:
        """Transform values on the grid to rows."""
        retained = self._grid.modes_x
        self._rows[: len(values), first:last, :retained] = scipy.fft.rfft(values)[:, :, :retained]

    def rows_to_columns(self, stack: ComplexArray, start: int, stop: int) -> None:
        """Transform columns from heights to coefficients."""
        stack[:, :, start:stop] = _cosine(self._rows[: len(stack), :, start:stop], 2)

    def at_heights(self, stack: ComplexArray) -> ComplexArray:
        """Return Fourier coefficients at all heights."""
        modes = stack.shape[2]
        self.columns_to_rows(stack, 0, modes)
        return self._rows[: len(stack), :, :modes].copy()


def _cosine(columns: ComplexArray, kind: int) -> ComplexArray:
    pairs = np.ascontiguousarray(columns).view(np.float64)
    return np.asarray(scipy.fft.dct(pairs, type=kind, axis=1)).view(np.complex128)


class DuccTransforms:
    """Transforms by ducc0.fft, in place; nothing is allocated after construction."""

    name = "ducc0.fft"

    def __init__(self, grid: Grid) -> None:
        import ducc0.fft

        self._fft: Any = ducc0.fft
        self._modes = grid.modes_x
        self._rows = _new_rows(grid)
        self._pairs = self._rows.view(np.float64)

    def columns_to_rows(self, stack: ComplexArray, start: int, stop: int) -> None:
        """Transform columns of a stack to heights."""
        cut = slice(2 * start, 2 * stop)
        pairs = stack.view(np.float64)[:, :, cut]
        self._fft.dct(pairs, 3, axes=(1,), out=self._pairs[: len(stack), :, cut])

    def rows_to_values(self, first: int, last: int, values: Array) -> None:
        """Transform rows to values on the grid."""
        rows = self._rows[: len(values), first:last]
        rows[:, :, self._modes :] = 0.0
        self._fft.c2r(rows, axes=(2,), lastsize=values.shape[2], forward=False, out=values)

    def values_to_rows(self, first: int, last: int, values: Array) -> None:
        """Transform values on the grid to rows."""
        self._fft.r2c(values, axes=(2,), out=self._rows[: len(values), first:last])

    def rows_to_columns(self, stack: ComplexArray, start: int, stop: int) -> None:
        """Transform columns from heights to coefficients."""
        cut = slice(2 * start, 2 * stop)
        pairs = stack.view(np.float64)[:, :, cut]
        self._fft.dct(self._pairs[: len(stack), :, cut], 2, axes=(1,), out=pairs)

    def at_heights(self, stack: ComplexArray) -> ComplexArray:
        """Return Fourier coefficients at all heights."""
        modes = stack.shape[2]
        self.columns_to_rows(stack, 0, modes)
        return self._rows[: len(stack), :, :modes].copy()


def available_threads() -> int:
    """Return how many processors this process may use."""
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


def installed_libraries() -> tuple[str, ...]:
    """Return the names of the transform libraries that can be used here, the fastest first."""
    return ("ducc0.fft", "scipy.fft") if importlib.util.find_spec("ducc0") else ("scipy.fft",)


def choose_threads(grid: Grid) -> int:
    """Return how many threads pay for this grid on this machine."""
    return max(1, min(available_threads(), grid.nx * grid.nz // POINTS_PER_THREAD))


def choose_transforms(grid: Grid, library: str | None = None) -> Transforms:
    """Return the fastest transform library that is installed, or the named one.

    Parameters
    ----------
    grid : Grid
        The dealiased grid.
    library : {"scipy.fft", "ducc0.fft"}, optional
        Library to use instead of the fastest.
    """
    library = library or installed_libraries()[0]
    if library == "ducc0.fft":
        return DuccTransforms(grid)
    if library == "scipy.fft":
        return ScipyTransforms(grid)
    raise ValueError(f"transform library {library!r}: must be 'scipy.fft' or 'ducc0.fft'")
