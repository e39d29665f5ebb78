"""HDF5 files: told apart, named when damaged, composed off the disk."""

from __future__ import annotations

import subprocess
import sys
from io import BytesIO
from pathlib import Path

import h5py
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rbsim.diagnostics.quantities import HISTORY, PROFILES
from rbsim.errors import RunFolderError
from rbsim.files.runfile import RunFileWriter, Stream, read_run_file

STREAMS = [Stream("time", HISTORY[:2]), Stream("profile_time", PROFILES[:1], across="z")]


@pytest.fixture(scope="module")
def small(tmp_path_factory: pytest.TempPathFactory) -> bytes:
    """Return the content of a small run file."""
    path = tmp_path_factory.mktemp("run") / "run.h5"
    writer = RunFileWriter(path, STREAMS)
    writer.create(np.linspace(0.1, 0.9, 5), {})
    for i in range(4):
        writer.append("time", 0.1 * i, [i / 3, -i / 7])
        writer.append("profile_time", 0.1 * i, [np.arange(5) / (i + 3)])
    writer.flush()
    return path.read_bytes()


def test_a_missing_file_and_one_of_another_kind_are_named(tmp_path: Path) -> None:
    path = tmp_path / "run.h5"
    with pytest.raises(RunFolderError, match=r"run\.h5: no such file"):
        read_run_file(path)
    path.write_bytes(b"not HDF5")
    with pytest.raises(RunFolderError, match=r"run\.h5: damaged or not a file of an rbsim run"):
        read_run_file(path)
    with h5py.File(path, "w") as file:
        file["time"] = np.arange(3)
    with pytest.raises(RunFolderError, match="not a file of an rbsim run"):
        read_run_file(path)


@settings(max_examples=60, deadline=None)
@given(share=st.floats(0.0, 0.999))
def test_a_truncated_file_is_never_misread(
    tmp_path_factory: pytest.TempPathFactory, small: bytes, share: float
) -> None:
    path = tmp_path_factory.mktemp("run") / "run.h5"
    path.write_bytes(small[: int(share * len(small))])
    with pytest.raises(RunFolderError, match=str(path)):
        read_run_file(path)


@settings(max_examples=100, deadline=None)
@given(
    name=st.sampled_from(["time", "nusselt_top", "temperature_profile"]),
    place=st.floats(0.0, 1.0, exclude_max=True),
    bit=st.integers(0, 7),
)
def test_a_flipped_bit_among_the_numbers_is_noticed(
    tmp_path_factory: pytest.TempPathFactory, small: bytes, name: str, place: float, bit: int
) -> None:
    """Chunks carry a checksum: records come back as they were, or not at all."""
    path = tmp_path_factory.mktemp("run") / "run.h5"
    with h5py.File(BytesIO(small)) as file:
        chunk = file[name].id.get_chunk_info(0)
    content = bytearray(small)
    content[chunk.byte_offset + int(place * chunk.size)] ^= 1 << bit
    path.write_bytes(content)
    with pytest.raises(RunFolderError, match="damaged"):
        read_run_file(path)


#: Writes what does not fit a limit that the system sets on the size of files.
OVERFLOWING = """
import resource, sys
from pathlib import Path
import numpy as np
from rbsim.diagnostics.quantities import HISTORY
from rbsim.errors import RunFolderError
from rbsim.files.checkpoint import Checkpoint, read_newest, write_checkpoint
from rbsim.files.fieldfile import Snapshot, write_snapshot
from rbsim.files.layout import create_run_folder
from rbsim.files.runfile import RunFileWriter, Stream, read_run_file

folder = create_run_folder(sys.argv[1])
writer = RunFileWriter(folder.run_file, [Stream("time", HISTORY)])
writer.create(np.arange(4.0), {})
small, big, z = np.ones((50, 50), complex), np.ones((300, 300)), np.arange(300.0)
write_checkpoint(folder, 1, Checkpoint(small, small, {"time": 1.0}, {"time": 0}))
resource.setrlimit(resource.RLIMIT_FSIZE, (400_000, 400_000))
for i in range(6000):
    writer.append("time", float(i), np.full(len(HISTORY), float(i)))
for write in (
    writer.flush,
    lambda: write_checkpoint(folder, 2, Checkpoint(big + 0j, big + 0j, {}, {})),
    lambda: write_snapshot(folder.field(0), Snapshot(0.0, z, z, big, big, big)),
):
    try:
        write()
    except RunFolderError as error:
        print(error)
print(writer.counts()["time"], read_run_file(folder.run_file)[0]["time"].size)
print(read_newest(folder)[1].name)
print(*sorted(path.name for path in folder.path.rglob("*") if path.is_file()))
"""


def test_files_that_do_not_fit_lose_nothing_and_crash_nothing(tmp_path: Path) -> None:
    """The HDF5 library itself may crash at exit after such an event, so a whole process is watched."""
    command = [sys.executable, "-c", OVERFLOWING, str(tmp_path / "run")]
    done = subprocess.run(command, capture_output=True, text=True, timeout=60, check=False)
    assert (done.returncode, done.stderr) == (0, "")
    *refusals, counts, newest, files = done.stdout.splitlines()
    assert len(refusals) == 3
    assert all("File too large" in line and "earlier data is intact" in line for line in refusals)
    assert counts == "6000 0"
    assert newest == "checkpoint_000000001.h5"
    assert files == "checkpoint_000000001.h5 run.h5"
