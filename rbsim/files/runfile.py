"""The run file: growing records in one HDF5 file that is complete at every moment.

Rows wait in memory; `flush` copies the file, appends to the copy and puts it in place of the old one.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import h5py
import numpy as np
from numpy.typing import ArrayLike, NDArray

from rbsim.diagnostics.quantities import Quantity
from rbsim.errors import ConfigError, RunFolderError
from rbsim.files.hdf5 import (
    add_dimension,
    add_growing_dimension,
    add_growing_variable,
    changing,
    composing,
    reading,
)
from rbsim.files.provenance import provenance

Array = NDArray[np.float64]

TIME_UNIT = "free-fall time"

#: Attribute that lists the time dimensions in their order in the case.
STREAMS = "streams"


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

    def names(self) -> tuple[str, ...]:
        """Return the names of all that grows: the time coordinate, then the variables."""
        return (self.dimension, *(quantity.name for quantity in self.quantities))


class RunFileWriter:
    """Collects rows of streams and appends them to the run file.

    Parameters
    ----------
    path : Path
        The run file.
    streams : sequence of Stream
        All streams of the run.

    Raises
    ------
    ConfigError
        If two streams have a variable of the same name.
    """

    def __init__(self, path: Path, streams: Sequence[Stream]) -> None:
        _refuse_twins(streams)
        self._path = path
        self._streams = {stream.dimension: stream for stream in streams}
        self._waiting = {stream.dimension: _Rows(len(stream.quantities)) for stream in streams}
        self._stored = dict.fromkeys(self._streams, 0)

    def create(self, heights: ArrayLike, facts: Mapping[str, Any]) -> None:
        """Write an empty run file.

        Parameters
        ----------
        heights : array_like, shape (nz,)
            Heights of the grid, in H.
        facts : mapping
            Attributes of the file: pure numbers, grid, case.

        Raises
        ------
        RunFolderError
            If it cannot be written.
        """
        with composing(self._path) as file:
            file.attrs.update({**provenance(), **facts, STREAMS: list(self._streams)})
            add_dimension(file, "z", heights, "H", "height above the bottom plate")
            for stream in self._streams.values():
                _add_stream(file, stream)

    def append(self, dimension: str, time: float, values: ArrayLike) -> None:
        """Add one row to a stream; it waits in memory until the next `flush`.

        Parameters
        ----------
        dimension : str
            Time dimension of the stream.
        time : float
            In free-fall times.
        values : array_like, shape (quantities,) or (quantities, nz)
            In the order of the stream's quantities; copied.
        """
        self._waiting[dimension].add(time, values)

    def counts(self) -> dict[str, int]:
        """Return the rows of each stream, stored or waiting."""
        return {name: self._stored[name] + rows.size for name, rows in self._waiting.items()}

    def flush(self) -> None:
        """Append all waiting rows to the file.

        Raises
        ------
        RunFolderError
            If that fails; the file stays as it was and the rows go on waiting.
        """
        if not any(rows.size for rows in self._waiting.values()):
            return
        with changing(self._path) as file:
            for name, stream in self._streams.items():
                if self._waiting[name].size:
                    _store(file, stream, self._stored[name], self._waiting[name])
        self._stored = self.counts()
        for rows in self._waiting.values():
            rows.clear()

    def resume(self, counts: Mapping[str, int]) -> None:
        """Cut the file back to the rows that a checkpoint knows of; rows that wait are forgotten.

        Raises
        ------
        RunFolderError
            If the file holds other streams or fewer rows, is damaged, or cannot be written.
        """
        with changing(self._path) as file:
            self._refuse_missing_rows(file, counts)
            for name, stream in self._streams.items():
                for variable in stream.names():
                    file[variable].resize(counts[name], axis=0)
        self._stored = {name: counts[name] for name in self._streams}
        for rows in self._waiting.values():
            rows.clear()

    def _refuse_missing_rows(self, file: h5py.File, counts: Mapping[str, int]) -> None:
        if not set(self._streams) == set(counts) == set(file.attrs[STREAMS]):
            raise RunFolderError(
                f"{self._path}: its records are not those of case.toml and the checkpoint; restore case.toml"
            )
        for stream in self._streams.values():
            found = min(file[variable].shape[0] for variable in stream.names())
            if found < counts[stream.dimension]:
                raise RunFolderError(
                    f"{self._path}: holds {found} rows along {stream.dimension}, the checkpoint knows "
                    f"{counts[stream.dimension]}; restore the file, or start a new run from the checkpoint "
                    "with start.kind = 'state'"
                )


class _Rows:
    """Rows of one stream that wait in memory, in arrays that double when they are full."""

    def __init__(self, width: int) -> None:
        self.size = 0
        self._width = width
        self._times: Array = np.empty(0)
        self._values: Array = np.empty((0, width))

    def add(self, time: float, values: ArrayLike) -> None:
        row = np.asarray(values, dtype=np.float64)
        if row.shape[:1] != (self._width,):
            raise ValueError(f"a row has {self._width} quantities, got an array of shape {row.shape}")
        if self.size == self._times.size:
            self._grow(row.shape)
        self._times[self.size] = time
        self._values[self.size] = row
        self.size += 1

    def _grow(self, shape: tuple[int, ...]) -> None:
        capacity = max(16, 2 * self._times.size)
        times, values = np.empty(capacity), np.empty((capacity, *shape))
        if self.size:
            times[: self.size], values[: self.size] = self._times, self._values
        self._times, self._values = times, values

    def columns(self) -> Iterator[Array]:
        """Yield the times, then the values of each quantity."""
        yield self._times[: self.size]
        yield from np.moveaxis(self._values[: self.size], 1, 0)

    def clear(self) -> None:
        self.size = 0


def _refuse_twins(streams: Sequence[Stream]) -> None:
    seen = {"z"}
    for stream in streams:
        for name in stream.names():
            if name in seen:
                raise ConfigError(f"two records would be called {name!r}; give the thermometer another name")
            seen.add(name)


def _add_stream(file: h5py.File, stream: Stream) -> None:
    add_growing_dimension(file, stream.dimension, TIME_UNIT, "time since the start of the run")
    dimensions = (stream.dimension, stream.across) if stream.across else (stream.dimension,)
    for quantity in stream.quantities:
        data = add_growing_variable(file, quantity, dimensions)
        data.attrs.update(stream.attributes or {})


def _store(file: h5py.File, stream: Stream, before: int, rows: _Rows) -> None:
    for name, column in zip(stream.names(), rows.columns(), strict=True):
        data = file[name]
        data.resize(before + rows.size, axis=0)
        data[before:] = column


def read_run_file(path: Path) -> tuple[dict[str, Array], dict[str, Any], dict[str, dict[str, Any]]]:
    """Return all variables, the attributes of the file and those of each variable.

    Raises
    ------
    RunFolderError
        If the file is missing, damaged or of another format.
    """
    with reading(path) as file:
        arrays = {name: data[()] for name, data in file.items()}
        labels = {name: dict(data.attrs) for name, data in file.items()}
        return arrays, dict(file.attrs), labels
