"""Sparse operators against dense Chebyshev calculus."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.special import eval_gegenbauer

from rbsim.spectral.chebyshev import differentiate, values_at
from rbsim.spectral.ultraspherical import derivative, diagonal_table


@pytest.mark.parametrize(("order", "target"), [(0, 2), (1, 2), (2, 2), (0, 4), (1, 4), (2, 4), (4, 4)])
def test_derivatives_equal_repeated_chebyshev_differentiation(order: int, target: int) -> None:
    modes = 24
    series = np.random.default_rng(3).standard_normal(modes)
    expected = series
    for _ in range(order):
        expected = differentiate(expected)
    result = derivative(order, modes, target) @ series
    for z in (0.05, 0.4, 0.9):
        basis = eval_gegenbauer(np.arange(modes), target, 1 - 2 * z)
        assert basis @ result == pytest.approx(values_at(modes, z) @ expected, rel=1e-9)


def test_diagonal_table_reproduces_the_operator() -> None:
    operator = derivative(2, 20, 4)
    table = diagonal_table(operator, range(2, 7, 2), 16)
    dense = np.zeros((16, 24))
    for j, offset in enumerate(range(2, 7, 2)):
        dense[np.arange(16), np.arange(16) + offset] = table[j]
    np.testing.assert_array_equal(dense[:, :20], operator.toarray()[:16])
