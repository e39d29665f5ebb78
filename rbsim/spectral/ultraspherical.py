"""Sparse derivative and conversion operators between ultraspherical bases (Olver & Townsend 2013).

A function of z in [0, 1] is expanded in T_n(1 − 2z); its p-th derivative is sparse in the basis C⁽ᵖ⁾.
"""

from __future__ import annotations

from math import factorial

import numpy as np
from scipy import sparse

#: Derivatives with respect to z carry this factor for each order, since the argument is 1 − 2z.
SLOPE = -2.0


def conversion(order: int, modes: int) -> sparse.csr_array:
    """Return the operator that re-expands a C⁽order⁾ series (order 0: Chebyshev) in C⁽order+1⁾."""
    n = np.arange(modes, dtype=float)
    if order == 0:
        main = np.full(modes, 0.5)
        main[0] = 1.0
        upper = np.full(modes, -0.5)
    else:
        main = order / (order + n)
        upper = -order / (order + n)
    return sparse.csr_array(sparse.diags_array([main, upper[2:]], offsets=[0, 2], shape=(modes, modes)))


def derivative(order: int, modes: int, target: int) -> sparse.csr_array:
    """Return dᵖ/dzᵖ from Chebyshev coefficients to C⁽target⁾ coefficients.

    Parameters
    ----------
    order : int
        Derivative order p, 0 ≤ p ≤ target.
    modes : int
        Number of coefficients on both sides.
    target : int
        Order of the ultraspherical basis of the result.

    Returns
    -------
    csr_array, shape (modes, modes)
    """
    if order == 0:
        result = sparse.csr_array(sparse.eye_array(modes))
    else:
        scale = 2.0 ** (order - 1) * factorial(order - 1) * SLOPE**order
        weights = scale * np.arange(order, modes, dtype=float)
        result = sparse.csr_array(sparse.diags_array([weights], offsets=[order], shape=(modes, modes)))
    for step in range(order, target):
        result = sparse.csr_array(conversion(step, modes) @ result)
    return result


def recombining(stencil: np.ndarray) -> sparse.csr_array:
    """Return the operator from trial-function to Chebyshev coefficients for a recombination stencil."""
    conditions, size = stencil.shape[0] - 1, stencil.shape[1]
    diagonals = [stencil[i] for i in range(conditions + 1)]
    offsets = [-i for i in range(conditions + 1)]
    return sparse.csr_array(sparse.diags_array(diagonals, offsets=offsets, shape=(size + conditions, size)))


def diagonal_table(operator: sparse.csr_array, offsets: range, rows: int) -> np.ndarray:
    """Return the diagonals of an operator as a dense table.

    Parameters
    ----------
    operator : csr_array
        Operator whose entries outside `offsets` vanish in the first `rows` rows.
    offsets : range
        Column minus row index of the wanted diagonals.
    rows : int
        Number of rows.

    Returns
    -------
    ndarray, shape (len(offsets), rows)
        Entry (j, r) multiplies coefficient r + offsets[j]; zero where that column does not exist.
    """
    table = np.zeros((len(offsets), rows))
    for j, offset in enumerate(offsets):
        values = operator.diagonal(offset)
        first = max(0, -offset)
        last = min(rows, first + values.size)
        table[j, first:last] = values[: last - first]
    return table
