"""The state of a cell: coefficients of temperature departure and streamfunction, and the clock."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from rbsim.spectral.banded import ComplexArray

#: Coefficients of θ beyond this belong to a run that explodes.
LARGEST_COEFFICIENT = 10.0


@dataclass
class State:
    """Coefficients at one moment.

    Parameters
    ----------
    theta : complex ndarray, shape (modes_z − 2, modes_x)
        Coefficients of θ = T − (1 − z).
    psi : complex ndarray, shape (modes_z − 4, modes_x)
        Coefficients of the streamfunction ψ.
    time : float
        Free-fall times since the start.
    steps : int
        Time steps since the start.
    """

    theta: ComplexArray
    psi: ComplexArray
    time: float = 0.0
    steps: int = 0

    def copy(self) -> State:
        """Return an independent copy."""
        return State(self.theta.copy(), self.psi.copy(), self.time, self.steps)

    def is_physical(self) -> bool:
        """Tell whether the state is finite and its temperature within generous bounds.

        The maximum principle, 0 ≤ T ≤ 1, bounds the first coefficients of θ by 4/π. One NaN anywhere reaches
        every coefficient within one evaluation, so a single row suffices.
        """
        return bool(np.all(np.abs(self.theta[0]) < LARGEST_COEFFICIENT) and np.isfinite(self.psi[0]).all())

    def resized(self, rows: int, columns: int) -> State:
        """Return the same fields on another number of modes (spectral interpolation).

        The trial functions do not depend on the resolution, so this pads with zeros or cuts.

        Parameters
        ----------
        rows : int
            Chebyshev modes of the new grid.
        columns : int
            Fourier modes of the new grid.
        """
        theta = _resize(self.theta, rows - 2, columns)
        return State(theta, _resize(self.psi, rows - 4, columns), self.time, self.steps)


def _resize(coefficients: ComplexArray, rows: int, columns: int) -> ComplexArray:
    result = np.zeros((rows, columns), dtype=np.complex128)
    kept_rows, kept_columns = min(rows, coefficients.shape[0]), min(columns, coefficients.shape[1])
    result[:kept_rows, :kept_columns] = coefficients[:kept_rows, :kept_columns]
    return result
