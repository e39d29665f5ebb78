"""Records of a run as arrays, also while another process writes or is killed while it writes."""

from __future__ import annotations

import random
import signal
import subprocess
import sys
import time
from dataclasses import replace
from pathlib import Path

import h5py
import numpy as np
import pytest

from rbsim.diagnostics.quantities import HISTORY, PROFILES, READINGS
from rbsim.errors import RunFolderError
from rbsim.files.checkpoint import read_newest
from rbsim.files.layout import RunFolder, open_run_folder
from rbsim.files.lock import locked
from rbsim.files.reader import open_run
from rbsim.files.runfile import RunFileWriter, Stream

HEIGHTS = np.linspace(0.1, 0.9, 5)


def _streams(*names: str) -> list[Stream]:
    streams = [Stream("time", HISTORY), Stream("profile_time", PROFILES, across="z")]
    for i, name in enumerate(names):
        named = tuple(replace(q, name=f"{q.name}_{name}") for q in READINGS)
        streams.append(Stream(f"time_{name}", named, attributes={"x": 0.5 + i, "z": 0.25}))
    return streams


def test_records_come_back_under_their_names_in_the_order_of_the_case(folder: RunFolder) -> None:
    writer = RunFileWriter(folder.run_file, _streams("wind", "bottom"))
    writer.create(HEIGHTS, {"rayleigh": 1e5})
    writer.append("time", 0.0, np.arange(len(HISTORY)))
    writer.append("profile_time", 0.5, np.arange(5 * len(PROFILES)).reshape(len(PROFILES), 5))
    writer.append("time_bottom", 0.25, [0.5, 0.1, -0.1])
    writer.flush()
    records = open_run(folder.path)
    assert records.attributes["rayleigh"] == 1e5
    assert {name: values.tolist() for name, values in records.history.items()} == {
        "time": [0.0],
        **{quantity.name: [i] for i, quantity in enumerate(HISTORY)},
    }
    assert records.profiles["time"].tolist() == [0.5]
    np.testing.assert_array_equal(records.profiles["z"], HEIGHTS)
    np.testing.assert_array_equal(records.profiles["nusselt_profile"], [np.arange(5, 10)])
    assert list(records.thermometers) == ["wind", "bottom"]
    bottom = records.thermometers["bottom"]
    assert (bottom.x, bottom.z, bottom.time.tolist()) == (1.5, 0.25, [0.25])
    assert (bottom.temperature, bottom.horizontal_velocity, bottom.vertical_velocity) == (0.5, 0.1, -0.1)
    assert records.thermometers["wind"].time.size == 0


def test_a_run_that_lacks_a_record_is_damaged(folder: RunFolder) -> None:
    RunFileWriter(folder.run_file, _streams("a")).create(HEIGHTS, {})
    with h5py.File(folder.run_file, "r+") as file:
        del file["reynolds"]
    with pytest.raises(RunFolderError, match=r"run\.h5: damaged.*reynolds"):
        open_run(folder.path)


def test_a_run_whose_file_is_not_there_yet_is_named(folder: RunFolder) -> None:
    with pytest.raises(RunFolderError, match=r"run\.h5: no such file"):
        open_run(folder.path)


#: Writes rows and checkpoints as fast as it can, up to a number of steps.
WRITER = """
import sys
from pathlib import Path
import numpy as np
from rbsim.diagnostics.quantities import HISTORY, PROFILES
from rbsim.files.checkpoint import Checkpoint, read_newest, write_checkpoint
from rbsim.files.layout import open_run_folder
from rbsim.files.lock import locked
from rbsim.files.runfile import RunFileWriter, Stream

folder, end = open_run_folder(sys.argv[1]), int(sys.argv[2])
with locked(folder):
    open_run_folder(folder.path, for_writing=True)
    streams = [Stream("time", HISTORY), Stream("profile_time", PROFILES, across="z")]
    writer, step = RunFileWriter(folder.run_file, streams), 0
    if folder.checkpoint_files():
        checkpoint, _, _ = read_newest(folder)
        step = checkpoint.facts["steps"]
        assert (checkpoint.theta == step).all()
        writer.resume(checkpoint.counts)
    else:
        writer.create(np.linspace(0.1, 0.9, 5), {})
        write_checkpoint(folder, 0, Checkpoint(np.zeros((9, 9), complex), np.zeros((9, 9), complex),
                                               {"steps": 0}, writer.counts()))
    print("writing", flush=True)
    while step < end:
        step += 1
        writer.append("time", float(step), np.full(len(HISTORY), 2.0 * step))
        writer.append("profile_time", float(step), np.full((len(PROFILES), 5), 3.0 * step))
        if step % 3 == 0:
            writer.flush()
        if step % 4 == 0 or step == end:
            writer.flush()
            state = np.full((9, 9), step, complex)
            write_checkpoint(folder, step, Checkpoint(state, state, {"steps": step}, writer.counts()))
"""


def _start_writer(folder: RunFolder, end: int) -> subprocess.Popen[str]:
    command = [sys.executable, "-c", WRITER, str(folder.path), str(end)]
    process = subprocess.Popen(command, stdout=subprocess.PIPE, text=True)
    assert process.stdout is not None
    assert process.stdout.readline() == "writing\n"
    return process


def _check_whole(path: Path) -> int:
    """Check that every row is complete and none is missing; return their number."""
    records = open_run(path)
    steps = np.arange(1.0, records.history["time"].size + 1)
    np.testing.assert_array_equal(records.history["time"], steps)
    assert all((values == 2.0 * steps).all() for name, values in records.history.items() if name != "time")
    heights = np.broadcast_to(3.0 * steps[:, None], (steps.size, 5))
    np.testing.assert_array_equal(records.profiles["temperature_profile"], heights)
    return steps.size


def test_reading_never_fails_while_another_process_writes(folder: RunFolder) -> None:
    writer = _start_writer(folder, 1_000_000)
    seen: list[int] = []
    while len(set(seen)) < 12:
        assert writer.poll() is None
        seen.append(_check_whole(folder.path))
    writer.kill()
    writer.communicate()
    assert seen == sorted(seen)


def test_a_writer_killed_at_any_moment_goes_on_without_loss(folder: RunFolder) -> None:
    """Unfinished files are swept, rows beyond the checkpoint cut, nothing doubled or lost."""
    generator = random.Random(11)
    for _ in range(6):
        writer = _start_writer(folder, 100_000)
        time.sleep(generator.uniform(0.0, 0.15))
        writer.send_signal(signal.SIGKILL)
        writer.communicate()
        _check_whole(folder.path)
        assert (read_newest(folder)[0].theta == read_newest(folder)[0].facts["steps"]).all()
    end = read_newest(folder)[0].facts["steps"] + 7
    assert _start_writer(folder, end).wait(timeout=60) == 0
    assert _check_whole(folder.path) == end
    with locked(folder):
        open_run_folder(folder.path, for_writing=True)
    left = {entry.name for entry in folder.path.rglob("*") if entry.is_file()}
    assert left == {"case.toml", "run.h5", *(path.name for path in folder.checkpoint_files())}
    assert len(folder.checkpoint_files()) == 2
