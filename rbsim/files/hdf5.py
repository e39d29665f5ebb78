"""Opening HDF5 files of this format and no other, and labelling what is in them."""

from __future__ import annotations

import datetime
import platform
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path
from typing import Any

import h5py

from rbsim.diagnostics.quantities import Quantity
from rbsim.errors import RunFolderError
from rbsim.files.layout import FORMAT, FORMAT_KEY, FORMAT_VERSION, VERSION_KEY


@contextmanager
def reading(path: Path) -> Iterator[h5py.File]:
    """Open a file for reading and check its format.

    Raises
    ------
    RunFolderError
        If it is missing, damaged, foreign, or of an older or newer format.
    """
    if not path.exists():
        raise RunFolderError(f"{path}: no such file")
    try:
        file = h5py.File(path, "r", locking=False)
    except OSError as error:
        raise RunFolderError(f"{path}: damaged or not an HDF5 file ({str(error).splitlines()[0]})") from error
    with file:
        _check_format(path, file)
        yield file


def _check_format(path: Path, file: h5py.File) -> None:
    if file.attrs.get(FORMAT_KEY) != FORMAT:
        raise RunFolderError(f"{path}: not written by rbsim")
    found = int(file.attrs.get(VERSION_KEY, -1))
    if found != FORMAT_VERSION:
        age = "newer" if found > FORMAT_VERSION else "older"
        raise RunFolderError(
            f"{path}: format version {found} is {age} than the version {FORMAT_VERSION} of this program; "
            f"use the rbsim release that wrote it"
        )


def mark_format(file: h5py.File) -> None:
    """Write the format name and version."""
    file.attrs[FORMAT_KEY] = FORMAT
    file.attrs[VERSION_KEY] = FORMAT_VERSION


def add_dimension(file: h5py.File, name: str, values: Any, unit: str, meaning: str) -> h5py.Dataset:
    """Create a growing coordinate that is a dimension of its own."""
    data = file.create_dataset(name, data=values, maxshape=(None,), chunks=(1024,))
    data.make_scale(name)
    _describe(data, unit, meaning)
    return data


def add_variable(
    file: h5py.File, quantity: Quantity, values: Any, dimensions: tuple[str, ...]
) -> h5py.Dataset:
    """Create a variable, growing along its first dimension, and tie it to its dimensions."""
    tail = values.shape[1:]
    data = file.create_dataset(
        quantity.name, data=values, maxshape=(None, *tail), chunks=(max(1, 1024 // max(1, *tail, 1)), *tail)
    )
    for axis, name in enumerate(dimensions):
        data.dims[axis].attach_scale(file[name])
    _describe(data, quantity.unit, quantity.meaning)
    return data


def _describe(data: h5py.Dataset, unit: str, meaning: str) -> None:
    # "units" of a time in free-fall times must not look like a calendar unit to xarray
    data.attrs["units"] = unit
    data.attrs["long_name"] = meaning


def provenance() -> Mapping[str, str]:
    """Return program version, platform and date of this moment."""
    return {
        "program_version": program_version(),
        "platform": f"{platform.platform()}, Python {platform.python_version()}",
        "created": datetime.datetime.now(datetime.UTC).isoformat(timespec="seconds"),
    }


def program_version() -> str:
    """Return the version of rbsim as installed."""
    try:
        return version("rbsim")
    except PackageNotFoundError:
        return "unknown (not installed)"
