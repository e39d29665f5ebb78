"""Compiled loops of the Boussinesq equations: fields from coefficients, products, explicit terms, one stage.

Loops over coefficients work on the columns (wavenumbers) start … stop−1, loops over the grid on some rows
(heights). No sum crosses columns or rows, so threads may share them out.
Plain NumPy twins: tests/dynamics/plain.py.
"""

from __future__ import annotations

import numpy as np
from numba import njit

from rbsim.spectral.kernels import FAST, combine, substitute


@njit(cache=True, fastmath=FAST, error_model="numpy", nogil=True)
def synthesise(theta, psi, bases, wavenumbers, stack, start, stop):
    """Fill the coefficient stack of u = −∂z ψ, w = ∂x ψ and θ.

    Parameters
    ----------
    theta, psi : complex ndarray, shape (rows, columns)
        Trial-function coefficients of θ and ψ.
    bases : tuple
        Stencil and stride of θ, stencil and stride of ψ.
    wavenumbers : ndarray, shape (columns,)
        Horizontal wavenumbers.
    stack : complex ndarray, shape (3, ≥ modes_z, columns)
        Result, scaled for the cosine transform (degree 0 full, others halved).
    start, stop : int
        Columns to work on.
    """
    warm, warm_stride, flow, flow_stride = bases
    modes = psi.shape[0] + flow.shape[0] - 1
    reals, warms, flows = stack.view(np.float64), theta.view(np.float64), psi.view(np.float64)
    lo, hi = 2 * start, 2 * stop
    wave = wavenumbers[start:stop]
    reals[0, modes - 1, lo:hi] = 0.0
    for n in range(modes - 1, -1, -1):
        half = 0.5 if n > 0 else 1.0
        _recombine(warms, warm, warm_stride, n, half, reals[2, n, lo:hi], lo)
        _recombine(flows, flow, flow_stride, n, 1.0, reals[1, n, lo:hi], lo)
        if n > 0:
            above = reals[0, min(n + 1, modes - 1), lo:hi]
            _differentiate(above, reals[1, n, lo:hi], 2.0 * n, reals[0, n - 1, lo:hi])
        row = stack[1, n, start:stop]
        for m in range(row.size):
            factor = half * wave[m]
            row[m] = complex(-factor * row[m].imag, factor * row[m].real)


@njit(cache=True, fastmath=FAST, error_model="numpy", nogil=True)
def _differentiate(above, coefficients, weight, target):
    """One step of the recurrence of Chebyshev derivatives, downwards in degree."""
    for q in range(target.size):
        target[q] = above[q] + weight * coefficients[q]


@njit(cache=True, fastmath=FAST, error_model="numpy", nogil=True)
def _recombine(pairs, stencil, stride, n, scale, row, lo):
    """Write the Chebyshev coefficients of degree n of the real columns from `lo` on to `row`."""
    row[:] = 0.0
    for i in range(0, stencil.shape[0], stride):
        if 0 <= n - i < pairs.shape[0]:
            weight = scale * stencil[i, n - i]
            source = pairs[n - i, lo : lo + row.size]
            for q in range(row.size):
                row[q] += weight * source[q]


@njit(cache=True, fastmath=FAST, error_model="numpy", nogil=True)
def multiply_fields(values, inverse_spacings, products, rates, first):
    """Form the products uw, w² − u², uθ, wθ and the Courant rate of every row.

    Parameters
    ----------
    values : ndarray, shape (3, rows, nx)
        u, w, θ at heights first, first + 1, …
    inverse_spacings : ndarray, shape (nz + 1,)
        Inverse vertical spacing of each row; the last entry is the inverse horizontal one.
    products : ndarray, shape (4, rows, nx)
        Result.
    rates : ndarray, shape (nz,)
        Result: largest |u|/Δx + |w|/Δz of each row.
    first : int
        Height of the first row.
    """
    across = inverse_spacings[rates.size]
    for j in range(values.shape[1]):
        us, ws, ts = values[0, j], values[1, j], values[2, j]
        uw, difference, ut, wt = products[0, j], products[1, j], products[2, j], products[3, j]
        for i in range(us.size):
            u, w, t = us[i], ws[i], ts[i]
            uw[i] = u * w
            difference[i] = (w - u) * (w + u)
            ut[i] = u * t
            wt[i] = w * t
        rates[first + j] = _largest_rate(us, ws, across, inverse_spacings[first + j])


