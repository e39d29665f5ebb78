"""Checkpoints: all that a run needs to go on bit for bit; the last two are kept.

A checkpoint file is a block of text that names the format and the SHA-256 of the rest, followed by an HDF5
file (which HDF5 calls a user block and skips). The digest is verified before anything is believed.
"""

from __future__ import annotations

import hashlib
from collections.abc import Mapping
from dataclasses import dataclass
from io import BytesIO
from pathlib import Path
from typing import Any

import h5py
import numpy as np
from numpy.typing import NDArray

from rbsim.errors import RunFolderError
from rbsim.files.atomic import write_bytes
from rbsim.files.format import FORMAT, FORMAT_VERSION, refuse_other_format
from rbsim.files.hdf5 import mark_format, naming_damage
from rbsim.files.layout import RunFolder
from rbsim.files.provenance import provenance

#: Checkpoints that stay when a new one is complete.
KEPT = 2

#: Bytes of the block in front; HDF5 allows 512 and its doubles.
BLOCK = 512


@dataclass(frozen=True, eq=False)
class Checkpoint:
    """A state and the place of the run.

    Parameters
    ----------
    theta, psi : complex ndarray
        Coefficients of the state.
    facts : mapping of str to int or float or str
        Clock, stride, cell, grid.
    counts : mapping of str to int
        Rows of each stream of the run file, and of snapshots, at this moment.
    """

    theta: NDArray[np.complex128]
    psi: NDArray[np.complex128]
    facts: Mapping[str, Any]
    counts: Mapping[str, int]


def write_checkpoint(folder: RunFolder, step: int, checkpoint: Checkpoint) -> Path:
    """Write a checkpoint, then remove all but this one and the one before it.

    Parameters
    ----------
    folder : RunFolder
        Where.
    step : int
        Steps taken so far.
    checkpoint : Checkpoint
        What.

    Returns
    -------
    Path
        The file.

    Raises
    ------
    RunFolderError
        If it cannot be written; earlier checkpoints stay.
    """
    path = folder.checkpoint(step)
    write_single_checkpoint(path, checkpoint)
    files = folder.checkpoint_files()
    # later steps are damaged files that a resumed run has left behind
    for superfluous in set(files) - set(files[files.index(path) :][:KEPT]):
        superfluous.unlink(missing_ok=True)
    return path


def write_single_checkpoint(path: Path, checkpoint: Checkpoint) -> None:
    """Write a checkpoint outside a run folder, from which runs can start.

    Raises
    ------
    RunFolderError
        If it cannot be written.
    """
    image = _image(checkpoint)
    write_bytes(path, _block(image) + image)


def read_checkpoint(path: Path) -> Checkpoint:
    """Read a checkpoint and verify it.

    Raises
    ------
    RunFolderError
        If the file is missing, damaged or of another format.
    """
    if not path.is_file():
        raise RunFolderError(f"{path}: no such checkpoint")
    with naming_damage(path):
        content = path.read_bytes()
        image = content[BLOCK:]
        _verify(path, content[:BLOCK], image)
        with h5py.File(BytesIO(image), "r") as file:
            facts = {key: _plain(value) for key, value in file["facts"].attrs.items()}
            counts = {key: int(value) for key, value in file["counts"].attrs.items()}
            return Checkpoint(file["theta"][()], file["psi"][()], facts, counts)


def read_newest(folder: RunFolder) -> tuple[Checkpoint, Path, tuple[str, ...]]:
    """Return the newest undamaged checkpoint, its file, and what was said of damaged newer ones.

    Raises
    ------
    RunFolderError
        If there is none.
    """
    notices: list[str] = []
    for path in folder.checkpoint_files():
        try:
            return read_checkpoint(path), path, tuple(notices)
        except RunFolderError as error:
            notices.append(error.message)
    found = "; ".join(notices) or "no checkpoint was written yet"
    raise RunFolderError(f"{folder.path}: nothing to resume from ({found}); start a new run")


def _image(checkpoint: Checkpoint) -> bytes:
    buffer = BytesIO()
    with h5py.File(buffer, "w") as file:
        mark_format(file)
        file.attrs.update(provenance())
        file.create_dataset("theta", data=checkpoint.theta)
        file.create_dataset("psi", data=checkpoint.psi)
        file.create_group("facts").attrs.update(checkpoint.facts)
        file.create_group("counts").attrs.update(checkpoint.counts)
    return buffer.getvalue()


def _block(image: bytes) -> bytes:
    """Return the block of text: format, version and digest, one a line."""
    text = f"{FORMAT}\nversion {FORMAT_VERSION}\nsha256 {hashlib.sha256(image).hexdigest()}\n"
    return text.encode().ljust(BLOCK - 1) + b"\n"


def _verify(path: Path, block: bytes, image: bytes) -> None:
    name, version, *_ = [*block.decode("ascii", "replace").splitlines(), "", ""]
    if name != FORMAT:
        raise RunFolderError(f"{path}: damaged, or not a checkpoint of an rbsim run")
    refuse_other_format(path, name, version.removeprefix("version "))
    if block != _block(image):
        raise RunFolderError(f"{path}: damaged checkpoint (its content does not match its digest)")


def _plain(value: Any) -> Any:
    return value.item() if isinstance(value, np.generic) else value
