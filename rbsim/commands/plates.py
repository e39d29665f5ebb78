"""What the commands of stability share: the pair of plates, and one thread for small matrices."""

from __future__ import annotations

import argparse
import math
import os
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from rbsim.stability.forms import AnyPlate

THERMAL = "fixed-temperature, fixed-flux, biot=NUMBER, slab=RATIO or slab=RATIO,THICKNESS"


def use_one_matrix_thread() -> None:
    """Keep libraries of linear algebra, if not loaded yet, from waking threads for small matrices.

    On a busy machine those threads wait for each other far longer than they work. What is set stays.
    """
    for variable in ("OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS", "OMP_NUM_THREADS"):
        os.environ.setdefault(variable, "1")


def add_plate_arguments(parser: argparse.ArgumentParser) -> None:
    """Declare motion and thermal condition of both plates."""
    for side in ("bottom", "top"):
        parser.add_argument(
            f"--{side}",
            choices=("no-slip", "free-slip"),
            default="no-slip",
            help=f"motion at the {side} plate (default no-slip)",
        )
        parser.add_argument(
            f"--{side}-thermal",
            default="fixed-temperature",
            metavar="CONDITION",
            help=f"{THERMAL} (ratio of conductivities, thickness in H; default fixed-temperature)",
        )


def plates_of(args: argparse.Namespace) -> tuple[AnyPlate, AnyPlate]:
    """Return bottom and top plate.

    Raises
    ------
    ConfigError
        A thermal condition cannot be read.
    """
    return (
        _plate("--bottom-thermal", args.bottom, args.bottom_thermal),
        _plate("--top-thermal", args.top, args.top_thermal),
    )


def _plate(option: str, motion: str, thermal: str) -> AnyPlate:
    from rbsim.dynamics.cell import Plate
    from rbsim.errors import ConfigError
    from rbsim.stability.forms import ThickPlate

    kind, _, text = thermal.partition("=")
    numbers = _numbers(text)
    if thermal == "fixed-temperature":
        return Plate(motion)  # type: ignore[arg-type]
    if thermal == "fixed-flux":
        return Plate(motion, 0.0)  # type: ignore[arg-type]
    if kind == "biot" and len(numbers) == 1 and numbers[0] >= 0.0:
        return Plate(motion, numbers[0])  # type: ignore[arg-type]
    if kind == "slab" and 1 <= len(numbers) <= 2 and min(numbers) > 0.0:
        return ThickPlate(motion, *numbers)  # type: ignore[arg-type]
    raise ConfigError(f"{option} {thermal}: must be {THERMAL}, with positive numbers")


def _numbers(text: str) -> list[float]:
    try:
        numbers = [float(part) for part in text.split(",")]
    except ValueError:
        return []
    return [] if any(math.isnan(number) for number in numbers) else numbers


def describe(args: argparse.Namespace) -> str:
    """Return the plates in words."""
    sides = ((args.bottom, args.bottom_thermal), (args.top, args.top_thermal))
    words = [f"{motion}, {thermal}" for motion, thermal in sides]
    return f"both plates {words[0]}" if words[0] == words[1] else f"bottom {words[0]}; top {words[1]}"
