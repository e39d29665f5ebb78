"""Minimal residuals against dense solutions."""

from __future__ import annotations

import numpy as np
import pytest

from rbsim.stability.kernels import length, make_orthogonal
from rbsim.stability.krylov import minimal_residual


def test_a_general_system_is_solved() -> None:
    draws = np.random.default_rng(5)
    matrix = np.eye(60) + 0.3 * draws.standard_normal((60, 60)) / np.sqrt(60)
    right = draws.standard_normal(60)
    found = minimal_residual(lambda x: matrix @ x, right, 1e-12, 60)
    np.testing.assert_allclose(found.vector, np.linalg.solve(matrix, right), rtol=1e-9, atol=1e-10)
    assert found.residual <= 1e-12
    assert found.iterations < 40


def test_the_reported_residual_is_the_true_one() -> None:
    draws = np.random.default_rng(6)
    matrix = np.diag(np.arange(1.0, 41.0)) + 0.1 * draws.standard_normal((40, 40))
    right = draws.standard_normal(40)
    found = minimal_residual(lambda x: matrix @ x, right, 0.0, 7)
    assert found.iterations == 7
    true = np.linalg.norm(right - matrix @ found.vector) / np.linalg.norm(right)
    assert found.residual == pytest.approx(true, rel=1e-9)


def test_an_exact_answer_ends_the_search() -> None:
    right = np.array([3.0, 0.0, -4.0])
    found = minimal_residual(lambda x: 2.0 * x, right, 1e-14, 3)
    assert found.iterations == 1
    np.testing.assert_allclose(found.vector, right / 2.0)
    assert minimal_residual(lambda x: 2.0 * x, np.zeros(3), 1e-3, 3).iterations == 0


def test_kernel_twin() -> None:
    draws = np.random.default_rng(7)
    basis = np.linalg.qr(draws.standard_normal((30, 5)))[0].T.copy()
    vector = draws.standard_normal(30)
    rest, components = vector.copy(), np.empty(5)
    make_orthogonal(basis, 5, rest, components)
    np.testing.assert_allclose(components, basis @ vector, atol=1e-14)
    np.testing.assert_allclose(rest, vector - basis.T @ (basis @ vector), atol=1e-14)
    assert length(vector) == pytest.approx(np.linalg.norm(vector))
