"""Generalised minimal residuals (Saad & Schultz 1986), without restarts."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy.linalg import solve_triangular

from rbsim.spectral.grid import Array
from rbsim.stability.kernels import length, make_orthogonal


@dataclass(frozen=True, eq=False)
class LinearSolution:
    """What `minimal_residual` found.

    Parameters
    ----------
    vector : ndarray
        Approximate solution.
    residual : float
        Norm of the residual over that of the right-hand side.
    iterations : int
        Products with the operator.
    """

    vector: Array
    residual: float
    iterations: int


def minimal_residual(
    product: Callable[[Array], Array], right: Array, tolerance: float, limit: int
) -> LinearSolution:
    """Solve A x = b for a general operator.

    Parameters
    ----------
    product : callable
        Maps x to A x.
    right : ndarray, shape (n,)
        b.
    tolerance : float
        Wanted residual relative to |b|.
    limit : int
        Most iterations; the best vector so far is returned then.

    Returns
    -------
    LinearSolution
    """
    size = length(right)
    if size == 0.0:
        return LinearSolution(np.zeros_like(right), 0.0, 0)
    limit = min(limit, right.size)
    basis = np.empty((limit + 1, right.size))  # pages that stay untouched cost nothing
    basis[0] = right / size
    triangle, rotations, rests = np.zeros((limit, limit)), np.zeros((limit, 2)), np.zeros(limit + 1)
    rests[0] = size
    for k in range(limit):
        column, beyond = np.empty(k + 2), product(basis[k])
        make_orthogonal(basis, k + 1, beyond, column)
        column[k + 1] = length(beyond)
        basis[k + 1] = beyond / column[k + 1] if column[k + 1] > 0.0 else 0.0
        triangle[: k + 1, k] = _rotated(column, rotations, k)
        rests[k], rests[k + 1] = rotations[k, 0] * rests[k], -rotations[k, 1] * rests[k]
        if abs(rests[k + 1]) <= tolerance * size:
            break
    weights = solve_triangular(triangle[: k + 1, : k + 1], rests[: k + 1])
    return LinearSolution(weights @ basis[: k + 1], abs(rests[k + 1]) / size, k + 1)


def _rotated(column: Array, rotations: Array, k: int) -> Array:
    """Bring column k of the Hessenberg matrix to triangular form and note its rotation."""
    for i in range(k):
        cosine, sine = rotations[i]
        column[i], column[i + 1] = (
            cosine * column[i] + sine * column[i + 1],
            cosine * column[i + 1] - sine * column[i],
        )
    length = float(np.hypot(column[k], column[k + 1]))
    rotations[k] = column[k : k + 2] / length
    column[k] = length
    return column[: k + 1]
