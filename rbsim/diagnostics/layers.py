"""Thickness of the thermal and kinetic layers at the plates, from profiles over the height."""

from __future__ import annotations

import numpy as np

from rbsim.spectral.grid import Array


def thermal_layers(slopes: tuple[float, float], middle: float) -> tuple[float, float]:
    """Return the slope thickness of the bottom and the top thermal layer in heights.

    Parameters
    ----------
    slopes : tuple of float
        −dT/dz of the horizontal average at the bottom and the top plate (the local Nusselt numbers).
    middle : float
        Horizontally averaged temperature at mid-height.

    Returns
    -------
    tuple of float
        Distance at which the tangent at the plate reaches the temperature of the middle.
    """
    return (1.0 - middle) / slopes[0], middle / slopes[1]


def kinetic_layers(z: Array, rms: Array) -> tuple[float, float]:
    """Return the distance from each plate to the largest horizontal rms velocity of that half, in heights.

    Parameters
    ----------
    z : ndarray, shape (nz,)
        Heights in ascending order.
    rms : ndarray, shape (nz,)
        Root mean square of the horizontal velocity.
    """
    half = z.size // 2
    bottom = _peak(z[: half + 1], rms[: half + 1])
    return bottom, _peak(1.0 - z[::-1][: half + 1], rms[::-1][: half + 1])


def _peak(distance: Array, values: Array) -> float:
    """Place of the largest value, refined by the parabola through it and its neighbours."""
    i = int(np.argmax(values))
    if i in (0, values.size - 1) or values[i] == 0.0:
        return float(distance[i])
    a, b, _ = np.polyfit(distance[i - 1 : i + 2] - distance[i], values[i - 1 : i + 2], 2)
    return float(distance[i] - b / (2.0 * a)) if a < 0 else float(distance[i])
