"""One writer for each run folder, told by the lock of the system and by the name of the holder."""

from __future__ import annotations

import errno
import fcntl
import json
import os
import socket
import subprocess
import sys
from dataclasses import asdict
from datetime import UTC, datetime

import pytest

from rbsim.errors import RunFolderError
from rbsim.files.layout import RunFolder
from rbsim.files.lock import Holder, locked

HOLD = (
    "import sys\nfrom pathlib import Path\nfrom rbsim.files.layout import RunFolder\n"
    "from rbsim.files.lock import locked\n"
    "with locked(RunFolder(Path(sys.argv[1]))):\n    print('held', flush=True)\n    sys.stdin.readline()\n"
)


def _holding_process(folder: RunFolder) -> subprocess.Popen[str]:
    command = [sys.executable, "-c", HOLD, str(folder.path)]
    process = subprocess.Popen(command, stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True)
    assert process.stdout is not None
    assert process.stdout.readline() == "held\n"
    return process


@pytest.fixture(params=["with locks of the system", "without"])
def _system(request: pytest.FixtureRequest, monkeypatch: pytest.MonkeyPatch) -> None:
    """Also play a file system that has no locks, as some cluster file systems."""

    def unsupported(*_: object) -> None:
        raise OSError(errno.ENOSYS, os.strerror(errno.ENOSYS))

    if request.param == "without":
        monkeypatch.setattr(fcntl, "flock", unsupported)


@pytest.mark.usefixtures("_system")
def test_a_second_process_is_told_who_holds_the_lock(folder: RunFolder) -> None:
    holder = _holding_process(folder)
    words = (
        rf"process {holder.pid} on host {socket.gethostname()} since {datetime.now(UTC).year}-.*wait for it"
    )
    with pytest.raises(RunFolderError, match=words), locked(folder):
        pass
    assert holder.communicate("\n", timeout=60)[0] == ""
    assert not folder.lock.exists()
    with locked(folder):
        assert json.loads(folder.lock.read_text(encoding="utf-8"))["pid"] == os.getpid()
    assert not folder.lock.exists()


@pytest.mark.usefixtures("_system")
def test_the_lock_of_a_killed_process_is_taken_over(folder: RunFolder) -> None:
    holder = _holding_process(folder)
    holder.kill()
    holder.communicate()
    assert folder.lock.exists()
    with locked(folder):
        assert json.loads(folder.lock.read_text(encoding="utf-8"))["pid"] == os.getpid()


@pytest.mark.usefixtures("_system")
def test_a_process_number_that_is_used_again_does_not_hold_the_lock(folder: RunFolder) -> None:
    """This process is alive, but it is not the one that started when the lock says."""
    gone = Holder(socket.gethostname(), os.getpid(), "before anything", "long ago")
    folder.lock.write_text(json.dumps(asdict(gone)), encoding="utf-8")
    with locked(folder):
        pass


@pytest.mark.usefixtures("_system")
def test_the_same_process_cannot_take_it_twice(folder: RunFolder) -> None:
    with locked(folder), pytest.raises(RunFolderError, match=f"process {os.getpid()}"), locked(folder):
        pass
    assert not folder.lock.exists()


@pytest.mark.usefixtures("_system")
def test_an_error_in_the_block_frees_the_lock(folder: RunFolder) -> None:
    with pytest.raises(KeyboardInterrupt), locked(folder):
        raise KeyboardInterrupt
    assert not folder.lock.exists()


@pytest.mark.usefixtures("_system")
@pytest.mark.parametrize("text", ["", "{", '{"host": 1}', "[]", "3"])
def test_a_half_written_lock_is_taken_over(folder: RunFolder, text: str) -> None:
    folder.lock.write_text(text, encoding="utf-8")
    with locked(folder):
        pass


@pytest.mark.usefixtures("_system")
def test_a_lock_of_another_host_is_respected_and_can_be_removed(folder: RunFolder) -> None:
    folder.lock.write_text(json.dumps(asdict(Holder("elsewhere", 1, "1", "noon"))), encoding="utf-8")
    with (
        pytest.raises(RunFolderError, match=rf"on host elsewhere since noon.*remove {folder.lock}"),
        locked(folder),
    ):
        pass
    assert folder.lock.exists()
    folder.lock.unlink()
    with locked(folder):
        pass


def test_a_lock_freed_at_the_very_moment_is_taken_anew(
    folder: RunFolder, monkeypatch: pytest.MonkeyPatch
) -> None:
    """The holder removes its file after we opened it and before we lock it."""
    flock, calls = fcntl.flock, []

    def late(handle: int, operation: int) -> None:
        if not calls:
            folder.lock.unlink()
        calls.append(operation)
        flock(handle, operation)

    monkeypatch.setattr(fcntl, "flock", late)
    with locked(folder):
        assert json.loads(folder.lock.read_text(encoding="utf-8"))["pid"] == os.getpid()
        with pytest.raises(RunFolderError, match=f"process {os.getpid()}"), locked(folder):
            pass
    assert len(calls) == 3


def test_of_many_processes_at_once_one_wins(folder: RunFolder) -> None:
    """All find the lock of a dead process and run for it; nobody holds it beside another one."""
    stale = Holder(socket.gethostname(), 2**22 + 1, "1", "noon")
    folder.lock.write_text(json.dumps(asdict(stale)), encoding="utf-8")
    code = (
        "import sys, time\nfrom pathlib import Path\nfrom rbsim.errors import RunFolderError\n"
        "from rbsim.files.layout import RunFolder\nfrom rbsim.files.lock import locked\n"
        "folder, won = RunFolder(Path(sys.argv[1])), 0\n"
        "print('ready', flush=True)\nsys.stdin.readline()\n"
        "for _ in range(200):\n"
        "    try:\n"
        "        with locked(folder):\n"
        "            (folder.path / 'inside').touch(exist_ok=False)\n"
        "            (folder.path / 'inside').unlink()\n"
        "            won += 1\n"
        "    except RunFolderError:\n"
        "        time.sleep(0.0005)\n"
        "print(won)\n"
    )
    command = [sys.executable, "-c", code, str(folder.path)]
    racers = [
        subprocess.Popen(command, stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True) for _ in range(3)
    ]
    for racer in racers:
        assert racer.stdout is not None
        assert racer.stdout.readline() == "ready\n"
    for racer in racers:
        assert racer.stdin is not None
        racer.stdin.write("\n")
        racer.stdin.flush()
    wins = [int(racer.communicate(timeout=60)[0]) for racer in racers]
    assert [racer.returncode for racer in racers] == [0, 0, 0]
    assert sum(wins) > 0
    assert not folder.lock.exists()
