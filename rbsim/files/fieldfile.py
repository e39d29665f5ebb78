"""Snapshots: temperature and velocity on the grid at one moment, one file each, written once."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from rbsim.diagnostics.quantities import READINGS
from rbsim.files.hdf5 import add_dimension, add_variable, composing, reading
from rbsim.files.runfile import TIME_UNIT

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Snapshot:
    """Fields at one moment in free-fall units.

    Parameters
    ----------
    time : float
        Free-fall times since the start.
    x : ndarray, shape (nx,)
        Horizontal points in H.
    z : ndarray, shape (nz,)
        Heights in H.
    temperature, horizontal_velocity, vertical_velocity : ndarray, shape (nz, nx)
        Fields.
    """

    time: float
    x: Array
    z: Array
    temperature: Array
    horizontal_velocity: Array
    vertical_velocity: Array


def write_snapshot(path: Path, snapshot: Snapshot) -> None:
    """Write a snapshot at once.

    Raises
    ------
    RunFolderError
        If it cannot be written.
    """
    with composing(path) as file:
        time = file.create_dataset("time", data=float(snapshot.time))
        time.attrs.update({"units": TIME_UNIT, "long_name": "time since the start of the run"})
        add_dimension(file, "x", snapshot.x, "H", "horizontal place")
        add_dimension(file, "z", snapshot.z, "H", "height above the bottom plate")
        for quantity in READINGS:
            add_variable(file, quantity, ("z", "x"), getattr(snapshot, quantity.name))
            # by the CF conventions, the coordinates that are not dimensions
            file[quantity.name].attrs["coordinates"] = "time"


def read_snapshot(path: Path) -> Snapshot:
    """Read a snapshot.

    Raises
    ------
    RunFolderError
        If the file is missing, damaged or foreign.
    """
    with reading(path) as file:
        fields = (file[quantity.name][()] for quantity in READINGS)
        return Snapshot(float(file["time"][()]), file["x"][()], file["z"][()], *fields)


def snapshot_time(path: Path) -> float:
    """Return the time of a snapshot in free-fall times, without reading its fields.

    Raises
    ------
    RunFolderError
        If the file is missing, damaged or foreign.
    """
    with reading(path) as file:
        return float(file["time"][()])
