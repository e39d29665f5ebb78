"""The scheme of rbsim as one would write it first: NumPy, scipy.fft and one sparse solve for each wavenumber.

A yardstick for scripts/benchmark.py and, in the tests, a twin of the compiled stepper. Nothing here is fast.
"""

from __future__ import annotations

import numpy as np
import scipy.fft
from numpy.polynomial import chebyshev
from numpy.typing import NDArray
from scipy import sparse
from scipy.sparse.linalg import splu

from rbsim.dynamics.cell import Cell
from rbsim.dynamics.schemes import SPALART_MOSER_ROGERS as SCHEME
from rbsim.spectral.grid import Grid
from rbsim.spectral.recombination import recombine
from rbsim.spectral.ultraspherical import derivative, recombining

Complex = NDArray[np.complex128]


class PlainSolver:
    """Three-stage implicit–explicit stepping of ψ and θ with a fixed step.

    Parameters
    ----------
    cell : Cell
        Pure numbers and plates.
    grid : Grid
        Dealiased grid.
    step_size : float
        Time step in free-fall times.
    """

    def __init__(self, cell: Cell, grid: Grid, step_size: float) -> None:
        n, self.grid, self.step_size = grid.modes_z, grid, step_size
        self.k = grid.wavenumbers
        self.warm = recombining(recombine(cell.temperature_conditions, n).stencil)
        self.flow = recombining(recombine(cell.flow_conditions, n).stencil)
        self.d = {
            (order, target): derivative(order, n, target) for target in (2, 4) for order in range(target + 1)
        }
        self.heat = [self._heat_operators(k, cell.diffusivity) for k in self.k]
        self.momentum = [self._flow_operators(k, cell.viscosity) for k in self.k]
        self.solvers = [
            [
                [
                    splu(sparse.csc_array(m - float(beta) * step_size * stiff, dtype=complex))
                    for m, stiff in pairs
                ]
                for beta in SCHEME.beta
            ]
            for pairs in (self.heat, self.momentum)
        ]

    def _heat_operators(self, k: float, kappa: float) -> tuple[sparse.csr_array, sparse.csr_array]:
        value, curve, rows = self.d[0, 2], self.d[2, 2], self.warm.shape[1]
        return (value @ self.warm)[:rows], (kappa * (curve - k**2 * value) @ self.warm)[:rows]

    def _flow_operators(self, k: float, nu: float) -> tuple[sparse.csr_array, sparse.csr_array]:
        value, curve, fourth, rows = self.d[0, 4], self.d[2, 4], self.d[4, 4], self.flow.shape[1]
        mass = (curve - k**2 * value) @ self.flow
        stiff = nu * (fourth - 2 * k**2 * curve + k**4 * value) @ self.flow
        return mass[:rows], stiff[:rows]

    def step(self, theta: Complex, psi: Complex) -> tuple[Complex, Complex]:
        """Return the coefficients one step later."""
        values, old = [theta, psi], [0.0 * theta, 0.0 * psi]
        for stage in range(SCHEME.stages):
            new = self.explicit_terms(*values)
            values = [self._solve(i, stage, values[i], new[i], old[i]) for i in range(2)]
            old = new
        return values[0], values[1]

    def _solve(self, i: int, stage: int, values: Complex, new: Complex, old: Complex) -> Complex:
        a, g, z = (float(x[stage]) for x in (SCHEME.alpha, SCHEME.gamma, SCHEME.zeta))
        a += float(SCHEME.beta[stage])
        result = values.copy()
        for m, (_, stiff) in enumerate((self.heat, self.momentum)[i]):
            right = self.step_size * (a * (stiff @ values[:, m]) + g * new[:, m] + z * old[:, m])
            result[:, m] += self.solvers[i][stage][m].solve(right)
        return result

    def explicit_terms(self, theta: Complex, psi: Complex) -> list[Complex]:
        """Return the projected explicit terms of both equations."""
        k = self.k
        warm, flow = self.warm @ theta, self.flow @ psi
        lift = 1j * k * flow
        u, w, t = self._to_grid(-self._slope(flow)), self._to_grid(lift), self._to_grid(warm)
        uw, stretch, ut, wt = (self._to_modes(p) for p in (u * w, w * w - u * u, u * t, w * t))
        heat = self.d[0, 2] @ (lift - 1j * k * ut) - self.d[1, 2] @ wt
        momentum = self.d[0, 4] @ (k**2 * uw + 1j * k * warm) + self.d[2, 4] @ uw
        momentum -= self.d[1, 4] @ (1j * k * stretch)
        return [heat[: theta.shape[0]], momentum[: psi.shape[0]]]

    def _slope(self, series: Complex) -> Complex:
        result = np.zeros_like(series)
        result[:-1] = -2.0 * chebyshev.chebder(series, axis=0)
        return result

    def _to_grid(self, series: Complex) -> NDArray[np.float64]:
        padded = np.zeros((self.grid.nz, self.grid.nx // 2 + 1), dtype=complex)
        padded[: len(series), : series.shape[1]] = 0.5 * series
        padded[0] *= 2.0
        columns = scipy.fft.dct(padded.real, type=3, axis=0) + 1j * scipy.fft.dct(padded.imag, type=3, axis=0)
        return np.asarray(scipy.fft.irfft(columns, n=self.grid.nx, norm="forward"))

    def _to_modes(self, values: NDArray[np.float64]) -> Complex:
        rows = scipy.fft.rfft(values, norm="forward")[:, : self.grid.modes_x]
        series = scipy.fft.dct(rows.real, type=2, axis=0) + 1j * scipy.fft.dct(rows.imag, type=2, axis=0)
        series /= self.grid.nz
        series[0] *= 0.5
        return np.asarray(series[: self.grid.modes_z])
