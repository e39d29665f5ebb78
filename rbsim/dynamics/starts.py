"""Initial states: conduction with seeded noise, a single roll, another state."""

from __future__ import annotations

import numpy as np

from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.state import State

#: Noise fills this many modes in each direction, so that the same seed means the same field on every grid.
NOISE_MODES = 16


def conduction_with_noise(equations: BoussinesqEquations, amplitude: float, seed: int) -> State:
    """Return the conduction state at rest with smooth random temperature noise.

    Parameters
    ----------
    equations : BoussinesqEquations
        Cell and grid.
    amplitude : float
        Root mean square of the noise in units of the temperature drop.
    seed : int
        Seed of the random numbers.
    """
    draws = np.random.default_rng(seed).standard_normal((2, NOISE_MODES, NOISE_MODES))
    noise = draws[0] + 1j * draws[1]
    noise[:, 0] = 0.0
    state = equations.new_state()
    rows, columns = min(NOISE_MODES, state.theta.shape[0]), min(NOISE_MODES, state.theta.shape[1])
    state.theta[:rows, :columns] = noise[:rows, :columns]
    state.theta *= amplitude / _rms(equations, state)
    return state


def _rms(equations: BoussinesqEquations, state: State) -> float:
    _, _, temperature = equations.fields(state)
    departure = temperature - (1.0 - equations.grid.z)[:, None]
    return float(np.sqrt(equations.grid.weights_z @ np.mean(departure**2, axis=1)))


def single_roll(equations: BoussinesqEquations, pairs: int, amplitude: float) -> State:
    """Return θ = 4 amplitude z(1 − z) cos(2π pairs x/Γ) at rest: rolls with warm fluid rising at x = 0.

    Parameters
    ----------
    equations : BoussinesqEquations
        Cell and grid.
    pairs : int
        Number of roll pairs in the period, 1 ≤ pairs < modes_x.
    amplitude : float
        Largest departure from conduction in units of the temperature drop.
    """
    if not 1 <= pairs < equations.grid.modes_x:
        raise ValueError(f"pairs {pairs}: must be between 1 and {equations.grid.modes_x - 1} on this grid")
    shape = equations.temperature_basis.from_chebyshev(_parabola(equations.grid.modes_z))
    state = equations.new_state()
    state.theta[:, pairs] = 0.5 * amplitude * shape
    return state


def _parabola(modes: int) -> np.ndarray:
    """Chebyshev coefficients of 4z(1 − z) = (1 − T_2)/2."""
    coefficients = np.zeros(modes)
    coefficients[0], coefficients[2] = 0.5, -0.5
    return coefficients


def from_state(equations: BoussinesqEquations, state: State) -> State:
    """Return another state on this grid, by spectral interpolation, with the clock at zero.

    The state must belong to the same kind of plates, since the trial functions depend on them.
    """
    grid = equations.grid
    result = state.resized(grid.modes_z, grid.modes_x)
    result.time, result.steps = 0.0, 0
    return result
