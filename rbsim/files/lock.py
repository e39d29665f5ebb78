"""One writer for each run folder."""

from __future__ import annotations

import json
import os
import socket
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from rbsim.errors import RunFolderError
from rbsim.files.layout import RunFolder


@contextmanager
def locked(folder: RunFolder) -> Iterator[None]:
    """Hold the lock of a run folder during a block.

    Raises
    ------
    RunFolderError
        If another living process holds it. The lock of a dead process of this host is taken over.
    """
    mine = {"host": socket.gethostname(), "pid": os.getpid(), "started": _started(os.getpid())}
    _take(folder.lock, json.dumps(mine))
    try:
        yield
    finally:
        folder.lock.unlink(missing_ok=True)


def _take(path: Path, text: str) -> None:
    for _ in range(2):
        try:
            handle = os.open(path, os.O_CREAT | os.O_EXCL | os.O_WRONLY)
        except FileExistsError:
            _refuse_living_holder(path)
            path.unlink(missing_ok=True)
        except OSError as error:
            raise RunFolderError(f"{path}: cannot be written ({error.strerror})") from error
        else:
            with os.fdopen(handle, "w", encoding="utf-8") as file:
                file.write(text)
            return
    raise RunFolderError(f"{path}: another process took the lock at this moment; try again")


def _refuse_living_holder(path: Path) -> None:
    try:
        holder = json.loads(path.read_text(encoding="utf-8"))
        host, pid, started = str(holder["host"]), int(holder["pid"]), str(holder["started"])
    except (OSError, ValueError, KeyError, TypeError):
        return  # killed while it wrote the lock
    if host != socket.gethostname():
        raise RunFolderError(
            f"{path.parent}: in use by process {pid} on host {host}; if that process is gone, remove {path}"
        )
    if _started(pid) == started != "":
        raise RunFolderError(f"{path.parent}: in use by process {pid} of this host; wait for it or stop it")


def _started(pid: int) -> str:
    """Return the start time of a process as the system gives it, empty if there is no such process."""
    try:
        fields = Path(f"/proc/{pid}/stat").read_text(encoding="utf-8").rpartition(")")[2].split()
        return fields[19]
    except OSError:
        return _alive_without_proc(pid)


def _alive_without_proc(pid: int) -> str:
    """Answer on systems without /proc, where a process number that is used again looks alive."""
    if Path("/proc/self").exists():
        return ""
    try:
        os.kill(pid, 0)
    except OSError:
        return ""
    return "alive"
