"""Compiled loops of the banded solves, one column per wavenumber, the wavenumber contiguous in memory.

Every loop works on the columns start … stop−1 only; columns are independent, so threads share them and the
result does not depend on their number. Complex rows are walked as pairs of reals, which the compiler turns
into full vector instructions, and rows are cut out before the innermost loops, which then start at zero
(else each index is checked for its sign). Plain NumPy twins: tests/spectral/test_banded.py.
"""

from __future__ import annotations

import numpy as np
from numba import njit

#: Fast-math flags without those that assume away NaN or infinity: divergence must remain visible.
FAST = {"contract", "reassoc", "nsz", "arcp"}


@njit(cache=True, fastmath=FAST, error_model="numpy", nogil=True)
def factorise(bands, squares, shift, lower, stride, factors):
    """Fill `factors` with the LU decomposition, without pivoting, of mass − shift·stiffness.

    Parameters
    ----------
    bands : ndarray, shape (2, 3, diagonals, rows)
        Mass and stiffness tables; entry p of the second axis multiplies (k²)ᵖ.
    squares : ndarray, shape (columns,)
        k² of each column.
    shift : float
        Weight of the stiffness.
    lower, stride : int
        Sub-diagonals, and the distance of neighbouring diagonals.
    factors : ndarray, shape (rows, diagonals, columns)
        Result: multipliers, reciprocal pivots, upper diagonals.
    """
    diagonals, rows = bands.shape[2:]
    upper = diagonals - lower - 1
    for n in range(rows):
        for d in range(diagonals):
            b0 = bands[0, 0, d, n] - shift * bands[1, 0, d, n]
            b1 = bands[0, 1, d, n] - shift * bands[1, 1, d, n]
            b2 = bands[0, 2, d, n] - shift * bands[1, 2, d, n]
            row = factors[n, d]
            for m in range(squares.size):
                row[m] = b0 + squares[m] * (b1 + squares[m] * b2)
        for i in range(lower, 0, -1):
            above = n - i * stride
            if above >= 0:
                _eliminate(factors[n], factors[above], lower - i, lower, upper)
        pivot = factors[n, lower]
        for m in range(pivot.size):
            pivot[m] = 1.0 / pivot[m]


@njit(cache=True, fastmath=FAST, error_model="numpy", nogil=True)
def _eliminate(row, above, place, lower, upper):
    """Remove the diagonal `place` of a row with the help of the factorised row above it."""
    multiplier, pivot = row[place], above[lower]
    for m in range(multiplier.size):
        multiplier[m] *= pivot[m]
    for j in range(1, upper + 1):
        target, source = row[place + j], above[lower + j]
        for m in range(multiplier.size):
            target[m] -= multiplier[m] * source[m]


@njit(cache=True, fastmath=FAST, error_model="numpy", nogil=True)
def _subtract(weights, source, target):
    """Subtract weights·source, the weights real and the rows pairs of reals."""
    for m in range(weights.size):
        target[2 * m] -= weights[m] * source[2 * m]
        target[2 * m + 1] -= weights[m] * source[2 * m + 1]


@njit(cache=True, fastmath=FAST, error_model="numpy", nogil=True)
def substitute(factors, lower, stride, values, total, start, stop):
    """Solve the factorised systems in place and add the solutions to a running total.

    Parameters
    ----------
    factors : ndarray, shape (rows, diagonals, columns)
        Output of `factorise`.
    lower, stride : int
        Sub-diagonals, and the distance of neighbouring diagonals.
    values : complex ndarray, shape (rows, columns)
        Right-hand sides, replaced by the solutions.
    total : complex ndarray, shape (rows, columns)
        Receives the solutions on top of what it holds.
    start, stop : int
        Columns to work on.
    """
    rows, diagonals = factors.shape[:2]
    pairs, sums = values.view(np.float64), total.view(np.float64)
    lo, hi = 2 * start, 2 * stop
    for n in range(rows):
        for i in range(lower, 0, -1):
            above = n - i * stride
            if above >= 0:
                _subtract(factors[n, lower - i, start:stop], pairs[above, lo:hi], pairs[n, lo:hi])
    for n in range(rows - 1, -1, -1):
        for j in range(1, diagonals - lower):
            below = n + j * stride
            if below < rows:
                _subtract(factors[n, lower + j, start:stop], pairs[below, lo:hi], pairs[n, lo:hi])
        pivot, row, out = factors[n, lower, start:stop], pairs[n, lo:hi], sums[n, lo:hi]
        for m in range(pivot.size):
            row[2 * m] *= pivot[m]
            row[2 * m + 1] *= pivot[m]
            out[2 * m] += row[2 * m]
            out[2 * m + 1] += row[2 * m + 1]


@njit(cache=True, fastmath=FAST, error_model="numpy", nogil=True)
def combine(bands, squares, lower, stride, weights, operands, result, start, stop):
    """Write weights[0]·B·values + weights[1]·first + weights[2]·second, with B = Σ_p (k²)ᵖ bands[p].

    Parameters
    ----------
    bands : ndarray, shape (3, diagonals, rows)
        Diagonal tables of each power of k².
    squares : ndarray, shape (2·columns,)
        k² of each column, given twice: for the real and the imaginary part.
    lower, stride : int
        Sub-diagonals, and the distance of neighbouring diagonals.
    weights : tuple of three floats
        Factors of the three terms.
    operands : tuple of three complex ndarray, shape (rows, columns)
        values, first and second.
    result : complex ndarray, shape (rows, columns)
        Must not overlap values.
    start, stop : int
        Columns to work on.
    """
    diagonals, rows = bands.shape[1:]
    outer, w1, w2 = weights
    values, first, second = operands
    pairs, ones, twos = values.view(np.float64), first.view(np.float64), second.view(np.float64)
    results = result.view(np.float64)
    lo, hi = 2 * start, 2 * stop
    square = squares[lo:hi]
    for n in range(rows):
        out, a, b = results[n, lo:hi], ones[n, lo:hi], twos[n, lo:hi]
        for q in range(out.size):
            out[q] = w1 * a[q] + w2 * b[q]
        for d in range(diagonals):
            other = n + (d - lower) * stride
            if 0 <= other < rows:
                b0, b1, b2 = outer * bands[0, d, n], outer * bands[1, d, n], outer * bands[2, d, n]
                row = pairs[other, lo:hi]
                for q in range(out.size):
                    out[q] += (b0 + square[q] * (b1 + square[q] * b2)) * row[q]
