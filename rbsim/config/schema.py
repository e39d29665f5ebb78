"""The case: every key a configuration may hold, its meaning, unit, range and default."""

from __future__ import annotations

import numbers
import os
from typing import Annotated, Any, Literal

from pydantic import (
    BaseModel,
    BeforeValidator,
    ConfigDict,
    Discriminator,
    Field,
    Strict,
    Tag,
    model_validator,
)

from rbsim.config.checking import checked
from rbsim.config.faults import FaultsError
from rbsim.config.rules import SHORTEST_INTERVAL, broken_rules

#: Units of keys.
HEIGHTS, DROPS, FREE_FALL, PURE = "cell heights", "plate temperature drops", "free-fall times", "1"

#: Longest time in free-fall times that any key takes.
LONGEST_TIME = 1e7


def _plain_number(value: Any) -> Any:
    """Turn numbers of array packages into Python's; refuse texts and truth values."""
    if isinstance(value, bool) or not isinstance(value, numbers.Real):
        raise ValueError("must be a number")
    return int(value) if isinstance(value, numbers.Integral) else float(value)


def _plain_path(value: Any) -> Any:
    return os.fspath(value) if isinstance(value, os.PathLike) else value


def _key(meaning: str, unit: str = "", allowed: str = "", **settings: Any) -> Any:
    """Describe a key: meaning, unit ("" for texts), what is allowed where type and limits do not say it."""
    return Field(description=meaning, json_schema_extra={"unit": unit, "allowed": allowed}, **settings)


Number = Annotated[float, BeforeValidator(_plain_number), Strict(), Field(allow_inf_nan=False)]
Whole = Annotated[int, BeforeValidator(_plain_number), Strict()]
Text = Annotated[str, Strict()]

#: Letters, digits and signs on one line; control characters would break messages and files.
LINE = r"^[^\p{C}\p{Zl}\p{Zp}]*$"

#: Most points of a grid in one direction.
MOST_POINTS = 16384


class Section(BaseModel):
    """A table of a configuration: unknown keys are errors, values do not change."""

    model_config = ConfigDict(frozen=True, extra="forbid")


class Numbers(Section):
    """Pure numbers of the layer."""

    rayleigh: Number = _key("Rayleigh number gαΔH³/(νκ)", PURE, gt=0, le=1e12)
    prandtl: Number = _key("Prandtl number ν/κ", PURE, default=1.0, ge=1e-4, le=1e6)


class CellShape(Section):
    """Shape of the cell."""

    aspect_ratio: Number = _key("horizontal period Γ", HEIGHTS, default=2.0, ge=0.05, le=200)


class PlateSection(Section):
    """One plate."""

    motion: Literal["no-slip", "free-slip"] = _key("condition on the flow", default="no-slip")
    thermal: Literal["fixed-temperature"] = _key("condition on the heat", default="fixed-temperature")


class Plates(Section):
    """Both plates."""

    bottom: PlateSection = _key("hot plate at z = 0", default=PlateSection())
    top: PlateSection = _key("cold plate at z = 1", default=PlateSection())


class GridSection(Section):
    """Points of the dealiased grid."""

    nx: Whole = _key("horizontal points", PURE, ge=16, le=MOST_POINTS, multiple_of=2)
    nz: Whole = _key("vertical points", PURE, ge=16, le=MOST_POINTS, multiple_of=2)


def _form_of_grid(value: Any) -> str:
    return "points" if isinstance(value, dict | GridSection) else "word"


GridChoice = Annotated[
    Annotated[Literal["auto"], Tag("word")] | Annotated[GridSection, Tag("points")],
    Discriminator(_form_of_grid),
]


class TimeSection(Section):
    """Length of the run and of its steps."""

    end: Number = _key("last time of the run", FREE_FALL, default=100.0, gt=0, le=LONGEST_TIME)
    courant: Number = _key("largest Courant number on the dealiased grid", PURE, default=0.8, gt=0, le=1)
    step: Number | None = _key(
        "fixed step instead of the Courant limit", FREE_FALL, default=None, ge=1e-8, le=1
    )


