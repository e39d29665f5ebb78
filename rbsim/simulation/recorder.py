"""Observers of a run: history, profiles, snapshots and thermometers, handed to the run file when due."""

from __future__ import annotations

from dataclasses import replace

from rbsim.config.schema import Case
from rbsim.config.writing import case_to_toml
from rbsim.diagnostics.measure import Measurement
from rbsim.diagnostics.quantities import HISTORY, PROFILES, READINGS
from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.march import FinishedStep
from rbsim.dynamics.state import State
from rbsim.files.fieldfile import Snapshot, write_snapshot
from rbsim.files.layout import RunFolder
from rbsim.files.runfile import RunFileWriter, Stream
from rbsim.probes.thermometer import Thermometer, ThermometerArray
from rbsim.simulation.assembly import FIELD_TIMES, HISTORY_TIMES, PROFILE_TIMES, reading_name, thermometers_of

#: Key of the number of snapshots among the row counts.
SNAPSHOTS = "snapshots"


class Recorder:
    """Measures a state when appointments fall due.

    Parameters
    ----------
    case : Case
        What to record.
    equations : BoussinesqEquations
        Cell, grid and transforms.
    folder : RunFolder
        Where to record it.
    """

    def __init__(self, case: Case, equations: BoussinesqEquations, folder: RunFolder) -> None:
        self._case = case
        self._equations = equations
        self._folder = folder
        self._measurement = Measurement(equations)
        self._arrays = _arrays(equations, thermometers_of(case))
        self._writer = RunFileWriter(folder.run_file, _streams(thermometers_of(case)))
        self._snapshots = 0
        self.latest: dict[str, float] = {}

    def begin(self, state: State) -> None:
        """Start new files and record the initial state."""
        self._writer.create(self._equations.grid.z, self._facts())
        kinds = [HISTORY_TIMES, PROFILE_TIMES, *self._arrays]
        if self._case.output.field_interval > 0:
            kinds.append(FIELD_TIMES)
        self.record(state, FinishedStep(state.time, 0.0, 0.0, tuple(kinds)))
        self.flush()

    def resume(self, counts: dict[str, int]) -> None:
        """Take the files back to what a checkpoint knows of."""
        rows = dict(counts)
        self._snapshots = rows.pop(SNAPSHOTS)
        self._writer.resume(rows)
        for snapshot in self._folder.snapshots():
            if snapshot >= self._folder.field(self._snapshots):  # names are numbered in order
                snapshot.unlink()

    def record(self, state: State, step: FinishedStep) -> None:
        """Record what is due."""
        for kind in step.due:
            if kind == HISTORY_TIMES:
                self._record_history(state, step)
            elif kind == PROFILE_TIMES:
                values = self._measurement.profiles(state)
                self._writer.append("profile_time", state.time, [values[q.name] for q in PROFILES])
            elif kind == FIELD_TIMES:
                self._record_fields(state)
            elif kind in self._arrays:
                self._read_thermometers(state, self._arrays[kind])

    def counts(self) -> dict[str, int]:
        """Return the rows of each stream and the number of snapshots."""
        return {**self._writer.counts(), SNAPSHOTS: self._snapshots}

    def flush(self) -> None:
        """Bring all rows to the disk."""
        self._writer.flush()

    def _record_history(self, state: State, step: FinishedStep) -> None:
        values = self._measurement.history(state)
        values |= {"step_size": step.step_size, "courant": step.courant}
        self.latest = values
        self._writer.append("time", state.time, [values[q.name] for q in HISTORY])

    def _record_fields(self, state: State) -> None:
        grid = self._equations.grid
        u, w, temperature = self._equations.fields(state)
        snapshot = Snapshot(state.time, grid.x, grid.z, temperature, u, w)
        write_snapshot(self._folder.field(self._snapshots), snapshot)
        self._snapshots += 1

    def _read_thermometers(self, state: State, array: ThermometerArray) -> None:
        for thermometer, values in zip(array.thermometers, array.sample(state), strict=True):
            self._writer.append(f"time_{thermometer.name}", state.time, values)

    def _facts(self) -> dict[str, object]:
        cell, grid = self._equations.cell, self._equations.grid
        return {
            "title": self._case.title,
            "rayleigh": cell.rayleigh,
            "prandtl": cell.prandtl,
            "aspect_ratio": cell.width,
            "bottom_plate": cell.bottom.motion,
            "top_plate": cell.top.motion,
            "nx": grid.nx,
            "nz": grid.nz,
            "seed": self._case.start.seed,
            "transforms": self._equations.transforms.name,
            "threads": self._equations.team.threads,
            "case": case_to_toml(self._case),
        }


def _arrays(
    equations: BoussinesqEquations, thermometers: tuple[Thermometer, ...]
) -> dict[str, ThermometerArray]:
    """Group thermometers that are read at the same moments."""
    groups: dict[str, list[Thermometer]] = {}
    for thermometer in thermometers:
        groups.setdefault(reading_name(thermometer.interval), []).append(thermometer)
    return {name: ThermometerArray(equations, group) for name, group in groups.items()}


def _streams(thermometers: tuple[Thermometer, ...]) -> list[Stream]:
    streams = [Stream("time", HISTORY), Stream("profile_time", PROFILES, across="z")]
    for t in thermometers:
        named = tuple(
            replace(q, name=f"{q.name}_{t.name}", meaning=f"{q.meaning} at {t.name}") for q in READINGS
        )
        streams.append(Stream(f"time_{t.name}", named, attributes={"x": t.x, "z": t.z}))
    return streams
