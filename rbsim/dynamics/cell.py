"""The ideal cell: pure numbers and plates, with the plate conditions that follow from them."""

from __future__ import annotations

from dataclasses import dataclass
from math import sqrt
from typing import Literal

from rbsim.spectral.recombination import PlateCondition

Motion = Literal["no-slip", "free-slip"]


@dataclass(frozen=True)
class Plate:
    """A horizontal plate at fixed temperature.

    Parameters
    ----------
    motion : {"no-slip", "free-slip"}
        No-slip: both velocities vanish. Free-slip: vertical velocity and shear stress vanish.
    """

    motion: Motion = "no-slip"


@dataclass(frozen=True)
class Cell:
    """A layer of height 1, heated below, periodic in x.

    Parameters
    ----------
    rayleigh, prandtl : float
        Rayleigh number of the full height and temperature drop; Prandtl number.
    width : float
        Horizontal period Γ in heights.
    bottom, top : Plate
        The plates at z = 0 (T = 1) and z = 1 (T = 0).
    """

    rayleigh: float
    prandtl: float
    width: float
    bottom: Plate = Plate()
    top: Plate = Plate()

    @property
    def diffusivity(self) -> float:
        """Thermal diffusivity (Ra Pr)^(−1/2) in free-fall units."""
        return 1.0 / sqrt(self.rayleigh * self.prandtl)

    @property
    def viscosity(self) -> float:
        """Kinematic viscosity sqrt(Pr/Ra) in free-fall units."""
        return sqrt(self.prandtl / self.rayleigh)

    @property
    def temperature_conditions(self) -> tuple[PlateCondition, ...]:
        """Conditions on the departure θ from the conduction profile."""
        return (PlateCondition(False, (1.0,)), PlateCondition(True, (1.0,)))

    @property
    def flow_conditions(self) -> tuple[PlateCondition, ...]:
        """Conditions on the streamfunction ψ; ψ = 0 on both plates means no net through-flow."""
        return (*_flow_conditions(self.bottom, False), *_flow_conditions(self.top, True))


def _flow_conditions(plate: Plate, at_top: bool) -> tuple[PlateCondition, PlateCondition]:
    second = (0.0, 1.0) if plate.motion == "no-slip" else (0.0, 0.0, 1.0)
    return PlateCondition(at_top, (1.0,)), PlateCondition(at_top, second)
