"""Marginal stability: the Rayleigh number at which a wavenumber neither grows nor decays, and its minimum."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from math import ceil, floor, pi

import numpy as np
from scipy.linalg import cholesky, solve, solve_triangular
from scipy.optimize import brentq

from rbsim.dynamics.cell import Plate
from rbsim.errors import NotConvergedError
from rbsim.spectral.grid import Array
from rbsim.stability.forms import AnyPlate, LayerForms, ThickPlate, plate_at

#: Chebyshev polynomials tried in turn until the Rayleigh number is settled.
MODES = (24, 36, 54, 80, 120)
#: Relative change from one of them to the next that counts as settled.
SETTLED = 1e-12
#: Wavenumbers in 1/H between which a minimum is sought.
SHORTEST, LONGEST = 1e3, 1e-7


@dataclass(frozen=True, eq=False)
class MarginalMode:
    """A disturbance at rest between growth and decay.

    Parameters
    ----------
    rayleigh : float
        Its Rayleigh number.
    wavenumber : float
        k in 1/H; 0 stands for the limit of infinite wavelength.
    slope : float
        d ln Ra / d(k²) along the neutral curve, in H².
    flow, heat : ndarray
        Chebyshev coefficients in T_n(1 − 2z) of w(z) in κ/H and θ(z), of arbitrary common size; for k = 0
        of w/k² and θ.
    """

    rayleigh: float
    wavenumber: float
    slope: float
    flow: Array
    heat: Array


def marginal_mode(bottom: AnyPlate, top: AnyPlate, k: float, number: int = 0) -> MarginalMode:
    """Return the disturbance of wavenumber k that is marginal, to about 13 digits.

    Parameters
    ----------
    bottom, top : Plate or ThickPlate
        The plates.
    k : float
        Wavenumber in 1/H; zero is allowed for two insulating plates (fixed flux) and means the limit.
    number : int
        0 for the mode that comes first, 1 for the next (odd in z between equal plates), and so on.

    Raises
    ------
    ValueError
        k is negative, or zero for plates that conduct.
    NotConvergedError
        The mode is too thin for the finest expansion.
    """
    limit = k == 0.0 and number == 0 and _insulating(bottom, top)
    if not (k > 0.0 or limit):
        raise ValueError(f"wavenumber {k}: must be positive (0 only for two plates of fixed flux)")
    last: MarginalMode | None = None
    for modes in MODES:
        forms = LayerForms(plate_at(bottom, k), plate_at(top, k), k, modes)
        mode = (
            _long_wave_mode(forms)
            if limit
            else _mode(forms, number, (_biot_slope(bottom, k), _biot_slope(top, k)))
        )
        if last is not None and abs(mode.rayleigh - last.rayleigh) < SETTLED * mode.rayleigh:
            return mode
        last = mode
    raise NotConvergedError(
        f"marginal mode {number} at k = {k:g}: not settled to {SETTLED:g} with {MODES[-1]} Chebyshev "
        "polynomials; choose a smaller wavenumber"
    )


def neutral_curve(bottom: AnyPlate, top: AnyPlate, wavenumbers: Array) -> Array:
    """Return the marginal Rayleigh number of each wavenumber.

    Parameters
    ----------
    bottom, top : Plate or ThickPlate
        The plates.
    wavenumbers : ndarray, shape (n,)
        Wavenumbers in 1/H.
    """
    return np.array([marginal_mode(bottom, top, float(k)).rayleigh for k in wavenumbers])


def critical_mode(
    bottom: AnyPlate, top: AnyPlate, number: int = 0, period: float | None = None
) -> MarginalMode:
    """Return the marginal mode of lowest Rayleigh number.

    The minimum is a root of d ln Ra / d(k²), known from the mode itself, so that k has as many digits as Ra.
    Between plates of fixed flux the minimum lies at k = 0, where the long-wave expansion is used.

    Parameters
    ----------
    bottom, top : Plate or ThickPlate
        The plates.
    number : int
        Which mode, as in `marginal_mode`.
    period : float, optional
        Horizontal period in H of a cell; only the wavenumbers 2πn/period, n ≥ 1, are then allowed.

    Raises
    ------
    NotConvergedError
        The neutral curve has no minimum between wavelengths of 0.006 and 6e7 heights.
    """
    best = _lowest(bottom, top, number)
    if period is None:
        return best
    unit = 2.0 * pi / period
    counts = {max(1, floor(best.wavenumber / unit)), max(1, ceil(best.wavenumber / unit))}
    candidates = [marginal_mode(bottom, top, n * unit, number) for n in sorted(counts)]
    return min(candidates, key=lambda mode: mode.rayleigh)


def _lowest(bottom: AnyPlate, top: AnyPlate, number: int) -> MarginalMode:
    if number == 0 and _insulating(bottom, top):
        limit = marginal_mode(bottom, top, 0.0)
        if limit.slope >= 0.0:
            return limit

    def slope(log_k: float) -> float:
        return marginal_mode(bottom, top, float(np.exp(log_k)), number).slope

    return marginal_mode(bottom, top, float(np.exp(_root(slope))), number)


def _root(slope: Callable[[float], float]) -> float:
    """Bracket the sign change of a slope from k = 3 outwards, and close in."""
    lower, upper = np.log(2.0), np.log(4.0)
    while slope(lower) > 0.0:
        lower, upper = lower - 0.5, lower
        if lower < np.log(LONGEST):
            raise _no_minimum()
    while slope(upper) < 0.0:
        lower, upper = upper, upper + 0.5
        if upper > np.log(SHORTEST):
            raise _no_minimum()
    return float(brentq(slope, lower, upper, xtol=1e-14, rtol=1e-14))


def _no_minimum() -> NotConvergedError:
    return NotConvergedError(
        f"no minimum of the neutral curve for {LONGEST:g} < k < {SHORTEST:g}; ask for a period instead"
    )


def _insulating(bottom: AnyPlate, top: AnyPlate) -> bool:
    return all(isinstance(plate, Plate) and plate.biot == 0.0 for plate in (bottom, top))


def _biot_slope(plate: AnyPlate, k: float) -> float:
    """dBi/d(k²) of a plate."""
    if not isinstance(plate, ThickPlate):
        return 0.0
    depth = k * plate.thickness
    growth = 1.0 if depth > 300.0 else 1.0 / np.tanh(depth) - depth / np.sinh(depth) ** 2
    return float(plate.ratio * growth / (2.0 * k))


def _mode(forms: LayerForms, number: int, stiffening: tuple[float, float]) -> MarginalMode:
    """Ra k² = a(w, w) b(θ, θ)/⟨w θ⟩² is stationary: singular vectors of the scaled coupling."""
    strain, conduction = cholesky(forms.strain(), lower=True), cholesky(forms.conduction(), lower=True)
    half = solve_triangular(strain, forms.coupling(), lower=True)
    scaled = solve_triangular(conduction, half.T, lower=True)
    warm, strengths, flows = np.linalg.svd(scaled)
    flow = solve_triangular(strain, flows[number], lower=True, trans="T")
    heat = solve_triangular(conduction, warm[:, number], lower=True, trans="T")
    rayleigh = 1.0 / (forms.k * strengths[number]) ** 2
    slope = _slope(forms, flow, heat, stiffening)
    return _named(forms, rayleigh, slope, flow, strengths[number] * heat)


def _slope(forms: LayerForms, flow: Array, heat: Array, stiffening: tuple[float, float]) -> float:
    """Return d ln Ra/d(k²) at fixed fields of a(w, w) = b(θ, θ) = 1; −1/k² is cancelled by ⟨θ²⟩."""
    shear = 2.0 * float(flow @ forms.inertia() @ flow)
    steep = forms.heat.values[1] @ heat
    resistance = float(steep @ steep + heat @ forms.exchange() @ heat) / forms.k**2
    gain = sum(s * float(p @ heat) ** 2 for s, p in zip(stiffening, forms.heat.plates, strict=True))
    return shear - resistance + gain


def _long_wave_mode(forms: LayerForms) -> MarginalMode:
    """Limit k → 0 between insulating plates: θ = 1 + k² θ₂, D⁴w = Ra k², θ₂″ = 1 − w/⟨w⟩.

    Solvability gives Ra = 1/⟨1 D⁻⁴ 1⟩ (Sparrow, Goldstein & Jonsson 1964); the next order gives the slope
    (Chapman & Proctor 1980, J. Fluid Mech. 101, 759).
    """
    uniform = np.zeros(forms.heat.plates[0].size)
    uniform[0] = 1.0
    load = forms.coupling() @ uniform
    flow = solve(forms.strain(), load, assume_a="pos")
    mean = float(load @ flow)
    source = forms.coupling().T @ flow / mean - forms.content() @ uniform
    bend = np.zeros_like(uniform)
    bend[1:] = solve(forms.conduction()[1:, 1:], source[1:], assume_a="pos")
    steep = forms.heat.values[1] @ bend
    slope = 2.0 * float(flow @ forms.inertia() @ flow) / mean - float(steep @ steep)
    return _named(forms, 1.0 / mean, slope, flow / mean, uniform)


def _named(forms: LayerForms, rayleigh: float, slope: float, flow: Array, heat: Array) -> MarginalMode:
    """Return the mode with positive content of heat where warm fluid rises."""
    sign = 1.0 if heat[0] >= 0.0 else -1.0
    w, theta = forms.flow.chebyshev @ flow, forms.heat.chebyshev @ heat
    return MarginalMode(float(rayleigh), forms.k, slope, sign * w, sign * theta)
