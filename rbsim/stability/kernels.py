"""Compiled loops of Krylov's method; each basis vector is read from memory once, and no thread is woken."""

from __future__ import annotations

from math import sqrt

from numba import njit

from rbsim.spectral.kernels import FAST


@njit(cache=True, fastmath=FAST, error_model="numpy", nogil=True)
def make_orthogonal(basis, count, vector, components):
    """Subtract from a vector its components along orthonormal rows (modified Gram–Schmidt), last row first.

    Parameters
    ----------
    basis : ndarray, shape (≥ count, n)
        Orthonormal rows.
    count : int
        Rows to use.
    vector : ndarray, shape (n,)
        Changed in place.
    components : ndarray, shape (≥ count,)
        Result.
    """
    for i in range(count - 1, -1, -1):
        row = basis[i]
        total = 0.0
        for j in range(row.size):
            total += row[j] * vector[j]
        for j in range(row.size):
            vector[j] -= total * row[j]
        components[i] = total


@njit(cache=True, fastmath=FAST, error_model="numpy", nogil=True)
def length(vector):
    """Return the Euclidean norm of a vector of shape (n,)."""
    total = 0.0
    for j in range(vector.size):
        total += vector[j] * vector[j]
    return sqrt(total)
