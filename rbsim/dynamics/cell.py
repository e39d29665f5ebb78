"""The ideal cell: pure numbers and plates, with the plate conditions that follow from them."""

from __future__ import annotations

from dataclasses import dataclass
from math import inf, isinf, sqrt
from typing import Literal

from rbsim.spectral.recombination import PlateCondition

Motion = Literal["no-slip", "free-slip"]


@dataclass(frozen=True)
class Plate:
    """A horizontal plate.

    Parameters
    ----------
    motion : {"no-slip", "free-slip"}
        No-slip: both velocities vanish. Free-slip: vertical velocity and shear stress vanish.
    biot : float
        Biot number of the plate, its conductance over that of the layer at rest: infinite at fixed
        temperature, 0 at fixed heat flux, positive and finite in between.
    """

    motion: Motion = "no-slip"
    biot: float = inf


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
        return (_heat_condition(self.bottom, False), _heat_condition(self.top, True))

    @property
    def flow_conditions(self) -> tuple[PlateCondition, ...]:
        """Conditions on the streamfunction ψ; ψ = 0 on both plates means no net through-flow."""
        return (*_flow_conditions(self.bottom, False), *_flow_conditions(self.top, True))


def _heat_condition(plate: Plate, at_top: bool) -> PlateCondition:
    """θ = 0 at fixed temperature, else ∂θ/∂n = −Bi θ along the outward normal."""
    if isinf(plate.biot):
        return PlateCondition(at_top, (1.0,))
    return PlateCondition(at_top, (plate.biot, 1.0 if at_top else -1.0))


def _flow_conditions(plate: Plate, at_top: bool) -> tuple[PlateCondition, PlateCondition]:
    second = (0.0, 1.0) if plate.motion == "no-slip" else (0.0, 0.0, 1.0)
    return PlateCondition(at_top, (1.0,)), PlateCondition(at_top, second)
