"""A file is the old one or the new one, whatever goes wrong in between."""

from __future__ import annotations

import errno
import os
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import pytest

from rbsim.errors import RunFolderError
from rbsim.files import atomic
from rbsim.files.atomic import UNFINISHED, replacing, sweep, write_bytes, write_text


def _temporary(path: Path) -> Path:
    return path.with_name(f"{path.name}.{os.getpid()}{UNFINISHED}")


def _only(folder: Path) -> list[str]:
    return sorted(path.name for path in folder.iterdir())


def test_content_arrives_and_replaces_what_was_there(tmp_path: Path) -> None:
    path = tmp_path / "file"
    write_bytes(path, b"old")
    write_bytes(path, memoryview(b"new"))
    assert path.read_bytes() == b"new"
    write_text(path, "Γ = 2\n")
    assert path.read_bytes() == "Γ = 2\n".encode()
    assert _only(tmp_path) == ["file"]


def _write_half_and_raise(path: Path, error: type[BaseException]) -> None:
    with replacing(path) as temporary:
        temporary.write_bytes(b"ne")
        raise error


@pytest.mark.parametrize("error", [ValueError, KeyboardInterrupt, MemoryError])
def test_a_failing_writer_leaves_the_old_file(tmp_path: Path, error: type[BaseException]) -> None:
    path = tmp_path / "file"
    write_bytes(path, b"old")
    with pytest.raises(error):
        _write_half_and_raise(path, error)
    assert path.read_bytes() == b"old"
    assert _only(tmp_path) == ["file"]


def _fail_with(number: int) -> Callable[..., None]:
    def fail(*_: object) -> None:
        raise OSError(number, os.strerror(number))

    return fail


@pytest.mark.parametrize("number", [errno.ENOSPC, errno.EDQUOT, errno.EIO])
@pytest.mark.parametrize("call", ["fsync", "replace"])
def test_any_refusal_of_the_disk_leaves_the_old_file(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, call: str, number: int
) -> None:
    path = tmp_path / "file"
    write_bytes(path, b"old")
    monkeypatch.setattr(*{"fsync": (os, "fsync"), "replace": (Path, "replace")}[call], _fail_with(number))
    with pytest.raises(RunFolderError, match="earlier data is intact") as caught:
        write_bytes(path, b"new")
    assert str(path) in caught.value.message
    assert os.strerror(number) in caught.value.message
    assert ("rbsim resume" in caught.value.message) == (number in atomic.NO_ROOM)
    assert path.read_bytes() == b"old"
    assert _only(tmp_path) == ["file"]


def test_a_file_beyond_the_limit_of_a_real_process_leaves_the_old_one(tmp_path: Path) -> None:
    code = (
        "import resource, sys\nfrom pathlib import Path\n"
        "from rbsim.errors import RunFolderError\nfrom rbsim.files.atomic import write_bytes\n"
        "path = Path(sys.argv[1])\nwrite_bytes(path, b'old')\n"
        "resource.setrlimit(resource.RLIMIT_FSIZE, (1000, 1000))\n"
        "try:\n    write_bytes(path, bytes(5000))\nexcept RunFolderError as error:\n    print(error)\n"
    )
    path = tmp_path / "file"
    done = subprocess.run(
        [sys.executable, "-c", code, str(path)], capture_output=True, text=True, check=True, timeout=60
    )
    assert "File too large" in done.stdout
    assert path.read_bytes() == b"old"
    assert _only(tmp_path) == ["file"]


def test_a_leftover_of_a_killed_process_does_not_matter(tmp_path: Path) -> None:
    path = tmp_path / "file"
    _temporary(path).write_bytes(b"half of a longer file")
    write_bytes(path, b"new")
    assert path.read_bytes() == b"new"
    assert _only(tmp_path) == ["file"]


def test_leftovers_are_swept_at_all_depths_and_nothing_else(tmp_path: Path) -> None:
    (tmp_path / "fields").mkdir()
    for name in ("run.h5", f"run.h5.77{UNFINISHED}", f"fields/field_000001.h5.78{UNFINISHED}"):
        (tmp_path / name).touch()
    sweep(tmp_path)
    assert _only(tmp_path) == ["fields", "run.h5"]
    assert _only(tmp_path / "fields") == []