class StartSection(Section):
    """Initial state."""

    kind: Literal["noise", "roll", "state"] = _key("what the run starts from", default="noise")
    amplitude: Number = _key("departure from conduction", DROPS, default=0.01, gt=0, le=1)
    seed: Whole = _key("seed of the noise", PURE, default=1, ge=0, le=2**63 - 1)
    pairs: Whole = _key("roll pairs in the period", PURE, default=1, ge=1, le=5461)
    path: Annotated[Text, BeforeValidator(_plain_path)] | None = _key(
        "run folder or checkpoint to start from",
        allowed="the path of a run folder or checkpoint, printable text that is not empty",
        default=None,
        min_length=1,
        pattern=LINE,
    )


class ThermometerSection(Section):
    """One virtual thermometer."""

    name: Text = _key(
        "name in files and figures",
        allowed="letters, digits and _, a letter first, at most 40 characters",
        pattern=r"^[A-Za-z][A-Za-z0-9_]*$",
        max_length=40,
    )
    x: Number = _key("horizontal place, below the period cell.aspect_ratio", HEIGHTS, ge=0, le=200)
    z: Number = _key("height above the bottom plate", HEIGHTS, ge=0, le=1)
    interval: Number = _key(
        "sampling interval", FREE_FALL, default=0.1, ge=SHORTEST_INTERVAL, le=LONGEST_TIME
    )


class OutputSection(Section):
    """What is recorded how often."""

    history_interval: Number = _key(
        "time between history samples", FREE_FALL, default=0.1, ge=SHORTEST_INTERVAL, le=LONGEST_TIME
    )
    profile_interval: Number = _key(
        "time between profiles", FREE_FALL, default=1.0, ge=SHORTEST_INTERVAL, le=LONGEST_TIME
    )
    field_interval: Number = _key(
        "time between snapshots (0: none)", FREE_FALL, default=10.0, ge=0, le=LONGEST_TIME
    )
    checkpoint_seconds: Number = _key(
        "wall clock between checkpoints", "seconds", default=60.0, ge=0.01, le=1e6
    )


class Case(Section):
    """A whole case: what to simulate, how, and what to record."""

    title: Text = _key(
        "free text",
        allowed="one line of at most 200 printable characters",
        default="",
        max_length=200,
        pattern=LINE,
    )
    numbers: Numbers = _key("pure numbers of the layer")
    cell: CellShape = _key("shape of the cell", default=CellShape())
    plates: Plates = _key("conditions at both plates", default=Plates())
    grid: GridChoice = _key(
        "points of the dealiased grid", allowed='"auto" or a table with nx and nz', default="auto"
    )
    time: TimeSection = _key("length of the run and of its steps", default=TimeSection())
    start: StartSection = _key("initial state", default=StartSection())
    thermometers: tuple[ThermometerSection, ...] = _key(
        "virtual thermometers", allowed="a list of tables, each written [[thermometers]]", default=()
    )
    output: OutputSection = _key("what is recorded how often", default=OutputSection())

    @model_validator(mode="after")
    def _obeys_the_rules(self) -> Case:
        faults = tuple(broken_rules(self))
        if faults:
            raise FaultsError(faults)
        return self

    def with_thermometer(self, name: str, *, x: float, z: float, interval: float = 0.1) -> Case:
        """Return the case with one more thermometer.

        Parameters
        ----------
        name : str
            Letters, digits and underscores, a letter first.
        x, z : float
            Place in cell heights; 0 <= x < aspect ratio, 0 <= z <= 1.
        interval : float
            Sampling interval in free-fall times.

        Raises
        ------
        ConfigError
            If the place lies outside the cell or the name is taken.
        """
        table = self.model_dump(exclude_unset=True)
        entry = {"name": name, "x": x, "z": z, "interval": interval}
        table["thermometers"] = [*table.get("thermometers", ()), entry]
        return checked(Case, table)