@njit(cache=True, fastmath=FAST | {"nnan"}, error_model="numpy", nogil=True)
def _largest_rate(us, ws, across, upwards):
    """Return max |u|·across + |w|·upwards of one row; NaN is caught elsewhere (`State.is_finite`)."""
    largest = 0.0
    for i in range(us.size):
        rate = abs(us[i]) * across + abs(ws[i]) * upwards
        largest = rate if rate > largest else largest
    return largest


@njit(cache=True, fastmath=FAST, error_model="numpy", nogil=True)
def assemble_heat(stack, products, tables, wavenumbers, explicit, start, stop):
    """Project −∂x(uθ) − ∂z(wθ) + w on the test functions of the heat equation.

    Parameters
    ----------
    stack : complex ndarray, shape (3, nz, columns)
        Output of `synthesise`.
    products : complex ndarray, shape (4, nz, columns)
        Unscaled coefficients of the four products.
    tables : tuple
        Diagonals of the projection (offsets 0, 2, 4) and of −∂z (offsets 1, 3), each of shape
        (diagonals, rows), and the factor from stack rows to unscaled coefficients.
    wavenumbers : ndarray, shape (columns,)
        Horizontal wavenumbers.
    explicit : complex ndarray, shape (rows, columns)
        Result.
    start, stop : int
        Columns to work on.
    """
    value_table, slope_table, gain = tables
    cut = slice(start, stop)
    wave = wavenumbers[cut]
    for n in range(explicit.shape[0]):
        a0, a1, a2 = value_table[0, n], value_table[1, n], value_table[2, n]
        b0, b1 = slope_table[0, n], slope_table[1, n]
        w0, w1, w2 = stack[1, n, cut], stack[1, n + 2, cut], stack[1, n + 4, cut]
        f0, f1, f2 = products[2, n, cut], products[2, n + 2, cut], products[2, n + 4, cut]
        g0, g1 = products[3, n + 1, cut], products[3, n + 3, cut]
        row = explicit[n, cut]
        for m in range(row.size):
            k = wave[m]
            lift_re = a0 * w0[m].real + a1 * w1[m].real + a2 * w2[m].real
            lift_im = a0 * w0[m].imag + a1 * w1[m].imag + a2 * w2[m].imag
            across_re = a0 * f0[m].real + a1 * f1[m].real + a2 * f2[m].real
            across_im = a0 * f0[m].imag + a1 * f1[m].imag + a2 * f2[m].imag
            row[m] = complex(
                gain * lift_re + k * across_im + b0 * g0[m].real + b1 * g1[m].real,
                gain * lift_im - k * across_re + b0 * g0[m].imag + b1 * g1[m].imag,
            )


