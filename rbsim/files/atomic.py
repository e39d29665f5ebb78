"""Files that are either complete or not there: written under a temporary name, synced, then renamed."""

from __future__ import annotations

import errno
import os
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path

from rbsim.errors import RunFolderError

#: Ending of unfinished files; swept when a run folder is opened for writing.
UNFINISHED = ".unfinished"

#: What systems answer when there is no room: disk, quota, largest file.
NO_ROOM = (errno.ENOSPC, errno.EDQUOT, errno.EFBIG)


@contextmanager
def replacing(path: Path) -> Iterator[Path]:
    """Give a temporary name to write to, and rename it to `path` when the block succeeds.

    Parameters
    ----------
    path : Path
        Final name; what it held before stays untouched until the last moment.

    Raises
    ------
    RunFolderError
        If the disk is full or refuses; the temporary file is removed.
    """
    temporary = path.with_name(f"{path.name}.{os.getpid()}{UNFINISHED}")
    try:
        yield temporary
        _sync(temporary)
        temporary.replace(path)
        _sync(path.parent)
    except OSError as error:
        raise RunFolderError(_complaint(path, error)) from error
    finally:
        with suppress(OSError):
            temporary.unlink(missing_ok=True)


def write_bytes(path: Path, content: bytes | memoryview) -> None:
    """Write a file at once; raises `RunFolderError` if it cannot, and leaves what was there."""
    with replacing(path) as temporary:
        temporary.write_bytes(content)


def write_text(path: Path, text: str) -> None:
    """Write a text file at once; raises `RunFolderError` if it cannot, and leaves what was there."""
    write_bytes(path, text.encode())


def sweep(folder: Path) -> None:
    """Remove what killed processes left unfinished."""
    for leftover in folder.rglob(f"*{UNFINISHED}"):
        leftover.unlink(missing_ok=True)


def _complaint(path: Path, error: OSError) -> str:
    reason = error.strerror or str(error)
    if error.errno in NO_ROOM:
        return (
            f"{path}: cannot be written ({reason}); earlier data is intact: make room and try again, "
            "a run goes on with `rbsim resume`"
        )
    return (
        f"{path}: cannot be written ({reason}); earlier data is intact: check the place and its permissions"
    )


def _sync(path: Path) -> None:
    handle = os.open(path, os.O_RDONLY)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)
