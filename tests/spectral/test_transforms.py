"""Transforms against direct sums, in any shares and by any library."""

from __future__ import annotations

import importlib.util

import numpy as np
import pytest

from rbsim.spectral.chebyshev import values_at
from rbsim.spectral.grid import Grid
from rbsim.spectral.team import Team
from rbsim.spectral.transforms import (
    Transforms,
    choose_threads,
    choose_transforms,
    coefficient_scale,
    product_scale,
)

LIBRARIES = ["scipy.fft"] + (["ducc0.fft"] if importlib.util.find_spec("ducc0") else [])
GRID = Grid(32, 24, 1.5)


def _coefficients(fields: int) -> np.ndarray:
    rng = np.random.default_rng(11)
    shape = (fields, GRID.modes_z, GRID.modes_x)
    values = rng.standard_normal(shape) + 1j * rng.standard_normal(shape)
    values[:, :, 0] = values[:, :, 0].real
    return values


def _stack(coefficients: np.ndarray) -> np.ndarray:
    stack = np.zeros((len(coefficients), GRID.nz, GRID.modes_x), dtype=complex)
    stack[:, : GRID.modes_z] = coefficients
    return stack * coefficient_scale(GRID)[:, None]


def direct_sum(coefficients: np.ndarray) -> np.ndarray:
    """Plain twin: Σ over all modes at every point."""
    vertical = np.array([values_at(GRID.modes_z, z) for z in GRID.z])
    waves = np.exp(1j * np.outer(GRID.wavenumbers, GRID.x))
    waves[1:] *= 2
    return np.array([((vertical @ field) @ waves).real for field in coefficients])


def _round_trip(
    transforms: Transforms, coefficients: np.ndarray, threads: int
) -> tuple[np.ndarray, np.ndarray]:
    team, stack = Team(threads), _stack(coefficients)
    values = np.empty((len(coefficients), GRID.nz, GRID.nx))
    result = np.empty_like(stack)
    team.share(GRID.modes_x, lambda a, b, _: transforms.columns_to_rows(stack, a, b))

    def rows(first: int, last: int, _: int) -> None:
        part = np.empty((len(values), last - first, GRID.nx))
        transforms.rows_to_values(first, last, part)
        values[:, first:last] = part
        transforms.values_to_rows(first, last, part)

    team.share(GRID.nz, rows)
    team.share(GRID.modes_x, lambda a, b, _: transforms.rows_to_columns(result, a, b))
    return values, result * product_scale(GRID)[:, None]


@pytest.mark.parametrize("library", LIBRARIES)
@pytest.mark.parametrize("threads", [1, 3])
@pytest.mark.parametrize("fields", [1, 3, 4])
def test_values_equal_direct_sums_and_return_to_their_coefficients(
    library: str, threads: int, fields: int
) -> None:
    coefficients = _coefficients(fields)
    values, result = _round_trip(choose_transforms(GRID, library), coefficients, threads)
    np.testing.assert_allclose(values, direct_sum(coefficients), atol=1e-12)
    np.testing.assert_allclose(result[:, : GRID.modes_z], coefficients, atol=1e-13)
    np.testing.assert_allclose(result[:, GRID.modes_z :], 0.0, atol=1e-13)


@pytest.mark.parametrize("library", LIBRARIES)
def test_heights_equal_direct_sums(library: str) -> None:
    coefficients = _coefficients(2)
    vertical = np.array([values_at(GRID.modes_z, z) for z in GRID.z])
    heights = choose_transforms(GRID, library).at_heights(_stack(coefficients))
    np.testing.assert_allclose(heights, vertical @ coefficients, atol=1e-12)


def test_an_unknown_library_is_refused() -> None:
    with pytest.raises(ValueError, match=r"scipy\.fft"):
        choose_transforms(GRID, "abacus")


def test_small_grids_get_one_thread_and_large_ones_no_more_than_there_are() -> None:
    assert choose_threads(Grid(64, 48, 2.0)) == 1
    assert choose_threads(Grid(4096, 2048, 2.0)) >= 1


def test_a_team_covers_all_items_once_and_hands_errors_on() -> None:
    seen = np.zeros(10, dtype=int)

    def count(start: int, stop: int, _: int) -> None:
        seen[start:stop] += 1

    Team(3).share(10, count)
    assert seen.tolist() == [1] * 10

    def fail(start: int, stop: int, member: int) -> None:
        if member == 1:
            raise ArithmeticError("broken share")

    with pytest.raises(ArithmeticError, match="broken share"):
        Team(2).share(4, fail)
    with pytest.raises(ValueError, match="at least 1"):
        Team(0)
