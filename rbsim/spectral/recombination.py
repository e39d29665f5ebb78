"""Chebyshev trial functions recombined so that each one satisfies the plate conditions (Shen 1995)."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rbsim.spectral.grid import Array


@dataclass(frozen=True)
class PlateCondition:
    """One homogeneous condition Σ_p weights[p] dᵖf/dzᵖ = 0 at a plate.

    Parameters
    ----------
    at_top : bool
        Whether the condition holds at z = 1 instead of z = 0.
    weights : tuple of float
        Weight of each derivative with respect to z, the value itself first.
    """

    at_top: bool
    weights: tuple[float, ...]

    def on_chebyshev(self, degree: int) -> Fraction:
        """Return the exact value of the condition on T_degree(1 − 2z)."""
        return sum(
            (
                Fraction(w) * _derivative_at_plate(degree, order, self.at_top)
                for order, w in enumerate(self.weights)
            ),
            Fraction(0),
        )


def _derivative_at_plate(degree: int, order: int, at_top: bool) -> Fraction:
    """Exact dᵖ/dzᵖ T_n(1 − 2z) at a plate: T_n⁽ᵖ⁾(1) = Π_{j<p} (n² − j²)/(2j + 1), by parity at −1."""
    value = Fraction(1)
    for j in range(order):
        value *= Fraction(degree * degree - j * j, 2 * j + 1)
    sign = (-1) ** (degree + order) if at_top else 1
    return value * Fraction(sign * (-2) ** order)


@dataclass(frozen=True, eq=False)
class Recombination:
    """Trial functions φ_n = Σ_i stencil[i, n] T_{n+i}(1 − 2z), n = 0 … size−1.

    Parameters
    ----------
    stencil : ndarray, shape (conditions + 1, size)
        Weights of T_n … T_{n+conditions} in φ_n; stencil[0] = 1.
    stride : int
        2 when only every second Chebyshev polynomial occurs (equal plates), else 1.
    """

    stencil: Array
    stride: int

    @property
    def size(self) -> int:
        """Number of trial functions."""
        return int(self.stencil.shape[1])

    @property
    def conditions(self) -> int:
        """Number of plate conditions."""
        return int(self.stencil.shape[0]) - 1

    @property
    def offsets(self) -> range:
        """Index offsets of the non-vanishing stencil rows."""
        return range(0, self.conditions + 1, self.stride)

    def to_chebyshev(self, coefficients: NDArray[Any]) -> NDArray[Any]:
        """Turn trial-function coefficients (size, …) into Chebyshev ones (size + conditions, …)."""
        shape = (self.size + self.conditions, *coefficients.shape[1:])
        result = np.zeros(shape, dtype=coefficients.dtype)
        column = (slice(None),) + (None,) * (coefficients.ndim - 1)
        for i in self.offsets:
            result[i : i + self.size] += self.stencil[i][column] * coefficients
        return result

    def from_chebyshev(self, coefficients: NDArray[Any]) -> NDArray[Any]:
        """Invert `to_chebyshev` for coefficients that satisfy the conditions (the last ones are not read)."""
        result = np.array(coefficients[: self.size])
        for n in range(self.size):
            for i in self.offsets[1:]:
                if n >= i:
                    result[n] -= self.stencil[i, n - i] * result[n - i]
        return result


@lru_cache(maxsize=32)
def recombine(conditions: tuple[PlateCondition, ...], modes: int) -> Recombination:
    """Find the trial functions of degree < `modes` that satisfy all conditions.

    Parameters
    ----------
    conditions : tuple of PlateCondition
        Homogeneous conditions, at most four.
    modes : int
        Number of Chebyshev polynomials.

    Returns
    -------
    Recombination
        `modes − len(conditions)` trial functions; weights are solved in exact fractions.
    """
    count = len(conditions)
    size = modes - count
    stencil = np.zeros((count + 1, size))
    stencil[0] = 1.0
    table = [[condition.on_chebyshev(n) for condition in conditions] for n in range(modes)]
    for n in range(size):
        columns = [[table[n + i][row] for i in range(1, count + 1)] for row in range(count)]
        weights = _solve_exactly(columns, [-table[n][row] for row in range(count)])
        stencil[1:, n] = [float(w) for w in weights]
    stride = 1 if np.any(stencil[1::2]) else 2
    return Recombination(stencil=stencil, stride=stride)


def _solve_exactly(matrix: list[list[Fraction]], right: list[Fraction]) -> list[Fraction]:
    """Solve a small dense system in fractions (Gauss–Jordan with the first non-zero pivot)."""
    count = len(right)
    rows = [[*matrix[i], right[i]] for i in range(count)]
    for i in range(count):
        pivot = next(j for j in range(i, count) if rows[j][i] != 0)
        rows[i], rows[pivot] = rows[pivot], rows[i]
        rows[i] = [value / rows[i][i] for value in rows[i]]
        for j in range(count):
            if j != i and rows[j][i] != 0:
                rows[j] = [a - rows[j][i] * b for a, b in zip(rows[j], rows[i], strict=True)]
    return [row[count] for row in rows]
