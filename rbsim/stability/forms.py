"""Energy forms of the linearised layer, by Galerkin's method with Chebyshev trial functions.

A disturbance w(z) e^{ikx}, θ(z) e^{ikx} about conduction obeys, with length H and time H²/κ,

    (σ/Pr) m(w, v) = −a(w, v) + Ra k² ⟨θ v⟩,    σ ⟨θ φ⟩ = −b(θ, φ) + ⟨w φ⟩   for all v, φ

    a(w, w) = ⟨w″² + 2k² w′² + k⁴ w²⟩,  m(w, w) = ⟨w′² + k² w²⟩,
    b(θ, θ) = ⟨θ′² + k² θ²⟩ + Σ Bi θ² at the plates.

All forms are symmetric and positive (Chandrasekhar 1961, ch. II), so each eigenvalue is real and its error is
the square of that of the mode. Stress-free plates and heat conduction through plates are natural conditions:
only w = 0, w′ = 0 at no-slip plates and θ = 0 at plates of fixed temperature are built into the functions.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from math import inf, isfinite, isinf, tanh

import numpy as np
from numpy.polynomial.legendre import leggauss

from rbsim.dynamics.cell import Motion, Plate
from rbsim.spectral.chebyshev import differentiate, values_at
from rbsim.spectral.grid import Array
from rbsim.spectral.recombination import PlateCondition, recombine


@dataclass(frozen=True)
class ThickPlate:
    """A conducting plate whose outer face is kept at fixed temperature.

    Its Biot number for wavenumber k is r k coth(k d), with the ratio r of conductivities and the thickness d
    (Hurle, Jakeman & Pike 1967, Proc. R. Soc. A 296, 469).

    Parameters
    ----------
    motion : {"no-slip", "free-slip"}
        As in `Plate`.
    ratio : float
        Conductivity of the plate over that of the fluid, positive.
    thickness : float
        Thickness in layer heights; infinite for a half space.
    """

    motion: Motion = "no-slip"
    ratio: float = 1.0
    thickness: float = inf

    def at(self, k: float) -> Plate:
        """Return the plate of the same conductance for wavenumber k > 0 in 1/H."""
        spread = 1.0 if isinf(self.thickness) else tanh(k * self.thickness)
        return Plate(self.motion, self.ratio * k / spread)


AnyPlate = Plate | ThickPlate


def plate_at(plate: AnyPlate, k: float) -> Plate:
    """Return the plate as it acts on wavenumber k in 1/H."""
    return plate.at(k) if isinstance(plate, ThickPlate) else plate


@dataclass(frozen=True, eq=False)
class TrialFunctions:
    """Trial functions and their derivatives at Gauss–Legendre points.

    Parameters
    ----------
    chebyshev : ndarray, shape (modes, size)
        Coefficients of each function in T_n(1 − 2z).
    values : tuple of ndarray, shape (points, size)
        Values, slopes and second derivatives, times the root of the quadrature weight.
    plates : tuple of ndarray, shape (size,)
        Values at z = 0 and z = 1.
    """

    chebyshev: Array
    values: tuple[Array, Array, Array]
    plates: tuple[Array, Array]


@lru_cache(maxsize=64)
def trial_functions(conditions: tuple[PlateCondition, ...], modes: int) -> TrialFunctions:
    """Tabulate the polynomials of degree < `modes` that satisfy the conditions.

    Parameters
    ----------
    conditions : tuple of PlateCondition
        Essential conditions.
    modes : int
        Number of Chebyshev polynomials; inner products are exact.
    """
    points, weights = leggauss(modes)
    table = np.cos(np.outer(np.arccos(points), np.arange(modes))) * np.sqrt(0.5 * weights)[:, None]
    basis = recombine(conditions, modes)
    functions = np.asarray(basis.to_chebyshev(np.eye(basis.size)))
    slopes = differentiate(functions)
    values = (table @ functions, table @ slopes, table @ differentiate(slopes))
    return TrialFunctions(
        functions, values, (values_at(modes, 0.0) @ functions, values_at(modes, 1.0) @ functions)
    )


@dataclass(frozen=True, eq=False)
class LayerForms:
    """The forms of one pair of plates for one wavenumber.

    Parameters
    ----------
    bottom, top : Plate
        The plates, as they act on this wavenumber.
    k : float
        Wavenumber in 1/H, not negative.
    modes : int
        Chebyshev polynomials of each unknown.
    """

    bottom: Plate
    top: Plate
    k: float
    modes: int

    @property
    def flow(self) -> TrialFunctions:
        """Trial functions of w."""
        conditions = [PlateCondition(at_top, (1.0,)) for at_top in (False, True)]
        for plate, at_top in ((self.bottom, False), (self.top, True)):
            if plate.motion == "no-slip":
                conditions.append(PlateCondition(at_top, (0.0, 1.0)))
        return trial_functions(tuple(conditions), self.modes)

    @property
    def heat(self) -> TrialFunctions:
        """Trial functions of θ."""
        sides = ((self.bottom, False), (self.top, True))
        conditions = tuple(PlateCondition(at_top, (1.0,)) for plate, at_top in sides if isinf(plate.biot))
        return trial_functions(conditions, self.modes)

    @property
    def insulating(self) -> bool:
        """Whether no plate conducts, so that a uniform temperature meets no resistance at k = 0."""
        return self.bottom.biot == 0.0 and self.top.biot == 0.0

    def strain(self) -> Array:
        """Return the matrix of a: viscous dissipation."""
        value, slope, curve = self.flow.values
        return curve.T @ curve + 2.0 * self.k**2 * (slope.T @ slope) + self.k**4 * (value.T @ value)

    def inertia(self) -> Array:
        """Return the matrix of m: kinetic energy."""
        value, slope, _ = self.flow.values
        return slope.T @ slope + self.k**2 * (value.T @ value)

    def conduction(self) -> Array:
        """Return the matrix of b: thermal dissipation."""
        value, slope, _ = self.heat.values
        return slope.T @ slope + self.exchange() + self.k**2 * (value.T @ value)

    def exchange(self) -> Array:
        """Return the matrix of Σ Bi θ² at the plates of finite conductance."""
        size = self.heat.plates[0].size
        total = np.zeros((size, size))
        for plate, trace in zip((self.bottom, self.top), self.heat.plates, strict=True):
            if isfinite(plate.biot):
                total += plate.biot * np.outer(trace, trace)
        return total

    def content(self) -> Array:
        """Return the matrix of ⟨θ φ⟩."""
        value = self.heat.values[0]
        return np.asarray(value.T @ value)

    def coupling(self) -> Array:
        """Return the matrix of ⟨w θ⟩, shape (flow functions, heat functions)."""
        return np.asarray(self.flow.values[0].T @ self.heat.values[0])
