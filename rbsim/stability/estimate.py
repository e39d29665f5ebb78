"""Onset from measured tables: the weakly nonlinear law of heat transport, and growth rates that vanish.

Close above onset Nu − 1 = s x + c x² with x = (Ra − Ra_c)/Ra (Schlüter, Lortz & Busse 1965, J. Fluid Mech.
23, 129, give s for rolls), and Nu = 1 below. Leaving out the next term costs about 6e-4 in Ra_c for points up
to 1.5 Ra_c, which the interval, made from the scatter, does not contain. Growth rates of small disturbances
vanish at onset, σ τ = ε to first order (Cross & Hohenberg 1993, Rev. Mod. Phys. 65, 851).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.optimize import curve_fit
from scipy.stats import t as student

from rbsim.errors import ConfigError, NotConvergedError
from rbsim.spectral.grid import Array

#: Points up to this multiple of the estimated onset belong to the weakly nonlinear range.
RANGE = 1.5
#: Share of the confidence interval.
CONFIDENCE = 0.95
#: Least number of convecting points, and Nu − 1 above which a point counts as one.
FEWEST, CONVECTING = 4, 0.02
#: Rounds in which range and estimate settle on each other; a point on the edge may stay in or out for ever.
ROUNDS = 8


@dataclass(frozen=True, eq=False)
class OnsetEstimate:
    """Critical Rayleigh number with its uncertainty.

    Parameters
    ----------
    rayleigh : float
        Best value.
    interval : tuple of float
        95 % confidence interval from the scatter about the law.
    coefficients : tuple of float
        Of the law: s and c, or slope and curvature of the growth rate in Ra/Ra_c − 1.
    used : ndarray of bool
        Points in the range of the law.
    """

    rayleigh: float
    interval: tuple[float, float]
    coefficients: tuple[float, float]
    used: np.ndarray

    def nusselt(self, rayleigh: Array) -> Array:
        """Return the fitted Nusselt number at some Rayleigh numbers."""
        return _law(rayleigh, self.rayleigh, *self.coefficients)

    def growth(self, rayleigh: Array) -> Array:
        """Return the fitted growth rate at some Rayleigh numbers."""
        excess = rayleigh / self.rayleigh - 1.0
        return np.asarray(self.coefficients[0] * excess + self.coefficients[1] * excess**2)


def onset_from_nusselt(rayleigh: Array, nusselt: Array, within: float = RANGE) -> OnsetEstimate:
    """Estimate the onset from a table of heat transport.

    Parameters
    ----------
    rayleigh, nusselt : ndarray, shape (n,)
        The table in any order; points below onset help but are not needed.
    within : float
        Largest Ra over Ra_c that the law may be fitted to.

    Raises
    ------
    ConfigError
        Fewer than four points convect within the range, or a number is out of range.
    NotConvergedError
        The fit did not settle.
    """
    _check(rayleigh, nusselt)
    order = np.argsort(rayleigh)
    ra, nu = rayleigh[order], nusselt[order]
    centre, used = _first_guess(ra, nu), np.zeros(ra.size, dtype=bool)
    for _ in range(ROUNDS):
        used = ra <= within * centre
        _check_number(int(np.sum(used & (nu > 1.0 + CONVECTING))), within, centre)
        best, covariance = _fitted(ra[used], nu[used], centre)
        centre = float(best[0])
    quantile = float(student.ppf(0.5 + CONFIDENCE / 2, np.count_nonzero(used) - 3))
    spread = quantile * float(np.sqrt(covariance[0, 0]))
    back = np.empty_like(order)
    back[order] = np.arange(order.size)
    coefficients = (float(best[1]), float(best[2]))
    return OnsetEstimate(centre, (centre - spread, centre + spread), coefficients, used[back])


def _check(rayleigh: Array, other: Array) -> None:
    if rayleigh.shape != other.shape or rayleigh.ndim != 1:
        raise ConfigError("table: both columns must have the same length")
    if not (np.all(np.isfinite(other)) and np.all(rayleigh > 0.0) and np.all(np.isfinite(rayleigh))):
        raise ConfigError("table: all numbers must be finite and Ra positive")


def _check_number(convecting: int, within: float, centre: float) -> None:
    if convecting < FEWEST:
        raise ConfigError(
            f"table: {convecting} convecting points lie below {within:g} times the onset near Ra = "
            f"{centre:.4g}; {FEWEST} are needed: add points or widen the range"
        )


def _first_guess(ra: Array, nu: Array) -> float:
    """Extrapolate Nu to 1 in 1/Ra through the first convecting points."""
    first = np.flatnonzero(nu > 1.0 + CONVECTING)[:FEWEST]
    if first.size < FEWEST:
        raise ConfigError(
            f"table: {first.size} points convect (Nu > {1 + CONVECTING:g}); {FEWEST} are needed"
        )
    slope, offset = np.polyfit(1.0 / ra[first], nu[first] - 1.0, 1)
    guess = -slope / offset if offset > 0.0 > slope else ra[first[0]]
    return float(np.clip(guess, 0.3 * ra[first[0]], ra[first[0]]))


def _law(rayleigh: Array, critical: float, first: float, second: float) -> Array:
    x = np.maximum(0.0, 1.0 - critical / rayleigh)
    return np.asarray(1.0 + first * x + second * x**2)


def _fitted(ra: Array, nu: Array, centre: float) -> tuple[Array, Array]:
    try:
        best, covariance = curve_fit(_law, ra, nu, p0=(centre, 1.4, 0.0), maxfev=5000)
    except RuntimeError as error:
        raise NotConvergedError(
            f"onset from the table: no fit of the weakly nonlinear law ({error})"
        ) from error
    return np.asarray(best), np.asarray(covariance)


def onset_from_growth(rayleigh: Array, growth: Array) -> OnsetEstimate:
    """Estimate the onset by extrapolating growth rates to zero.

    Parameters
    ----------
    rayleigh, growth : ndarray, shape (n,)
        Rates in any unit, of growth or decay, on either or both sides of onset; at least five points.

    Raises
    ------
    ConfigError
        Too few points, or rates that do not point to an onset.
    """
    _check(rayleigh, growth)
    if rayleigh.size < FEWEST + 1:
        raise ConfigError(f"table: {rayleigh.size} growth rates; {FEWEST + 1} are needed")
    scale = float(np.mean(rayleigh))
    fit, covariance = np.polyfit(rayleigh / scale - 1.0, growth, 2, cov=True)
    roots = np.roots(fit)
    real = roots[np.abs(roots.imag) < 1e-9].real
    if real.size == 0:
        raise ConfigError("table: the growth rates do not vanish anywhere near; add points closer to onset")
    root = float(real[np.argmin(np.abs(real))])
    slope = 2.0 * fit[0] * root + fit[1]
    powers = np.array([root**2, root, 1.0])
    spread = float(np.sqrt(powers @ covariance @ powers) / abs(slope))
    spread *= float(student.ppf(0.5 + CONFIDENCE / 2, rayleigh.size - 3)) * scale
    critical = scale * (1.0 + root)
    coefficients = (float(slope * critical / scale), float(fit[0] * (critical / scale) ** 2))
    interval = (critical - spread, critical + spread)
    return OnsetEstimate(critical, interval, coefficients, np.ones(rayleigh.size, dtype=bool))
