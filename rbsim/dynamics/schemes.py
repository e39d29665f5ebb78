"""Implicit–explicit Runge–Kutta schemes as frozen tables that check themselves."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction


@dataclass(frozen=True)
class LowStorageScheme:
    """Three-level scheme u_i = u_{i−1} + Δt [L(α_i u_{i−1} + β_i u_i) + γ_i N_{i−1} + ζ_i N_{i−2}].

    Parameters
    ----------
    alpha, beta : tuple of Fraction
        Weights of the stiff term before and after each stage.
    gamma, zeta : tuple of Fraction
        Weights of the explicit term of this and the previous stage.
    order : int
        Order of the explicit part.
    """

    alpha: tuple[Fraction, ...]
    beta: tuple[Fraction, ...]
    gamma: tuple[Fraction, ...]
    zeta: tuple[Fraction, ...]
    order: int

    def __post_init__(self) -> None:
        spans = [a + b for a, b in zip(self.alpha, self.beta, strict=True)]
        if spans != [g + z for g, z in zip(self.gamma, self.zeta, strict=True)]:
            raise ValueError("stiff and explicit terms of a stage must span the same time")
        if sum(spans) != 1 or self.zeta[0] != 0:
            raise ValueError("the stages must add up to one step that starts itself")

    @property
    def stages(self) -> int:
        """Number of evaluations of each step."""
        return len(self.alpha)


#: Spalart, Moser & Rogers 1991, J. Comput. Phys. 96, 297: third order explicit, second order implicit.
SPALART_MOSER_ROGERS = LowStorageScheme(
    alpha=(Fraction(29, 96), Fraction(-3, 40), Fraction(1, 6)),
    beta=(Fraction(37, 160), Fraction(5, 24), Fraction(1, 6)),
    gamma=(Fraction(8, 15), Fraction(5, 12), Fraction(3, 4)),
    zeta=(Fraction(0), Fraction(-17, 60), Fraction(-5, 12)),
    order=3,
)
