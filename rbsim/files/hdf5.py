"""HDF5 files of this format: opening those and no others, composing new ones, labelling what is in them.

Files are composed in memory and reach the disk as plain bytes: the HDF5 library does not survive a disk that
fills up under an open file (its handles cannot be closed and the process may crash at exit).
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from io import BytesIO
from pathlib import Path

import h5py
import numpy as np
from numpy.typing import ArrayLike

from rbsim.diagnostics.quantities import Quantity
from rbsim.errors import RunFolderError
from rbsim.files.atomic import write_bytes
from rbsim.files.format import FORMAT, FORMAT_KEY, FORMAT_VERSION, VERSION_KEY, refuse_other_format

#: Numbers in a chunk, the unit that is stored and checksummed: of a record, of profiles, of a field.
RECORD_CHUNK, PROFILE_CHUNK, FIELD_CHUNK = 1024, 8192, 65536

#: What h5py raises when bytes are not what they should be.
DAMAGE = (OSError, KeyError, RuntimeError, ValueError)


@contextmanager
def reading(path: Path) -> Iterator[h5py.File]:
    """Open a file for reading and check its format.

    Raises
    ------
    RunFolderError
        If it is missing, damaged, foreign, or of an older or newer format, also if that shows in the block.
    """
    if not path.is_file():
        raise RunFolderError(f"{path}: no such file")
    # no lock: some cluster file systems have none, and complete files are only ever replaced
    with naming_damage(path), h5py.File(path, "r", locking=False) as file:
        _refuse_other(path, file)
        yield file


@contextmanager
def composing(path: Path) -> Iterator[h5py.File]:
    """Compose a new file, and put it in place when the block succeeds.

    Raises
    ------
    RunFolderError
        If it cannot be written; what was there stays.
    """
    buffer = BytesIO()
    with h5py.File(buffer, "w") as file:
        mark_format(file)
        yield file
    write_bytes(path, buffer.getbuffer())


@contextmanager
def changing(path: Path) -> Iterator[h5py.File]:
    """Change a copy of a file, and put it in place of the file when the block succeeds.

    Raises
    ------
    RunFolderError
        If the file is missing, damaged or of another format, or cannot be written; what was there stays.
    """
    if not path.is_file():
        raise RunFolderError(f"{path}: no such file")
    with naming_damage(path):
        buffer = BytesIO(path.read_bytes())
        with h5py.File(buffer, "r+") as file:
            _refuse_other(path, file)
            yield file
    write_bytes(path, buffer.getbuffer())


@contextmanager
def naming_damage(path: Path) -> Iterator[None]:
    """Turn what goes wrong while a file is read into an error that names the file."""
    try:
        yield
    except DAMAGE as error:
        reason = (str(error).splitlines() or [type(error).__name__])[0]
        raise RunFolderError(f"{path}: damaged or not a file of an rbsim run ({reason})") from error


def mark_format(file: h5py.File) -> None:
    """Write the name and version of the format."""
    file.attrs[FORMAT_KEY] = FORMAT
    file.attrs[VERSION_KEY] = FORMAT_VERSION


def add_dimension(file: h5py.File, name: str, values: ArrayLike, unit: str, meaning: str) -> None:
    """Add a coordinate of fixed length that is a dimension of its own."""
    data = file.create_dataset(name, data=np.asarray(values, dtype=np.float64))
    data.make_scale(name)
    _describe(data, unit, meaning)


def add_growing_dimension(file: h5py.File, name: str, unit: str, meaning: str) -> None:
    """Add an empty coordinate that grows."""
    data = file.create_dataset(
        name, shape=(0,), maxshape=(None,), chunks=(RECORD_CHUNK,), dtype=np.float64, fletcher32=True
    )
    data.make_scale(name)
    _describe(data, unit, meaning)


def add_variable(file: h5py.File, quantity: Quantity, dimensions: tuple[str, ...], values: ArrayLike) -> None:
    """Add a variable of fixed size on dimensions that are in the file."""
    array = np.asarray(values, dtype=np.float64)
    chunks = (min(array.shape[0], _rows(FIELD_CHUNK, array.shape[1:])), *array.shape[1:])
    data = file.create_dataset(quantity.name, data=array, chunks=chunks, fletcher32=True)
    _attach(file, data, quantity, dimensions)


def add_growing_variable(file: h5py.File, quantity: Quantity, dimensions: tuple[str, ...]) -> h5py.Dataset:
    """Add an empty variable that grows along the first of its dimensions."""
    tail = tuple(file[name].shape[0] for name in dimensions[1:])
    data = file.create_dataset(
        quantity.name,
        shape=(0, *tail),
        maxshape=(None, *tail),
        chunks=(_rows(PROFILE_CHUNK if tail else RECORD_CHUNK, tail), *tail),
        dtype=np.float64,
        fletcher32=True,
    )
    _attach(file, data, quantity, dimensions)
    return data


def _rows(numbers: int, tail: tuple[int, ...]) -> int:
    """Return how many rows make about as many numbers."""
    return max(1, numbers // int(np.prod(tail)))


def _attach(file: h5py.File, data: h5py.Dataset, quantity: Quantity, dimensions: tuple[str, ...]) -> None:
    for axis, name in enumerate(dimensions):
        data.dims[axis].attach_scale(file[name])
    _describe(data, quantity.unit, quantity.meaning)


def _describe(data: h5py.Dataset, unit: str, meaning: str) -> None:
    data.attrs["units"] = unit
    data.attrs["long_name"] = meaning


def _refuse_other(path: Path, file: h5py.File) -> None:
    refuse_other_format(path, file.attrs.get(FORMAT_KEY), file.attrs.get(VERSION_KEY))
