"""Real vectors of the coefficients that a symmetry leaves free."""

from __future__ import annotations

from typing import Literal

import numpy as np
from numpy.typing import NDArray

from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.state import State
from rbsim.spectral.banded import ComplexArray
from rbsim.spectral.grid import Array

#: Even or odd under a symmetry, or free of it.
Sign = Literal[-1, 0, 1]


class Subspace:
    """States of one symmetry class, as real vectors.

    The mirror turns x into −x; a roll with warm fluid rising at x = 0 is even: θ has cosines only, ψ sines.
    The half turn takes (x, z, θ) to (x + Γ/2, 1 − z, −θ); between equal plates a single roll pair is even.

    Parameters
    ----------
    equations : BoussinesqEquations
        Cell and grid.
    mirror, half_turn : {1, −1, 0}
        Even, odd, or both.
    """

    def __init__(self, equations: BoussinesqEquations, mirror: Sign = 1, half_turn: Sign = 0) -> None:
        self._blank = equations.new_state()
        # θ is real and ψ imaginary where θ is even in x
        self._theta = _places(self._blank.theta, half_turn, real=mirror >= 0, imaginary=mirror <= 0)
        self._psi = _places(self._blank.psi, half_turn, real=mirror <= 0, imaginary=mirror >= 0)

    @property
    def size(self) -> int:
        """Length of the vectors."""
        return int(self._theta.size + self._psi.size)

    def pack(self, theta: ComplexArray, psi: ComplexArray) -> Array:
        """Return the free coefficients of θ and ψ (or of their equations), shape (size,)."""
        flat = (np.ascontiguousarray(part).view(np.float64).ravel() for part in (theta, psi))
        return np.concatenate(
            [part[places] for part, places in zip(flat, (self._theta, self._psi), strict=True)]
        )

    def unpack(self, vector: Array) -> State:
        """Return the state of a vector of shape (size,)."""
        theta, psi = np.zeros_like(self._blank.theta), np.zeros_like(self._blank.psi)
        theta.view(np.float64).ravel()[self._theta] = vector[: self._theta.size]
        psi.view(np.float64).ravel()[self._psi] = vector[self._theta.size :]
        return State(theta, psi)


def _places(part: ComplexArray, half_turn: Sign, real: bool, imaginary: bool) -> NDArray[np.intp]:
    """Return indices into the flat real view of coefficients; the mean over x has no imaginary part."""
    rows, columns = np.indices(part.shape)
    even = (rows + columns) % 2 == 1
    kept = np.ones(part.shape, dtype=bool) if half_turn == 0 else even == (half_turn == 1)
    free = np.stack([kept & real, kept & imaginary & (columns > 0)], axis=2)
    return np.flatnonzero(free)
