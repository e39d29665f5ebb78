"""The recommended grid follows published criteria."""

from __future__ import annotations

import numpy as np
import pytest

from rbsim.diagnostics.resolution import (
    expected_nusselt,
    nodes_in_layers,
    recommended_points,
    smallest_scale,
)
from rbsim.dynamics.cell import Cell, Plate
from rbsim.spectral.grid import Grid


def test_scales_follow_their_formulas() -> None:
    cell = Cell(1e8, 4.0, 2.0)
    assert smallest_scale(cell, 26.0) == pytest.approx((16.0 / (25.0 * 1e8)) ** 0.25 / 2.0)
    assert smallest_scale(Cell(1e8, 0.25, 2.0), 26.0) == pytest.approx((0.0625 / (25.0 * 1e8)) ** 0.25)
    assert nodes_in_layers(cell, 26.0) == pytest.approx(0.35 * 1e8**0.15)
    assert expected_nusselt(Cell(1e7, 1.0, 2.0)) == pytest.approx(13.6, rel=0.01)
    assert expected_nusselt(Cell(1.0, 1.0, 2.0)) == 1.0
    assert expected_nusselt(Cell(1e7, 1.0, 2.0, top=Plate("free-slip"))) > 50


@pytest.mark.parametrize("rayleigh", [1e3, 1e5, 1e7, 1e9])
@pytest.mark.parametrize("prandtl", [0.02, 1.0, 7.0])
def test_recommended_grids_are_usable_and_meet_the_criteria(rayleigh: float, prandtl: float) -> None:
    cell = Cell(rayleigh, prandtl, 2.0)
    grid = Grid(*recommended_points(cell), 2.0)
    nusselt = expected_nusselt(cell)
    # a third of the published mesh π η, and not much less
    assert grid.width / (2 * grid.modes_x) <= 1.1 * np.pi / 3 * smallest_scale(cell, nusselt)
    nodes = sum(Grid(16, 2 * (grid.modes_z // 2), 1.0).z < 0.5 / nusselt)
    assert nodes >= nodes_in_layers(cell, nusselt)
    for number in (grid.nx, grid.nz):
        for factor in (2, 3, 5):
            while number % factor == 0:
                number //= factor
        assert number == 1


def test_recommended_grids_grow_with_the_rayleigh_number_and_the_width() -> None:
    small, large = recommended_points(Cell(1e6, 1.0, 2.0)), recommended_points(Cell(1e8, 1.0, 2.0))
    assert large[0] > 2 * small[0]
    assert large[1] > 2 * small[1]
    wide = recommended_points(Cell(1e6, 1.0, 8.0))
    assert wide[0] >= 3.9 * small[0]
    assert wide[1] == small[1]
