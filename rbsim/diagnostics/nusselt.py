"""The Nusselt number by six definitions, each with the unsteady term that ties it to the volume mean.

Between plates of fixed temperature, with κ = (Ra Pr)^(−1/2) and in free-fall units, the equations give
at every moment (Shraiman & Siggia 1990, Phys. Rev. A 42, 3650; unsteady terms re-derived)

    Nu_volume = Nu_X + storage_X    for X = bottom, top, midplane, thermal, kinetic.

A storage term is the rate of change of a content of heat or energy; over a long window its mean vanishes.
"""

from __future__ import annotations

import numpy as np

from rbsim.diagnostics.heights import Heights
from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.state import State
from rbsim.spectral.banded import ComplexArray
from rbsim.spectral.chebyshev import first_moments, integrals, slopes_at, values_at
from rbsim.spectral.grid import Array

#: The six definitions, in the order of every table.
DEFINITIONS = ("bottom", "top", "volume", "midplane", "thermal", "kinetic")


class NusseltMeter:
    """Measures heat transport and its unsteady terms.

    Parameters
    ----------
    equations : BoussinesqEquations
        Cell and grid.
    """

    def __init__(self, equations: BoussinesqEquations) -> None:
        modes = equations.grid.modes_z
        self._equations = equations
        self._weights = equations.grid.weights_z
        self._bottom_slope, self._top_slope = slopes_at(modes, 0.0), slopes_at(modes, 1.0)
        self._middle, self._middle_slope = values_at(modes, 0.5), slopes_at(modes, 0.5)
        self._whole = integrals(modes, 0.0, 1.0)
        self._lower_half = integrals(modes, 0.0, 0.5)
        self._first_moment = first_moments(modes)

    def definitions(self, state: State, heights: Heights) -> dict[str, float]:
        """Return the Nusselt number by each definition, as it would be read off a snapshot.

        bottom, top
            Mean temperature gradient at the plate.
        volume
            1 + ⟨wT⟩/κ, the mean convective flux.
        midplane
            Convective and conductive flux through z = 1/2.
        thermal
            ⟨|∇T|²⟩, thermal dissipation.
        kinetic
            1 + Pr ⟨|∇u|²⟩, kinetic dissipation.
        """
        cell = self._equations.cell
        mean = self._mean_temperature(state)
        flux = heights.mean_product(heights.w, heights.theta)
        return {
            "bottom": 1.0 - float(self._bottom_slope @ mean),
            "top": 1.0 - float(self._top_slope @ mean),
            "volume": 1.0 + float(self._weights @ flux) / cell.diffusivity,
            "midplane": 1.0 - float(self._middle_slope @ mean) + self._middle_flux(state) / cell.diffusivity,
            "thermal": self._thermal(heights),
            "kinetic": 1.0 + cell.prandtl * self._kinetic(heights),
        }

    def storage(self, heights: Heights, change: State, moving: Heights) -> dict[str, float]:
        """Return the unsteady term of each definition but the volume mean, which needs none.

        Parameters
        ----------
        heights : Heights
            The state at the heights of the grid.
        change : State
            Its rate of change (`rate_of_change`).
        moving : Heights
            The rate of change at the heights of the grid.
        """
        diffusivity = self._equations.cell.diffusivity
        warming = self._mean_temperature(change)
        whole, moment = float(self._whole @ warming), float(self._first_moment @ warming)
        thermal = heights.mean_product(heights.theta, moving.theta)
        kinetic = heights.mean_product(heights.u, moving.u) + heights.mean_product(heights.w, moving.w)
        rates = {
            "bottom": moment - whole,
            "top": moment,
            "midplane": float(self._lower_half @ warming) + moment - whole,
            "thermal": float(self._weights @ thermal),
            "kinetic": float(self._weights @ kinetic),
        }
        return {name: rate / diffusivity for name, rate in rates.items()}

    def profile(self, heights: Heights) -> Array:
        """Return Nu(z), the total vertical heat flux at each height, shape (nz,)."""
        flux = heights.mean_product(heights.w, heights.theta)
        return np.asarray(1.0 - heights.theta_z[:, 0].real + flux / self._equations.cell.diffusivity)

    def _mean_temperature(self, state: State) -> Array:
        """Chebyshev coefficients of the horizontal average of θ."""
        return np.asarray(self._equations.temperature_basis.to_chebyshev(state.theta[:, 0].real))

    def _middle_flux(self, state: State) -> float:
        equations = self._equations
        theta = self._at_middle(equations.temperature_basis.to_chebyshev(state.theta))
        psi = self._at_middle(equations.flow_basis.to_chebyshev(state.psi))
        w = 1j * equations.grid.wavenumbers * psi
        return 2.0 * float(np.sum((w[1:] * theta[1:].conj()).real))

    def _at_middle(self, coefficients: ComplexArray) -> ComplexArray:
        return np.asarray(self._middle @ coefficients)

    def _thermal(self, heights: Heights) -> float:
        steep = heights.theta_z.copy()
        steep[:, 0] -= 1.0
        square = heights.mean_product(steep, steep) + heights.mean_square_slope(heights.theta)
        return float(self._weights @ square)

    def _kinetic(self, heights: Heights) -> float:
        """⟨|∇u|²⟩ = ⟨2 (∂x u)² + (∂z u)² + (∂x w)²⟩, since ∂z w = −∂x u."""
        square = 2.0 * heights.mean_square_slope(heights.u) + heights.mean_square_slope(heights.w)
        return float(self._weights @ (square + heights.mean_product(heights.u_z, heights.u_z)))


class RateOfChange:
    """Finds the time derivative of a state, M ċ = L c + N, without taking a step.

    Parameters
    ----------
    equations : BoussinesqEquations
        What drives the state.
    """

    def __init__(self, equations: BoussinesqEquations) -> None:
        self._equations = equations
        self._pairs = (equations.heat, equations.flow)
        self._factors = tuple(pair.new_factors() for pair in self._pairs)
        for pair, factors in zip(self._pairs, self._factors, strict=True):
            pair.factorise(0.0, factors)

    def evaluate(self, state: State) -> State:
        """Return the rate of change of all coefficients, with the clock of the state."""
        terms = (np.empty_like(state.theta), np.empty_like(state.psi))
        self._equations.explicit_terms(state, *terms)
        theta, psi = (
            pair.solve(factors, term + pair.apply_stiffness(values))
            for pair, factors, term, values in zip(
                self._pairs, self._factors, terms, (state.theta, state.psi), strict=True
            )
        )
        return State(theta, psi, state.time, state.steps)
