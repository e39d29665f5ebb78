"""Which grid a cell needs, from published criteria for the bulk and for the plate layers.

The criteria were made for finite volumes; a spectral method that is to fall by four decades before its last
mode needs `MARGIN` times as many points (measured here at Γ = 2, Pr = 1, Ra = 1e5 … 1e7).
"""

from __future__ import annotations

from math import asin, ceil, pi, sqrt

from rbsim.dynamics.cell import Cell
from rbsim.spectral.grid import SMALLEST

#: Points per point of the published criteria.
MARGIN = 3.0

#: Vertical points are densest at the plates; in the bulk half the margin suffices.
BULK_MARGIN = 1.5

#: Vertical points below which budgets of a convecting layer do not close to 0.1 % (measured at Ra = 1e5).
FEWEST_WHEN_CONVECTING = 64


def expected_nusselt(cell: Cell) -> float:
    """Return a rough Nusselt number of the turbulent cell, at least 1.

    No-slip: 0.138 Ra^0.285 (Johnston & Doering 2009, Phys. Rev. Lett. 102, 064501, Pr = 1; value from
    memory). Any free-slip plate: 0.2723 Ra^(1/3), the largest prefactor of steady rolls (Wen et al. 2020,
    J. Fluid Mech. 905, R4; value from memory).
    """
    no_slip = cell.bottom.motion == cell.top.motion == "no-slip"
    law = 0.138 * cell.rayleigh**0.285 if no_slip else 0.2723 * cell.rayleigh ** (1.0 / 3.0)
    return float(max(1.0, law))


def smallest_scale(cell: Cell, nusselt: float) -> float:
    """Return the smaller of the Kolmogorov and Batchelor lengths of the mean dissipation, in heights.

    η = [Pr²/((Nu − 1) Ra)]^¼ and η/√Pr (Grötzbach 1983, J. Comput. Phys. 49, 241; value from memory).
    """
    kolmogorov = (cell.prandtl**2 / (max(nusselt - 1.0, 1e-3) * cell.rayleigh)) ** 0.25
    return float(kolmogorov / max(1.0, sqrt(cell.prandtl)))


def nodes_in_layers(cell: Cell, nusselt: float) -> float:
    """Return the published number of nodes in each plate layer.

    The larger of 0.35 Ra^0.15 and 0.682 Nu^½ (Shishkina, Stevens, Grossmann & Lohse 2010, New J. Phys. 12,
    075022; values from memory).
    """
    return float(max(0.35 * cell.rayleigh**0.15, 0.682 * sqrt(nusselt)))


def recommended_points(cell: Cell) -> tuple[int, int]:
    """Return the dealiased grid points nx, nz that a turbulent run of this cell needs.

    Parameters
    ----------
    cell : Cell
        Pure numbers and plates.

    Returns
    -------
    tuple of int
        Even numbers without prime factors above 5.
    """
    # a law for Pr = 1: at lower Pr the heat flux and thus the demand are overestimated
    nusselt = expected_nusselt(cell)
    spacing = pi * smallest_scale(cell, nusselt)
    across = cell.width * MARGIN / spacing
    layer = 0.5 / nusselt
    share = 2.0 * asin(sqrt(min(layer, 0.5))) / pi
    upwards = max(MARGIN * nodes_in_layers(cell, nusselt) / share, 0.5 * pi * BULK_MARGIN / spacing)
    floor = FEWEST_WHEN_CONVECTING if nusselt > 2.0 else 2 * SMALLEST
    return _even_and_fast(1.5 * across), _even_and_fast(max(floor, 1.5 * upwards))


def _even_and_fast(points: float) -> int:
    """Round up to an even number whose prime factors are 2, 3 and 5."""
    count = max(2 * SMALLEST, 2 * ceil(points / 2))
    while not _is_fast(count):
        count += 2
    return count


def _is_fast(count: int) -> bool:
    for factor in (2, 3, 5):
        while count % factor == 0:
            count //= factor
    return count == 1
