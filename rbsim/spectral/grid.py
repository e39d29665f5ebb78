"""The dealiased grid: equidistant points in x, Chebyshev–Gauss points in z, and the modes they carry."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

#: Smallest number of points in either direction that leaves room for the plate conditions.
SMALLEST = 16


@dataclass(frozen=True)
class Grid:
    """Points and modes of a cell of height 1 and period `width`.

    The grid carries 3/2 times as many points as modes in both directions, so that quadratic products are
    free of aliasing errors.

    Parameters
    ----------
    nx, nz : int
        Points in x and z, even, at least 16.
    width : float
        Horizontal period Γ in cell heights.
    """

    nx: int
    nz: int
    width: float

    def __post_init__(self) -> None:
        if min(self.nx, self.nz) < SMALLEST or self.nx % 2 or self.nz % 2:
            raise ValueError(f"grid {self.nx} x {self.nz}: both numbers must be even and at least {SMALLEST}")
        if not self.width > 0:
            raise ValueError(f"width {self.width}: must be positive")

    @property
    def modes_x(self) -> int:
        """Number of retained complex Fourier modes, k = 0 included (3(M−1) < nx)."""
        return (self.nx - 1) // 3 + 1

    @property
    def modes_z(self) -> int:
        """Number of retained Chebyshev modes (3(N−1) < 2 nz)."""
        return (2 * self.nz - 1) // 3 + 1

    @cached_property
    def wavenumbers(self) -> Array:
        """Horizontal wavenumbers 2πm/Γ of the retained modes, shape (modes_x,), in 1/H."""
        return np.asarray(2.0 * np.pi * np.arange(self.modes_x) / self.width, dtype=np.float64)

    @cached_property
    def x(self) -> Array:
        """Horizontal points, shape (nx,), in H."""
        return self.width * np.arange(self.nx) / self.nx

    @cached_property
    def angles(self) -> Array:
        """Angles of the Gauss points, shape (nz,): z = (1 − cos angle)/2."""
        return np.asarray(np.pi * (np.arange(self.nz) + 0.5) / self.nz, dtype=np.float64)

    @cached_property
    def z(self) -> Array:
        """Vertical Chebyshev–Gauss points in ascending order, shape (nz,), in H; no point lies on a plate."""
        return np.sin(0.5 * self.angles) ** 2

    @cached_property
    def spacing_z(self) -> Array:
        """Local distance of neighbouring vertical points, shape (nz,), in H."""
        return 0.5 * np.pi / self.nz * np.sin(self.angles)

    @cached_property
    def weights_z(self) -> Array:
        """Quadrature weights of the vertical points for ∫₀¹ dz, shape (nz,) (first rule of Fejér 1933)."""
        return fejer_weights(self.nz)


def fejer_weights(count: int) -> Array:
    """Weights of Fejér's first rule on `count` Chebyshev–Gauss points of the interval [0, 1].

    Parameters
    ----------
    count : int
        Number of points.

    Returns
    -------
    ndarray, shape (count,)
        Positive weights that sum to one; exact for polynomials of degree < `count`.
    """
    angles = np.pi * (np.arange(count) + 0.5) / count
    orders = np.arange(1, (count - 1) // 2 + 1)
    series = np.cos(2.0 * np.outer(angles, orders)) / (4.0 * orders**2 - 1.0)
    return np.asarray((1.0 - 2.0 * series.sum(axis=1)) / count)
