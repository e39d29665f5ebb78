"""All numbers that are recorded of a state, by the names of the quantities table."""

from __future__ import annotations

import numpy as np

from rbsim.diagnostics.heights import Heights, raise_to_heights
from rbsim.diagnostics.layers import kinetic_layers, thermal_layers
from rbsim.diagnostics.nusselt import NusseltMeter, RateOfChange
from rbsim.diagnostics.tails import roll_pairs, spectral_tails
from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.state import State
from rbsim.spectral.chebyshev import integrals, values_at
from rbsim.spectral.grid import Array


class Measurement:
    """Measures one cell at any moment.

    Parameters
    ----------
    equations : BoussinesqEquations
        Cell and grid.
    """

    def __init__(self, equations: BoussinesqEquations) -> None:
        modes = equations.grid.modes_z
        self._equations = equations
        self._meter = NusseltMeter(equations)
        self._rate = RateOfChange(equations)
        self._whole, self._middle = integrals(modes, 0.0, 1.0), values_at(modes, 0.5)

    def history(self, state: State) -> dict[str, float]:
        """Return the history quantities, free-fall units."""
        equations = self._equations
        change = self._rate.evaluate(state)
        heights, moving = raise_to_heights(equations, state), raise_to_heights(equations, change)
        nusselt = self._meter.definitions(state, heights)
        storage = self._meter.storage(heights, change, moving)
        tail_x, tail_z = spectral_tails(equations, state)
        return {
            **{f"nusselt_{name}": value for name, value in nusselt.items()},
            **{f"storage_{name}": value for name, value in storage.items()},
            **self._flow(heights),
            **self._warmth(state, nusselt),
            "tail_x": tail_x,
            "tail_z": tail_z,
            "roll_pairs": float(roll_pairs(equations, state)),
        }

    def profiles(self, state: State) -> dict[str, Array]:
        """Return the horizontally averaged profiles, each of shape (nz,), free-fall units."""
        heights = raise_to_heights(self._equations, state)
        fluctuation = heights.theta.copy()
        fluctuation[:, 0] = 0.0
        return {
            "temperature_profile": 1.0 - self._equations.grid.z + heights.theta[:, 0].real,
            "nusselt_profile": self._meter.profile(heights),
            "temperature_rms_profile": np.sqrt(heights.mean_product(fluctuation, fluctuation)),
            "horizontal_velocity_rms_profile": np.sqrt(heights.mean_product(heights.u, heights.u)),
            "vertical_velocity_rms_profile": np.sqrt(heights.mean_product(heights.w, heights.w)),
        }

    def _flow(self, heights: Heights) -> dict[str, float]:
        """Kinetic energy, Reynolds number of the rms velocity, kinetic layers."""
        cell, grid = self._equations.cell, self._equations.grid
        along = heights.mean_product(heights.u, heights.u)
        square = float(grid.weights_z @ (along + heights.mean_product(heights.w, heights.w)))
        bottom, top = kinetic_layers(grid.z, np.sqrt(along))
        return {
            "reynolds": np.sqrt(square) / cell.viscosity,
            "kinetic_energy": 0.5 * square,
            "kinetic_layer_bottom": bottom,
            "kinetic_layer_top": top,
        }

    def _warmth(self, state: State, nusselt: dict[str, float]) -> dict[str, float]:
        mean = self._equations.temperature_basis.to_chebyshev(state.theta[:, 0].real)
        middle = 0.5 + float(self._middle @ mean)
        bottom, top = thermal_layers((nusselt["bottom"], nusselt["top"]), middle)
        return {
            "temperature_mean": 0.5 + float(self._whole @ mean),
            "thermal_layer_bottom": bottom,
            "thermal_layer_top": top,
        }