@njit(cache=True, fastmath=FAST, error_model="numpy", nogil=True)
def assemble_flow(stack, products, tables, wavenumbers, explicit, start, stop):
    """Project (∂zz − ∂xx)(uw) − ∂xz(w² − u²) + ∂xθ on the test functions of the flow equation.

    Parameters
    ----------
    stack, products, wavenumbers, explicit, start, stop
        As in `assemble_heat`.
    tables : tuple
        Diagonals of the projection (offsets 0 … 8 by 2), of ∂zz (2, 4, 6) and of −∂z (1, 3, 5, 7), and the
        factor from stack rows to unscaled coefficients.
    """
    values, curves, slopes, gain = tables
    cut = slice(start, stop)
    wave = wavenumbers[cut]
    for n in range(explicit.shape[0]):
        a0, a1, a2, a3, a4 = values[0, n], values[1, n], values[2, n], values[3, n], values[4, n]
        c1, c2, c3 = curves[0, n], curves[1, n], curves[2, n]
        b0, b1, b2, b3 = slopes[0, n], slopes[1, n], slopes[2, n], slopes[3, n]
        t0, t1, t2 = stack[2, n, cut], stack[2, n + 2, cut], stack[2, n + 4, cut]
        t3, t4 = stack[2, n + 6, cut], stack[2, n + 8, cut]
        s0, s1, s2 = products[0, n, cut], products[0, n + 2, cut], products[0, n + 4, cut]
        s3, s4 = products[0, n + 6, cut], products[0, n + 8, cut]
        e0, e1 = products[1, n + 1, cut], products[1, n + 3, cut]
        e2, e3 = products[1, n + 5, cut], products[1, n + 7, cut]
        row = explicit[n, cut]
        for m in range(row.size):
            k = wave[m]
            square = k * k
            f0, f1, f2, f3, f4 = (
                square * a0,
                square * a1 + c1,
                square * a2 + c2,
                square * a3 + c3,
                square * a4,
            )
            across_re = b0 * e0[m].real + b1 * e1[m].real + b2 * e2[m].real + b3 * e3[m].real
            across_im = b0 * e0[m].imag + b1 * e1[m].imag + b2 * e2[m].imag + b3 * e3[m].imag
            lift_re = a0 * t0[m].real + a1 * t1[m].real + a2 * t2[m].real + a3 * t3[m].real + a4 * t4[m].real
            lift_im = a0 * t0[m].imag + a1 * t1[m].imag + a2 * t2[m].imag + a3 * t3[m].imag + a4 * t4[m].imag
            shear_re = f0 * s0[m].real + f1 * s1[m].real + f2 * s2[m].real + f3 * s3[m].real + f4 * s4[m].real
            shear_im = f0 * s0[m].imag + f1 * s1[m].imag + f2 * s2[m].imag + f3 * s3[m].imag + f4 * s4[m].imag
            row[m] = complex(
                shear_re - k * (across_im + gain * lift_im), shear_im + k * (across_re + gain * lift_re)
            )


@njit(cache=True, fastmath=FAST, error_model="numpy", nogil=True)
def assemble(spectra, tables, wavenumbers, explicit, start, stop):
    """Assemble the explicit terms of both equations.

    Parameters
    ----------
    spectra : tuple
        `stack` and `products` as in `assemble_heat`.
    tables : tuple
        Tables of `assemble_heat` and of `assemble_flow`.
    wavenumbers : ndarray, shape (columns,)
        Horizontal wavenumbers.
    explicit : tuple of two complex ndarray
        Results of the heat and the flow equation.
    start, stop : int
        Columns to work on.
    """
    assemble_heat(spectra[0], spectra[1], tables[0], wavenumbers, explicit[0], start, stop)
    assemble_flow(spectra[0], spectra[1], tables[1], wavenumbers, explicit[1], start, stop)


@njit(cache=True, fastmath=FAST, error_model="numpy", nogil=True)
def solve_stage(operator, weights, factors, operands, increment, start, stop):
    """Solve (M − β Δt L) δ = Δt [(α + β) L c + γ N + ζ N_old] and add δ to c.

    Parameters
    ----------
    operator : tuple
        Stiffness bands, doubled k², sub-diagonals and stride as in `combine`.
    weights : tuple of three floats
        Δt (α + β), Δt γ, Δt ζ.
    factors : ndarray
        Factorised M − β Δt L.
    operands : tuple of three complex ndarray
        c, N and N_old; c changes in place.
    increment : complex ndarray
        Scratch; holds δ afterwards.
    start, stop : int
        Columns to work on.
    """
    bands, squares, lower, stride = operator
    combine(bands, squares, lower, stride, weights, operands, increment, start, stop)
    substitute(factors, lower, stride, increment, operands[0], start, stop)
