"""Values, slopes, derivatives and integrals of Chebyshev series in 1 − 2z, 0 ≤ z ≤ 1."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from rbsim.spectral.grid import Array
from rbsim.spectral.ultraspherical import SLOPE


def values_at(modes: int, z: float) -> Array:
    """Return T_n(1 − 2z) for n < modes, shape (modes,)."""
    angle = np.arccos(np.clip(1.0 - 2.0 * z, -1.0, 1.0))
    return np.asarray(np.cos(np.arange(modes) * angle))


def slopes_at(modes: int, z: float) -> Array:
    """Return d/dz T_n(1 − 2z) for n < modes, shape (modes,), plates included."""
    return np.array([differentiate(row) @ values_at(modes, z) for row in np.eye(modes)])


def differentiate(coefficients: NDArray[Any]) -> NDArray[Any]:
    """Return the coefficients of d/dz of series with coefficients of shape (modes, …).

    The usual recurrence b_n = b_{n+2} + 2(n + 1) a_{n+1}, summed from the top, with b_0 halved.
    """
    modes = coefficients.shape[0]
    column = (slice(None),) + (None,) * (coefficients.ndim - 1)
    terms = np.zeros_like(coefficients)
    terms[:-1] = 2.0 * np.arange(1, modes)[column] * coefficients[1:]
    result = np.empty_like(coefficients)
    for parity in (0, 1):
        result[parity::2] = np.cumsum(terms[parity::2][::-1], axis=0)[::-1]
    result[0] *= 0.5
    return np.asarray(SLOPE * result)


def integrals(modes: int, lower: float, upper: float) -> Array:
    """Return ∫ T_n(1 − 2z) dz from lower to upper for n < modes, shape (modes,)."""
    return _antiderivatives(modes, upper) - _antiderivatives(modes, lower)


def _antiderivatives(modes: int, z: float) -> Array:
    """∫ T_n dξ = T_{n+1}/(2(n+1)) − T_{n−1}/(2(n−1)), with dz = dξ/SLOPE."""
    t = values_at(modes + 1, z)
    n = np.arange(modes)
    result = np.empty(modes)
    result[0] = t[1]
    result[1] = 0.25 * t[2]
    result[2:] = t[3:] / (2.0 * (n[2:] + 1)) - t[1 : modes - 1] / (2.0 * (n[2:] - 1))
    return result / SLOPE


def first_moments(modes: int) -> Array:
    """Return ∫₀¹ z T_n(1 − 2z) dz for n < modes, shape (modes,), by z = (T_0 − T_1)/2."""
    whole = integrals(modes + 1, 0.0, 1.0)
    neighbours = whole[1:].copy()
    neighbours[0] += whole[1]
    neighbours[1:] += whole[: modes - 1]
    return 0.5 * whole[:modes] - 0.25 * neighbours
