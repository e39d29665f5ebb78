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
def _subtract(w, x, y):
    """Subtract w·x from y, the weights real and the other rows pairs of reals."""
    for m in range(w.size):
        y[2 * m] -= w[m] * x[2 * m]
        y[2 * m + 1] -= w[m] * x[2 * m + 1]


@njit(cache=True, fastmath=FAST, error_model="numpy", nogil=True)
def _subtract_two(w0, x0, w1, x1, y):
    for m in range(w0.size):
        y[2 * m] -= w0[m] * x0[2 * m] + w1[m] * x1[2 * m]
        y[2 * m + 1] -= w0[m] * x0[2 * m + 1] + w1[m] * x1[2 * m + 1]


@njit(cache=True, fastmath=FAST, error_model="numpy", nogil=True)
def _subtract_bands(factors, place, values, row, step, count, target, start, stop):
    """Subtract `count` diagonals from `place` on, times the rows from `row` on in steps of `step`."""
    lo, hi = 2 * start, 2 * stop
    done = 0
    while count - done >= 2:
        _subtract_two(
            factors[place + done, start:stop],
            values[row + done * step, lo:hi],
            factors[place + done + 1, start:stop],
            values[row + (done + 1) * step, lo:hi],
            target,
        )
        done += 2
    if done < count:
        _subtract(factors[place + done, start:stop], values[row + done * step, lo:hi], target)


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
        count = min(lower, n // stride)
        first = n - count * stride
        _subtract_bands(factors[n], lower - count, pairs, first, stride, count, pairs[n, lo:hi], start, stop)
    for n in range(rows - 1, -1, -1):
        count = min(diagonals - lower - 1, (rows - 1 - n) // stride)
        row = pairs[n, lo:hi]
        _subtract_bands(factors[n], lower + 1, pairs, n + stride, stride, count, row, start, stop)
        pivot, out = factors[n, lower, start:stop], sums[n, lo:hi]
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
        first = max(0, lower - n // stride)
        last = min(diagonals, lower + (rows - 1 - n) // stride + 1)
        while last - first >= 2:
            x, y = n + (first - lower) * stride, n + (first + 1 - lower) * stride
            _add_curved_two(
                out,
                square,
                bands[:, first, n],
                pairs[x, lo:hi],
                bands[:, first + 1, n],
                pairs[y, lo:hi],
                outer,
            )
            first += 2
        if first < last:
            x = n + (first - lower) * stride
            _add_curved(out, square, bands[:, first, n], pairs[x, lo:hi], outer)


@njit(cache=True, fastmath=FAST, error_model="numpy", nogil=True)
def _add_curved(out, square, weights, row, outer):
    """Add outer·(weights[0] + weights[1] k² + weights[2] k⁴)·row."""
    a0, a1, a2 = outer * weights[0], outer * weights[1], outer * weights[2]
    for q in range(out.size):
        out[q] += (a0 + square[q] * (a1 + square[q] * a2)) * row[q]


@njit(cache=True, fastmath=FAST, error_model="numpy", nogil=True)
def _add_curved_two(out, square, weights, row, others, next_row, outer):
    a0, a1, a2 = outer * weights[0], outer * weights[1], outer * weights[2]
    b0, b1, b2 = outer * others[0], outer * others[1], outer * others[2]
    for q in range(out.size):
        s = square[q]
        out[q] += (a0 + s * (a1 + s * a2)) * row[q] + (b0 + s * (b1 + s * b2)) * next_row[q]
