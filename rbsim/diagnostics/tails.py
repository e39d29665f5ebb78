"""How far the spectra of a state have decayed at the end of the resolved modes."""

from __future__ import annotations

import numpy as np

from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.state import State
from rbsim.spectral.banded import ComplexArray
from rbsim.spectral.grid import Array

#: Share of the modes that counts as the tail.
TAIL = 0.125


def spectral_tails(equations: BoussinesqEquations, state: State) -> tuple[float, float]:
    """Return the tails in x and z: largest amplitude of the last eighth of modes over the largest of all.

    Parameters
    ----------
    equations : BoussinesqEquations
        Trial functions and wavenumbers.
    state : State
        What to judge; the worse of temperature and vertical velocity counts. A motionless state has tail 0.
    """
    theta = equations.temperature_basis.to_chebyshev(state.theta)
    w = equations.grid.wavenumbers * equations.flow_basis.to_chebyshev(state.psi)
    # symmetric rolls fill only every n-th Fourier mode: the tail must hold at least one of them
    pairs = int(np.argmax(_amplitudes(w, axis=0)))
    across = max(_tail(_amplitudes(field, axis=0), pairs + 1) for field in (theta, w))
    upwards = max(_tail(_amplitudes(field, axis=1), 2) for field in (theta, w))
    return across, upwards


def roll_pairs(equations: BoussinesqEquations, state: State) -> int:
    """Return the number of roll pairs: the mode with the largest vertical velocity (0 at rest)."""
    w = equations.grid.wavenumbers * equations.flow_basis.to_chebyshev(state.psi)
    return int(np.argmax(_amplitudes(w, axis=0)))


def _amplitudes(field: ComplexArray, axis: int) -> Array:
    return np.asarray(np.sqrt(np.sum(np.abs(field) ** 2, axis=axis)))


def _tail(amplitudes: Array, fewest: int) -> float:
    largest = amplitudes.max()
    count = max(2, fewest, int(TAIL * amplitudes.size))
    return float(amplitudes[-count:].max() / largest) if largest > 0 else 0.0
