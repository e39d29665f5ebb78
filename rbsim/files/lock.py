"""One writer for each run folder."""

from __future__ import annotations

import datetime
import errno
import fcntl
import json
import os
import socket
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import asdict, dataclass
from pathlib import Path

from rbsim.errors import RunFolderError
from rbsim.files.layout import RunFolder


@dataclass(frozen=True)
class Holder:
    """The process that holds a lock.

    Parameters
    ----------
    host : str
        Name of its computer.
    pid : int
        Number of the process.
    started : str
        Start of the process as the system counts it; tells it from a later process of the same number.
    since : str
        Date of the lock.
    """

    host: str
    pid: int
    started: str
    since: str = "an unknown date"


@contextmanager
def locked(folder: RunFolder) -> Iterator[None]:
    """Hold the lock of a run folder during a block.

    The lock file names its holder. The holder also keeps a lock of the system on it, which ends with the
    process however it dies; on file systems without such locks the process number and start time decide.

    Raises
    ------
    RunFolderError
        If another living process holds it. The lock of a dead process of this host is taken over.
    """
    handle = _take(folder.lock)
    try:
        yield
    finally:
        folder.lock.unlink(missing_ok=True)  # before the system's lock ends, so that nobody else's goes
        os.close(handle)


def _take(path: Path) -> int:
    """Return a handle that carries the lock."""
    while True:
        try:
            handle = os.open(path, os.O_RDWR | os.O_CREAT, 0o644)
        except OSError as error:
            raise RunFolderError(f"{path}: cannot be written ({error.strerror})") from error
        try:
            _refuse_living_holder(path, _read_holder(path), system_says_free=_grasp(handle))
            if _is_still(path, handle):
                _write_holder(path, handle)
                return handle
        except BaseException:
            os.close(handle)
            raise
        os.close(handle)  # its holder removed the file between our opening and locking it


def _grasp(handle: int) -> bool | None:
    """Return whether the system's lock is ours now, None where the file system has none."""
    try:
        fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except OSError as error:
        return False if error.errno in (errno.EWOULDBLOCK, errno.EACCES) else None
    return True


def _is_still(path: Path, handle: int) -> bool:
    try:
        return os.path.samestat(path.stat(), os.fstat(handle))
    except FileNotFoundError:
        return False


def _write_holder(path: Path, handle: int) -> None:
    now = datetime.datetime.now(datetime.UTC).isoformat(sep=" ", timespec="seconds")
    holder = Holder(socket.gethostname(), os.getpid(), _start_of(os.getpid()), now)
    try:
        os.ftruncate(handle, 0)
        os.pwrite(handle, json.dumps(asdict(holder)).encode(), 0)
    except OSError as error:
        raise RunFolderError(f"{path}: cannot be written ({error.strerror})") from error


def _read_holder(path: Path) -> Holder | None:
    try:
        return Holder(**json.loads(path.read_text(encoding="utf-8")))
    except (OSError, ValueError, TypeError):
        return None  # new, or its process died while it wrote


def _refuse_living_holder(path: Path, holder: Holder | None, *, system_says_free: bool | None) -> None:
    if holder is None:
        if system_says_free is False:
            raise RunFolderError(f"{path.parent}: in use by another process; wait for it or stop it")
        return
    who = f"process {holder.pid} on host {holder.host} since {holder.since}"
    if holder.host != socket.gethostname():
        raise RunFolderError(f"{path.parent}: in use by {who}; if that process is gone, remove {path}")
    alive = not system_says_free if system_says_free is not None else _lives(holder)
    if alive:
        raise RunFolderError(f"{path.parent}: in use by {who}; wait for it or stop it")


def _lives(holder: Holder) -> bool:
    return _start_of(holder.pid) == holder.started != ""


def _start_of(pid: int) -> str:
    """Return the start of a process as the system counts it, empty if there is no such process."""
    try:
        return Path(f"/proc/{pid}/stat").read_text(encoding="utf-8").rpartition(")")[2].split()[19]
    except OSError:
        if Path("/proc/self").exists():
            return ""
    return _without_proc(pid)


def _without_proc(pid: int) -> str:
    """Answer on systems without /proc, where a process number that is used again looks alive."""
    try:
        os.kill(pid, 0)
    except ProcessLookupError:
        return ""
    except PermissionError:
        pass
    return "alive"
