"""Reading a run as plain arrays, also while another process writes it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rbsim.diagnostics.quantities import HISTORY, PROFILES, READINGS
from rbsim.files.hdf5 import naming_damage
from rbsim.files.layout import RunFolder, open_run_folder
from rbsim.files.runfile import STREAMS, read_run_file

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class ThermometerRecord:
    """What one thermometer saw, in free-fall units.

    Parameters
    ----------
    x, z : float
        Place in H.
    time, temperature, horizontal_velocity, vertical_velocity : ndarray, shape (samples,)
        Record.
    """

    x: float
    z: float
    time: Array
    temperature: Array
    horizontal_velocity: Array
    vertical_velocity: Array


@dataclass(frozen=True, eq=False)
class RunRecords:
    """All records of a run.

    Parameters
    ----------
    folder : RunFolder
        Where they are.
    attributes : mapping
        Pure numbers, grid, case and provenance.
    history : mapping of str to ndarray, shape (samples,)
        History quantities and ``time``.
    profiles : mapping of str to ndarray, shape (samples, nz)
        Profiles; ``time`` has the shape (samples,) and ``z`` (nz,).
    thermometers : mapping of str to ThermometerRecord
        By name, in the order of the case.
    """

    folder: RunFolder
    attributes: Mapping[str, Any]
    history: Mapping[str, Array]
    profiles: Mapping[str, Array]
    thermometers: Mapping[str, ThermometerRecord]


def open_run(path: str | Path) -> RunRecords:
    """Read the records of a run folder.

    Raises
    ------
    RunFolderError
        If it is not a run folder, or its run file is missing, damaged or of another format.
    """
    folder = open_run_folder(path)
    arrays, attributes, labels = read_run_file(folder.run_file)
    with naming_damage(folder.run_file):
        names = [name.removeprefix("time_") for name in attributes[STREAMS] if name.startswith("time_")]
        return RunRecords(
            folder,
            attributes,
            history=_pick(arrays, ("time", *(q.name for q in HISTORY))),
            profiles={
                "time": arrays["profile_time"],
                **_pick(arrays, ("z", *(q.name for q in PROFILES))),
            },
            thermometers={name: _record(arrays, labels[f"temperature_{name}"], name) for name in names},
        )


def _pick(arrays: Mapping[str, Array], names: tuple[str, ...]) -> dict[str, Array]:
    return {name: arrays[name] for name in names}


def _record(arrays: Mapping[str, Array], label: Mapping[str, Any], name: str) -> ThermometerRecord:
    readings = {quantity.name: arrays[f"{quantity.name}_{name}"] for quantity in READINGS}
    return ThermometerRecord(float(label["x"]), float(label["z"]), arrays[f"time_{name}"], **readings)
