"""Ideal point thermometers, evaluated from the spectral coefficients instead of the nearest grid point."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.state import State
from rbsim.spectral.chebyshev import slopes_at, values_at
from rbsim.spectral.grid import Array
from rbsim.spectral.ultraspherical import recombining


@dataclass(frozen=True)
class Thermometer:
    """A place in the cell and how often it is read.

    Parameters
    ----------
    name : str
        Name in files and figures.
    x, z : float
        Place in heights; 0 ≤ x < Γ, 0 ≤ z ≤ 1.
    interval : float
        Sampling interval in free-fall times.
    """

    name: str
    x: float
    z: float
    interval: float


class ThermometerArray:
    """All thermometers that are read at the same moments.

    Parameters
    ----------
    equations : BoussinesqEquations
        Cell, grid and trial functions.
    thermometers : sequence of Thermometer
        Where to read.
    """

    def __init__(self, equations: BoussinesqEquations, thermometers: Sequence[Thermometer]) -> None:
        grid = equations.grid
        self.thermometers = tuple(thermometers)
        self._z = np.array([t.z for t in thermometers])
        warm = recombining(equations.temperature_basis.stencil).T
        flow = recombining(equations.flow_basis.stencil).T
        values = [values_at(grid.modes_z, t.z) for t in thermometers]
        slopes = [slopes_at(grid.modes_z, t.z) for t in thermometers]
        self._warm = np.array([warm @ v for v in values]).astype(complex)
        self._flow = np.array([flow @ v for v in values]).astype(complex)
        self._shear = np.array([flow @ s for s in slopes]).astype(complex)
        waves = np.exp(1j * np.outer([t.x for t in thermometers], grid.wavenumbers))
        waves[:, 1:] *= 2.0  # the conjugate half of the spectrum
        self._waves = waves
        self._sloped_waves = waves * (1j * grid.wavenumbers)

    def sample(self, state: State) -> Array:
        """Return temperature, horizontal and vertical velocity, shape (thermometers, 3), free-fall units."""
        theta = np.sum((self._warm @ state.theta) * self._waves, axis=1).real
        u = -np.sum((self._shear @ state.psi) * self._waves, axis=1).real
        w = np.sum((self._flow @ state.psi) * self._sloped_waves, axis=1).real
        return np.stack([1.0 - self._z + theta, u, w], axis=1)
