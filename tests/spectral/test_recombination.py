"""Trial functions satisfy the plate conditions."""

from __future__ import annotations

import numpy as np
import pytest

from rbsim.dynamics.cell import Cell, Plate
from rbsim.spectral.chebyshev import differentiate
from rbsim.spectral.recombination import PlateCondition, Recombination, recombine

FIXED = (PlateCondition(False, (1.0,)), PlateCondition(True, (1.0,)))
MIXED = (PlateCondition(False, (0.0, 1.0)), PlateCondition(True, (2.5, 1.0)))


def _flow(bottom: str, top: str) -> tuple[PlateCondition, ...]:
    return Cell(1e4, 1.0, 2.0, Plate(bottom), Plate(top)).flow_conditions


def _worst_violation(basis: Recombination, conditions: tuple[PlateCondition, ...]) -> float:
    """Largest violation of a condition, relative to the size of its terms."""
    series = basis.to_chebyshev(np.eye(basis.size))
    worst = 0.0
    for condition in conditions:
        ends = (-1.0) ** np.arange(len(series)) if condition.at_top else np.ones(len(series))
        total, scale, derivative = np.zeros(basis.size), np.zeros(basis.size), series
        for weight in condition.weights:
            total += weight * (ends @ derivative)
            scale += abs(weight) * np.abs(derivative).sum(axis=0)
            derivative = differentiate(derivative)
        worst = max(worst, float(np.max(np.abs(total) / scale)))
    return worst


@pytest.mark.parametrize(
    ("conditions", "stride"),
    [
        (FIXED, 2),
        (MIXED, 1),
        (_flow("no-slip", "no-slip"), 2),
        (_flow("free-slip", "free-slip"), 2),
        (_flow("no-slip", "free-slip"), 1),
    ],
)
def test_every_trial_function_satisfies_the_conditions(
    conditions: tuple[PlateCondition, ...], stride: int
) -> None:
    basis = recombine(conditions, 40)
    assert basis.stride == stride
    assert basis.size == 40 - len(conditions)
    assert _worst_violation(basis, conditions) < 1e-13  # rounding of 40 modes differentiated twice


def test_equal_plates_give_the_closed_forms_of_shen_1995() -> None:
    n = np.arange(36)
    clamped = recombine(_flow("no-slip", "no-slip"), 40).stencil
    np.testing.assert_allclose(clamped[2], -2 * (n + 2) / (n + 3), rtol=1e-15)
    np.testing.assert_allclose(clamped[4], (n + 1) / (n + 3), rtol=1e-15)
    np.testing.assert_array_equal(recombine(FIXED, 40).stencil[2], -1.0)


@pytest.mark.parametrize("conditions", [FIXED, MIXED, _flow("no-slip", "free-slip")])
def test_conversion_to_chebyshev_and_back_is_the_identity(conditions: tuple[PlateCondition, ...]) -> None:
    basis = recombine(conditions, 30)
    values = np.random.default_rng(2).standard_normal((basis.size, 3))
    np.testing.assert_allclose(basis.from_chebyshev(basis.to_chebyshev(values)), values, rtol=1e-9, atol=1e-9)
