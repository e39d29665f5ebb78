"""Checkpoints: all that a run needs to go on bit for bit; the last two are kept."""

from __future__ import annotations

import hashlib
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import h5py
import numpy as np
from numpy.typing import NDArray

from rbsim.errors import RunFolderError
from rbsim.files.atomic import replacing
from rbsim.files.hdf5 import mark_format, provenance, reading
from rbsim.files.layout import RunFolder

#: Checkpoints that stay when a new one is complete.
KEPT = 2


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

    def digest(self) -> str:
        """Return the SHA-256 of all content."""
        digest = hashlib.sha256()
        for array in (self.theta, self.psi):
            digest.update(repr(array.shape).encode())
            digest.update(np.ascontiguousarray(array).data)
        digest.update(repr(sorted((k, str(v)) for k, v in self.facts.items())).encode())
        digest.update(repr(sorted((k, int(v)) for k, v in self.counts.items())).encode())
        return digest.hexdigest()


def write_checkpoint(folder: RunFolder, step: int, checkpoint: Checkpoint) -> Path:
    """Write a checkpoint, then remove those older than the last two.

    Parameters
    ----------
    folder : RunFolder
        Where.
    step : int
        Steps taken so far.
    checkpoint : Checkpoint
        What.
    """
    path = folder.checkpoint(step)
    with replacing(path) as temporary, h5py.File(temporary, "w") as file:
        mark_format(file)
        file.attrs.update(provenance())
        file.create_dataset("theta", data=checkpoint.theta)
        file.create_dataset("psi", data=checkpoint.psi)
        file.create_group("facts").attrs.update(checkpoint.facts)
        file.create_group("counts").attrs.update(checkpoint.counts)
        file.attrs["digest"] = checkpoint.digest()
    for old in folder.checkpoint_files()[KEPT:]:
        old.unlink()
    return path


def read_checkpoint(path: Path) -> Checkpoint:
    """Read a checkpoint and verify it.

    Raises
    ------
    RunFolderError
        If the file is missing, damaged or of another format.
    """
    try:
        with reading(path) as file:
            facts = {key: _plain(value) for key, value in file["facts"].attrs.items()}
            counts = {key: int(value) for key, value in file["counts"].attrs.items()}
            checkpoint = Checkpoint(file["theta"][()], file["psi"][()], facts, counts)
            expected = file.attrs.get("digest")
    except (OSError, KeyError, RuntimeError, ValueError) as error:
        raise RunFolderError(f"{path}: damaged checkpoint ({str(error).splitlines()[0]})") from error
    if checkpoint.digest() != expected:
        raise RunFolderError(f"{path}: damaged checkpoint (its content does not match its digest)")
    return checkpoint


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


def _plain(value: Any) -> Any:
    return value.item() if isinstance(value, np.generic) else value
