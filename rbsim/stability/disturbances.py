"""Growth rates and shapes of small disturbances of the conducting layer at any Rayleigh number."""

from __future__ import annotations

from dataclasses import dataclass
from math import sqrt

import numpy as np
from scipy.linalg import eigh

from rbsim.errors import NotConvergedError
from rbsim.spectral.chebyshev import differentiate
from rbsim.spectral.grid import Array
from rbsim.stability.forms import AnyPlate, LayerForms, plate_at

#: Chebyshev polynomials tried in turn until the rates are settled.
MODES = (32, 48, 72, 108, 160)
#: Change from one of them to the next that counts as settled, relative to the diffusive rate of the mode.
SETTLED = 1e-10


@dataclass(frozen=True, eq=False)
class Disturbance:
    """One normal mode w(z) e^{ikx + σt}, θ(z) e^{ikx + σt} of the conducting layer.

    Parameters
    ----------
    rate : float
        Growth rate σ in κ/H²; it is real for a layer heated from below.
    wavenumber : float
        k in 1/H.
    flow, heat : ndarray
        Chebyshev coefficients in T_n(1 − 2z) of w(z) in κ/H and θ(z); the largest is of order 1.
    """

    rate: float
    wavenumber: float
    flow: Array
    heat: Array

    def shapes(self, z: Array) -> dict[str, Array]:
        """Return the profiles of θ cos kx, w cos kx and u sin kx, scaled to largest |θ| = 1.

        Parameters
        ----------
        z : ndarray, shape (n,)
            Heights in H.

        Returns
        -------
        dict of ndarray, each of shape (n,)
            ``temperature``, ``vertical_velocity`` and ``horizontal_velocity`` u = −w′/k, velocities in κ/H.
        """
        table = np.cos(np.outer(np.arccos(np.clip(1.0 - 2.0 * z, -1.0, 1.0)), np.arange(self.flow.size)))
        theta, w = table @ self.heat, table @ self.flow
        slope = table @ differentiate(self.flow)
        scale = 1.0 / theta[np.argmax(np.abs(theta))]
        return {
            "temperature": scale * theta,
            "vertical_velocity": scale * w,
            "horizontal_velocity": -scale * slope / self.wavenumber,
        }


def growth_rates(
    plates: tuple[AnyPlate, AnyPlate], rayleigh: float, prandtl: float, k: float, count: int = 1
) -> list[Disturbance]:
    """Return the disturbances of wavenumber k that grow fastest.

    Parameters
    ----------
    plates : tuple of Plate or ThickPlate
        Bottom and top plate.
    rayleigh, prandtl : float
        Pure numbers of the layer, positive.
    k : float
        Wavenumber in 1/H, positive.
    count : int
        How many modes to return, fastest growth first.

    Returns
    -------
    list of Disturbance
        Rates in κ/H²; divide by sqrt(Ra Pr) for free-fall units.

    Raises
    ------
    ValueError
        A number is not positive.
    NotConvergedError
        The modes are too thin for the finest expansion.
    """
    for name, value in (("rayleigh", rayleigh), ("prandtl", prandtl), ("wavenumber", k)):
        if not 0.0 < value < np.inf:
            raise ValueError(f"{name} {value}: must be positive and finite")
    last: np.ndarray | None = None
    for modes in MODES:
        forms = LayerForms(plate_at(plates[0], k), plate_at(plates[1], k), k, modes)
        found = _modes(forms, rayleigh, prandtl, count)
        rates = np.array([mode.rate for mode in found])
        scale = (1.0 + prandtl) * (k**2 + np.pi**2) + np.abs(rates)
        if last is not None and np.all(np.abs(rates - last) < SETTLED * scale):
            return found
        last = rates
    raise NotConvergedError(
        f"growth rates at Ra = {rayleigh:g}, k = {k:g}: not settled to {SETTLED:g} with {MODES[-1]} "
        "Chebyshev polynomials; choose a smaller wavenumber or fewer modes"
    )


def _modes(forms: LayerForms, rayleigh: float, prandtl: float, count: int) -> list[Disturbance]:
    """Eigenvectors of the symmetric problem in w/(k sqrt(Ra)) and θ."""
    lift = sqrt(rayleigh) * forms.k
    coupling = lift * forms.coupling()
    rate = np.block([[-forms.strain(), coupling], [coupling.T, -forms.conduction()]])
    content = np.block(
        [[forms.inertia() / prandtl, np.zeros_like(coupling)], [np.zeros_like(coupling.T), forms.content()]]
    )
    size = rate.shape[0]
    values, vectors = eigh(rate, content, subset_by_index=(size - count, size - 1))
    modes = [_polished(rate, content, values[i], vectors[:, i]) for i in range(count - 1, -1, -1)]
    split = coupling.shape[0]
    return [
        Disturbance(
            sigma, forms.k, forms.flow.chebyshev @ (lift * v[:split]), forms.heat.chebyshev @ v[split:]
        )
        for sigma, v in modes
    ]


def _polished(rate: Array, content: Array, value: float, vector: Array) -> tuple[float, Array]:
    """One step of inverse iteration, which removes the rounding errors of the stiffest modes."""
    near = value + 1e-7 * (1.0 + abs(value))
    raw = np.linalg.solve(rate - near * content, content @ vector)
    better = np.asarray(raw / sqrt(float(raw @ content @ raw)), dtype=np.float64)
    return float(better @ rate @ better), better
