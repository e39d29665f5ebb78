"""The run file: growing records in one HDF5 file that is complete at every moment.

Rows wait in memory; `flush` copies the file, appends to the copy and puts it in place of the old one.
"""

from __future__ import annotations

import shutil
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import h5py
import numpy as np
from numpy.typing import NDArray

from rbsim.diagnostics.quantities import Quantity
from rbsim.files.atomic import replacing
from rbsim.files.hdf5 import add_dimension, add_variable, mark_format, provenance, reading

Array = NDArray[np.float64]

TIME_UNIT = "free-fall time"


@dataclass(frozen=True)
class Stream:
    """Variables that grow together along one time dimension.

    Parameters
    ----------
    dimension : str
        Name of the time coordinate.
    quantities : tuple of Quantity
        Variables.
    across : str or None
        Second dimension, ``"z"`` for profiles.
    attributes : mapping
        Attributes of each variable, such as the place of a thermometer.
    """

    dimension: str
    quantities: tuple[Quantity, ...]
    across: str | None = None
    attributes: Mapping[str, float] | None = None


class RunFileWriter:
    """Collects rows of streams and appends them to the run file.

    Parameters
    ----------
    path : Path
        The run file.
    streams : sequence of Stream
        All streams of the run.
    """

    def __init__(self, path: Path, streams: Sequence[Stream]) -> None:
        self._path = path
        self._streams = {stream.dimension: stream for stream in streams}
        self._rows: dict[str, list[tuple[float, Sequence[Any]]]] = {name: [] for name in self._streams}
        self._stored = dict.fromkeys(self._streams, 0)

    def create(self, heights: Array, facts: Mapping[str, Any]) -> None:
        """Write an empty run file.

        Parameters
        ----------
        heights : ndarray, shape (nz,)
            Heights of the grid, in H.
        facts : mapping
            Attributes of the file: pure numbers, grid, case.
        """
        with replacing(self._path) as temporary, h5py.File(temporary, "w") as file:
            mark_format(file)
            file.attrs.update({**provenance(), **facts})
            add_dimension(file, "z", heights, "H", "height above the bottom plate")
            for stream in self._streams.values():
                _create_stream(file, stream, heights.size)

    def append(self, dimension: str, time: float, values: Sequence[Any]) -> None:
        """Add one row, in the order of the stream's quantities, to the stream of that time dimension."""
        self._rows[dimension].append((time, values))

    def counts(self) -> dict[str, int]:
        """Return the rows of each stream, stored or waiting."""
        return {name: self._stored[name] + len(rows) for name, rows in self._rows.items()}

    def flush(self) -> None:
        """Append all waiting rows to the file."""
        if not any(self._rows.values()):
            return
        with replacing(self._path) as temporary:
            shutil.copyfile(self._path, temporary)
            with h5py.File(temporary, "r+") as file:
                for name, rows in self._rows.items():
                    if rows:
                        _extend(file, self._streams[name], rows)
        for name, rows in self._rows.items():
            self._stored[name] += len(rows)
            rows.clear()

    def resume(self, counts: Mapping[str, int]) -> None:
        """Cut the file back to the rows that a checkpoint knows of."""
        with replacing(self._path) as temporary:
            shutil.copyfile(self._path, temporary)
            with h5py.File(temporary, "r+") as file:
                for name, stream in self._streams.items():
                    for variable in (name, *(quantity.name for quantity in stream.quantities)):
                        file[variable].resize(counts[name], axis=0)
        self._stored = {name: counts[name] for name in self._streams}


def _create_stream(file: h5py.File, stream: Stream, heights: int) -> None:
    add_dimension(file, stream.dimension, np.empty(0), TIME_UNIT, "time since the start of the run")
    shape = (0, heights) if stream.across else (0,)
    dimensions = (stream.dimension, stream.across) if stream.across else (stream.dimension,)
    for quantity in stream.quantities:
        data = add_variable(file, quantity, np.empty(shape), dimensions)
        data.attrs.update(stream.attributes or {})


def _extend(file: h5py.File, stream: Stream, rows: list[tuple[float, Sequence[Any]]]) -> None:
    columns = [np.array([row[1][i] for row in rows]) for i in range(len(stream.quantities))]
    names = (quantity.name for quantity in stream.quantities)
    for name, values in (
        (stream.dimension, np.array([row[0] for row in rows])),
        *zip(names, columns, strict=True),
    ):
        data = file[name]
        before = data.shape[0]
        data.resize(before + len(rows), axis=0)
        data[before:] = values


def read_run_file(path: Path) -> tuple[dict[str, Array], dict[str, Any], dict[str, dict[str, Any]]]:
    """Return all variables, the attributes of the file and those of each variable."""
    with reading(path) as file:
        arrays = {name: data[()] for name, data in file.items()}
        labels = {name: dict(data.attrs) for name, data in file.items()}
        return arrays, dict(file.attrs), labels
