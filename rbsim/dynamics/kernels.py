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
def multiply_fields(values, inverse_spacings, products, rates, first, last):
    """Form the products uw, w² − u², uθ, wθ and raise the Courant rates of the vertical lines.

    Parameters
    ----------
    values : ndarray, shape (3, ≥ last − first, nx)
        u, w, θ at heights first, first + 1, …
    inverse_spacings : ndarray, shape (nz + 1,)
        Inverse vertical spacing of each row; the last entry is the inverse horizontal one.
    products : ndarray, shape (4, ≥ last − first, nx)
        Result.
    rates : ndarray, shape (nx,)
        Raised to the largest |u|/Δx + |w|/Δz of each vertical line.
    first, last : int
        Heights of the first row and behind the last one (the arrays come whole: cuts are not contiguous).
    """
    across = inverse_spacings[inverse_spacings.size - 1]
    for j in range(last - first):
        us, ws, ts = values[0, j], values[1, j], values[2, j]
        _multiply_row(us, ws, products[0, j])
        _subtract_squares(us, ws, products[1, j])
        _multiply_row(us, ts, products[2, j])
        _multiply_row(ws, ts, products[3, j])
        _raise_rates(us, ws, across, inverse_spacings[first + j], rates)


@njit(cache=True, fastmath=FAST, error_model="numpy", nogil=True)
def _multiply_row(a, b, product):
    for i in range(a.size):
        product[i] = a[i] * b[i]


@njit(cache=True, fastmath=FAST, error_model="numpy", nogil=True)
def _subtract_squares(u, w, difference):
    for i in range(u.size):
        difference[i] = (w[i] - u[i]) * (w[i] + u[i])


@njit(cache=True, fastmath=FAST, error_model="numpy", nogil=True)
def _raise_rates(us, ws, across, upwards, rates):
    """Keep the largest |u|·across + |w|·upwards of each vertical line; NaN is caught by `State.is_physical`.

    One number for each line instead of one for all lets the compiler use vector instructions.
    """
    for i in range(us.size):
        rate = abs(us[i]) * across + abs(ws[i]) * upwards
        rates[i] = rate if rate > rates[i] else rates[i]


@njit(cache=True, fastmath=FAST, error_model="numpy", nogil=True)
def assemble_heat(stack, products, tables, waves, explicit, start, stop):
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
    waves : tuple of three ndarray
        Wavenumbers, shape (columns,), their squares given twice and a scratch row, shape (2·columns,).
    explicit : complex ndarray, shape (rows, columns)
        Result.
    start, stop : int
        Columns to work on.
    """
    value, slope, gain = tables
    lo, hi = 2 * start, 2 * stop
    across = waves[2][lo:hi]
    lift, flux_x, flux_z = (
        stack[1].view(np.float64),
        products[2].view(np.float64),
        products[3].view(np.float64),
    )
    results = explicit.view(np.float64)
    for n in range(explicit.shape[0]):
        out = results[n, lo:hi]
        a0, a1, a2 = value[0, n], value[1, n], value[2, n]
        x0, x1, x2 = flux_x[n, lo:hi], flux_x[n + 2, lo:hi], flux_x[n + 4, lo:hi]
        for q in range(out.size):
            across[q] = -(a0 * x0[q] + a1 * x1[q] + a2 * x2[q])
        w0, w1, w2 = lift[n, lo:hi], lift[n + 2, lo:hi], lift[n + 4, lo:hi]
        z0, z1, b0, b1 = flux_z[n + 1, lo:hi], flux_z[n + 3, lo:hi], slope[0, n], slope[1, n]
        for q in range(out.size):
            out[q] = gain * (a0 * w0[q] + a1 * w1[q] + a2 * w2[q]) + b0 * z0[q] + b1 * z1[q]
        _add_slope(out, waves[0][start:stop], across)


@njit(cache=True, fastmath=FAST, error_model="numpy", nogil=True)
def assemble_flow(stack, products, tables, waves, explicit, start, stop):
    """Project (∂zz − ∂xx)(uw) − ∂xz(w² − u²) + ∂xθ on the test functions of the flow equation.

    Parameters
    ----------
    stack, products, waves, explicit, start, stop
        As in `assemble_heat`.
    tables : tuple
        Diagonals of the projection and of ∂zz (offsets 0 … 8 by 2), of −∂z (1, 3, 5, 7), and the factor from
        stack rows to unscaled coefficients.
    """
    value, curve, slope, gain = tables
    lo, hi = 2 * start, 2 * stop
    square, across = waves[1][lo:hi], waves[2][lo:hi]
    warm, shear, stretch = (
        stack[2].view(np.float64),
        products[0].view(np.float64),
        products[1].view(np.float64),
    )
    results = explicit.view(np.float64)
    for n in range(explicit.shape[0]):
        out = results[n, lo:hi]
        a0, a1, a2, a3, a4 = value[0, n], value[1, n], value[2, n], value[3, n], value[4, n]
        t0, t1, t2 = warm[n, lo:hi], warm[n + 2, lo:hi], warm[n + 4, lo:hi]
        t3, t4 = warm[n + 6, lo:hi], warm[n + 8, lo:hi]
        for q in range(out.size):
            across[q] = gain * (a0 * t0[q] + a1 * t1[q] + a2 * t2[q] + a3 * t3[q] + a4 * t4[q])
        b0, b1, b2, b3 = slope[0, n], slope[1, n], slope[2, n], slope[3, n]
        e0, e1 = stretch[n + 1, lo:hi], stretch[n + 3, lo:hi]
        e2, e3 = stretch[n + 5, lo:hi], stretch[n + 7, lo:hi]
        for q in range(out.size):
            across[q] += b0 * e0[q] + b1 * e1[q] + b2 * e2[q] + b3 * e3[q]
        c1, c2, c3 = curve[1, n], curve[2, n], curve[3, n]
        s0, s1, s2 = shear[n, lo:hi], shear[n + 2, lo:hi], shear[n + 4, lo:hi]
        s3, s4 = shear[n + 6, lo:hi], shear[n + 8, lo:hi]
        for q in range(out.size):
            k2 = square[q]
            inner = (k2 * a1 + c1) * s1[q] + (k2 * a2 + c2) * s2[q] + (k2 * a3 + c3) * s3[q]
            out[q] = inner + k2 * (a0 * s0[q] + a4 * s4[q])
        _add_slope(out, waves[0][start:stop], across)


@njit(cache=True, fastmath=FAST, error_model="numpy", nogil=True)
def _add_slope(out, wavenumbers, row):
    """Add ∂x row = ik·row."""
    for m in range(wavenumbers.size):
        out[2 * m] -= wavenumbers[m] * row[2 * m + 1]
        out[2 * m + 1] += wavenumbers[m] * row[2 * m]


@njit(cache=True, fastmath=FAST, error_model="numpy", nogil=True)
def assemble(spectra, tables, waves, explicit, start, stop):
    """Assemble the explicit terms of both equations.

    Parameters
    ----------
    spectra : tuple
        `stack` and `products` as in `assemble_heat`.
    tables : tuple
        Tables of `assemble_heat` and of `assemble_flow`.
    waves : tuple
        As in `assemble_heat`.
    explicit : tuple of two complex ndarray
        Results of the heat and the flow equation.
    start, stop : int
        Columns to work on.
    """
    assemble_heat(spectra[0], spectra[1], tables[0], waves, explicit[0], start, stop)
    assemble_flow(spectra[0], spectra[1], tables[1], waves, explicit[1], start, stop)


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
