"""The case: every key a configuration may hold, its unit, its range and its default."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import (
    AfterValidator,
    BaseModel,
    BeforeValidator,
    ConfigDict,
    Discriminator,
    Field,
    Tag,
    model_validator,
)


def _number(value: Any) -> Any:
    """Refuse what Python, but no practitioner, takes for a number."""
    if isinstance(value, bool | str):
        raise ValueError("must be a number")
    return value


def _even(value: int) -> int:
    if value % 2:
        raise ValueError("must be an even number")
    return value


Number = Annotated[float, BeforeValidator(_number), Field(allow_inf_nan=False)]
Integer = Annotated[int, BeforeValidator(_number), Field(strict=True)]
Points = Annotated[Integer, Field(ge=16, le=16384), AfterValidator(_even)]


class Section(BaseModel):
    """A table of a configuration: unknown keys are errors, values do not change."""

    model_config = ConfigDict(frozen=True, extra="forbid")


class Numbers(Section):
    """Pure numbers of the layer."""

    rayleigh: Number = Field(gt=0, le=1e12, description="Rayleigh number gαΔH³/(νκ)")
    prandtl: Number = Field(default=1.0, ge=1e-4, le=1e6, description="Prandtl number ν/κ")


class CellShape(Section):
    """Shape of the cell."""

    aspect_ratio: Number = Field(default=2.0, ge=0.05, le=200, description="horizontal period Γ in heights")


class PlateSection(Section):
    """One plate."""

    motion: Literal["no-slip", "free-slip"] = Field(default="no-slip", description="condition on the flow")
    thermal: Literal["fixed-temperature"] = Field(
        default="fixed-temperature", description="condition on the heat"
    )


class Plates(Section):
    """Both plates."""

    bottom: PlateSection = PlateSection()
    top: PlateSection = PlateSection()


class GridSection(Section):
    """Points of the dealiased grid."""

    nx: Points = Field(description="horizontal points, even")
    nz: Points = Field(description="vertical points, even")


def _kind_of_grid(value: Any) -> str | None:
    if isinstance(value, str):
        return "word"
    return "points" if isinstance(value, dict | GridSection) else None


GridChoice = Annotated[
    Annotated[Literal["auto"], Tag("word")] | Annotated[GridSection, Tag("points")],
    Discriminator(_kind_of_grid),
]


class TimeSection(Section):
    """Length of the run and of its steps."""

    end: Number = Field(default=100.0, gt=0, le=1e7, description="last time in free-fall times")
    courant: Number = Field(
        default=0.8, gt=0, le=1, description="largest Courant number on the dealiased grid"
    )
    step: Number | None = Field(default=None, gt=0, le=1, description="fixed step in free-fall times")


class StartSection(Section):
    """Initial state."""

    kind: Literal["noise", "roll", "state"] = Field(default="noise", description="what the run starts from")
    amplitude: Number = Field(default=0.01, gt=0, le=1, description="temperature departure in units of Δ")
    seed: Integer = Field(default=1, ge=0, le=2**63, description="seed of the noise")
    pairs: Integer = Field(default=1, ge=1, le=4096, description="roll pairs in the period")
    path: str | None = Field(default=None, min_length=1, description="run folder or checkpoint to start from")

    @model_validator(mode="after")
    def _belongs_together(self) -> StartSection:
        given = self.model_fields_set - {"kind"}
        allowed = {"noise": {"amplitude", "seed"}, "roll": {"amplitude", "pairs"}, "state": {"path"}}[
            self.kind
        ]
        if self.kind == "state" and self.path is None:
            raise ValueError("kind = 'state' needs the key path: a run folder or a checkpoint")
        if given - allowed:
            wrong, right = sorted(given - allowed), sorted(allowed)
            raise ValueError(
                f"kind = {self.kind!r} takes {' and '.join(right)}; remove {' and '.join(wrong)}"
            )
        return self


class ThermometerSection(Section):
    """One virtual thermometer."""

    name: str = Field(
        pattern=r"^[A-Za-z][A-Za-z0-9_]*$", max_length=40, description="letters, digits and _, a letter first"
    )
    x: Number = Field(ge=0, description="horizontal place in heights, below the period")
    z: Number = Field(ge=0, le=1, description="height above the bottom plate in heights")
    interval: Number = Field(default=0.1, ge=1e-4, description="sampling interval in free-fall times")


class OutputSection(Section):
    """What is recorded how often."""

    history_interval: Number = Field(
        default=0.1, ge=1e-4, description="free-fall times between history samples"
    )
    profile_interval: Number = Field(default=1.0, ge=1e-4, description="free-fall times between profiles")
    field_interval: Number = Field(
        default=10.0, ge=0, description="free-fall times between snapshots, 0: none"
    )
    checkpoint_seconds: Number = Field(
        default=60.0, ge=0.01, description="seconds of wall clock between checkpoints"
    )


class Case(Section):
    """A whole case: what to simulate, how, and what to record."""

    title: str = Field(default="", max_length=200, description="free text")
    numbers: Numbers
    cell: CellShape = CellShape()
    plates: Plates = Plates()
    grid: GridChoice = Field(default="auto", description='"auto", or a table with nx and nz')
    time: TimeSection = TimeSection()
    start: StartSection = StartSection()
    thermometers: tuple[ThermometerSection, ...] = Field(default=(), description="virtual thermometers")
    output: OutputSection = OutputSection()

    @model_validator(mode="after")
    def _fits_together(self) -> Case:
        names = [t.name for t in self.thermometers]
        for i, thermometer in enumerate(self.thermometers):
            if thermometer.x >= self.cell.aspect_ratio:
                raise ValueError(
                    f"key 'thermometers.{i}.x' = {thermometer.x:g}: must lie in the cell, "
                    f"0 <= x < {self.cell.aspect_ratio:g} (cell.aspect_ratio)"
                )
            if thermometer.name in names[:i]:
                raise ValueError(
                    f"key 'thermometers.{i}.name' = '{thermometer.name}': must differ from the others"
                )
        if self.time.step is not None and self.time.step > self.time.end:
            raise ValueError(
                f"key 'time.step' = {self.time.step:g}: must not exceed time.end = {self.time.end:g}"
            )
        return self

    def with_thermometer(self, name: str, *, x: float, z: float, interval: float = 0.1) -> Case:
        """Return the case with one more thermometer.

        Parameters
        ----------
        name : str
            Letters, digits and underscores, a letter first.
        x, z : float
            Place in heights.
        interval : float
            Sampling interval in free-fall times.

        Raises
        ------
        ConfigError
            If the place lies outside the cell or the name is taken.
        """
        from rbsim.config.loading import case_from_table

        table = self.model_dump(exclude_unset=True)
        entry = {"name": name, "x": x, "z": z, "interval": interval}
        table["thermometers"] = [*table.get("thermometers", ()), entry]
        return case_from_table(table, "python")
