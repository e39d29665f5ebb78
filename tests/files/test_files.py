"""Files are complete or absent, read back bit for bit, and say plainly when they cannot be used."""

from __future__ import annotations

import errno
import os
import subprocess
import sys
from pathlib import Path

import h5py
import numpy as np
import pytest
import xarray
from hypothesis import given, settings
from hypothesis import strategies as st

from rbsim.diagnostics.quantities import HISTORY, PROFILES, READINGS
from rbsim.errors import RunFolderError
from rbsim.files import atomic
from rbsim.files.checkpoint import Checkpoint, read_checkpoint, read_newest, write_checkpoint
from rbsim.files.fieldfile import Snapshot, read_snapshot, write_snapshot
from rbsim.files.layout import RunFolder, create_run_folder, open_run_folder
from rbsim.files.lock import locked
from rbsim.files.runfile import RunFileWriter, Stream, read_run_file

STREAMS = [
    Stream("time", HISTORY[:2]),
    Stream("profile_time", PROFILES[:1], across="z"),
    Stream("time_a", READINGS, attributes={"x": 0.5, "z": 0.25}),
]
HEIGHTS = np.linspace(0.1, 0.9, 5)


def _folder(path: Path) -> RunFolder:
    folder = create_run_folder(path / "run")
    folder.case.write_text("", encoding="utf-8")
    return folder


def _writer(folder: RunFolder) -> RunFileWriter:
    writer = RunFileWriter(folder.run_file, STREAMS)
    writer.create(HEIGHTS, {"rayleigh": 1e5})
    return writer


def _checkpoint(seed: int, step: int) -> Checkpoint:
    rng = np.random.default_rng(seed)
    theta = rng.standard_normal((9, 6)) + 1j * rng.standard_normal((9, 6))
    facts = {"time": 0.1 * step, "steps": step, "bottom": "no-slip", "stride_step": 1 / 3}
    return Checkpoint(theta, theta[:-2] * 1e-300, facts, {"time": step, "snapshots": 2})


def _same(a: Checkpoint, b: Checkpoint) -> bool:
    arrays = a.theta.tobytes() == b.theta.tobytes() and a.psi.tobytes() == b.psi.tobytes()
    return arrays and a.facts == b.facts and a.counts == b.counts


class TestRunFile:
    def test_opens_in_xarray_with_dimensions_coordinates_and_units(self, tmp_path: Path) -> None:
        folder = _folder(tmp_path)
        writer = _writer(folder)
        writer.append("time", 0.0, [1.0, 1.5])
        writer.append("time", 0.1, [2.0, 2.5])
        writer.append("profile_time", 0.0, [HEIGHTS**2])
        writer.append("time_a", 0.05, [0.5, 0.1, -0.1])
        writer.flush()
        with xarray.open_dataset(folder.run_file, engine="h5netcdf") as data:
            assert dict(data.sizes) == {"time": 2, "profile_time": 1, "z": 5, "time_a": 1}
            np.testing.assert_array_equal(data["nusselt_top"].sel(time=0.1), 2.5)
            assert data["time"].attrs["units"] == "free-fall time"
            assert data["z"].attrs["units"] == "H"
            assert data["temperature_profile"].dims == ("profile_time", "z")
            for quantity in (*HISTORY[:2], *PROFILES[:1]):
                assert data[quantity.name].attrs["units"] == quantity.unit
                assert data[quantity.name].attrs["long_name"] == quantity.meaning
            assert data.attrs["rayleigh"] == 1e5
            assert {"program_version", "platform", "created"} <= set(data.attrs)

    @settings(max_examples=20, deadline=None)
    @given(st.lists(st.sampled_from(["row", "profile", "flush"]), max_size=25), st.integers(0, 3))
    def test_content_does_not_depend_on_flushes_and_can_be_cut(
        self, tmp_path_factory: pytest.TempPathFactory, actions: list[str], kept: int
    ) -> None:
        folder = _folder(tmp_path_factory.mktemp("run"))
        writer, rows, profiles = _writer(folder), [], []
        for i, action in enumerate(actions):
            if action == "flush":
                writer.flush()
            elif action == "row":
                rows.append((0.1 * i, [i / 3, -i / 7]))
                writer.append("time", *rows[-1])
            else:
                profiles.append((0.1 * i, [HEIGHTS + i]))
                writer.append("profile_time", *profiles[-1])
        assert writer.counts() == {"time": len(rows), "profile_time": len(profiles), "time_a": 0}
        writer.flush()
        arrays, _, _ = read_run_file(folder.run_file)
        np.testing.assert_array_equal(arrays["time"], [t for t, _ in rows])
        np.testing.assert_array_equal(arrays["nusselt_top"], [v[1] for _, v in rows])
        np.testing.assert_array_equal(
            arrays["temperature_profile"].reshape(-1, 5), [v[0] for _, v in profiles] or np.empty((0, 5))
        )
        kept = min(kept, len(rows))
        resumed = RunFileWriter(folder.run_file, STREAMS)
        resumed.resume({"time": kept, "profile_time": 0, "time_a": 0})
        resumed.append("time", 99.0, [7.0, 8.0])
        resumed.flush()
        arrays, _, _ = read_run_file(folder.run_file)
        np.testing.assert_array_equal(arrays["time"], [*(t for t, _ in rows[:kept]), 99.0])

    def test_a_failing_disk_leaves_the_file_as_it_was(
        self, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
    ) -> None:
        folder = _folder(tmp_path)
        writer = _writer(folder)
        writer.append("time", 0.0, [1.0, 1.5])
        writer.flush()
        before = folder.run_file.read_bytes()
        writer.append("time", 0.1, [2.0, 2.5])

        def full(_: Path) -> None:
            raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

        monkeypatch.setattr(atomic, "_sync", full)
        with pytest.raises(RunFolderError, match=r"No space left.*resume"):
            writer.flush()
        monkeypatch.undo()
        assert folder.run_file.read_bytes() == before
        assert not list(folder.path.glob(f"*{atomic.UNFINISHED}"))
        writer.flush()  # there is room again: nothing was lost
        assert read_run_file(folder.run_file)[0]["time"].tolist() == [0.0, 0.1]

    def test_a_reader_of_another_process_never_fails_while_rows_are_appended(self, tmp_path: Path) -> None:
        folder = _folder(tmp_path)
        writer = _writer(folder)
        code = (
            "import sys, pathlib\n"
            "from rbsim.files.runfile import read_run_file\n"
            "path, stop, polls = pathlib.Path(sys.argv[1]), pathlib.Path(sys.argv[2]), 0\n"
            "while not stop.exists() or polls < 3:\n"
            "    arrays = read_run_file(path)[0]\n"
            "    assert (arrays['nusselt_top'] == 2 * arrays['time']).all()\n"
            "    polls += 1\n"
            "print(polls)\n"
        )
        sentinel = tmp_path / "stop"
        reader = subprocess.Popen(
            [sys.executable, "-c", code, str(folder.run_file), str(sentinel)],
            stdout=subprocess.PIPE,
            text=True,
        )
        for i in range(150):
            writer.append("time", float(i), [0.0, 2.0 * i])
            writer.flush()
        sentinel.touch()
        out, _ = reader.communicate(timeout=60)
        assert reader.returncode == 0
        assert int(out) >= 3

    @pytest.mark.parametrize(
        ("key", "value", "words"),
        [
            ("format_version", 2, "newer"),
            ("format_version", 0, "older"),
            ("format", "else", "not a file of an rbsim run"),
        ],
    )
    def test_other_formats_are_told_apart(self, tmp_path: Path, key: str, value: object, words: str) -> None:
        folder = _folder(tmp_path)
        _writer(folder)
        with h5py.File(folder.run_file, "r+") as file:
            file.attrs[key] = value
        with pytest.raises(RunFolderError, match=words):
            read_run_file(folder.run_file)

    def test_missing_and_damaged_files_are_named(self, tmp_path: Path) -> None:
        with pytest.raises(RunFolderError, match="no such file"):
            read_run_file(tmp_path / "run.h5")
        (tmp_path / "run.h5").write_bytes(b"not HDF5")
        with pytest.raises(RunFolderError, match="damaged"):
            read_run_file(tmp_path / "run.h5")


class TestCheckpoint:
    def test_comes_back_bit_for_bit_and_the_last_two_stay(self, tmp_path: Path) -> None:
        folder = _folder(tmp_path)
        for step in (5, 10, 100):
            write_checkpoint(folder, step, _checkpoint(step, step))
        assert [p.name for p in folder.checkpoint_files()] == [
            "checkpoint_000000100.h5",
            "checkpoint_000000010.h5",
        ]
        newest, path, notices = read_newest(folder)
        assert _same(newest, _checkpoint(100, 100))
        assert path == folder.checkpoint(100)
        assert notices == ()

    @pytest.mark.parametrize("damage", ["truncated", "flipped", "emptied"])
    def test_a_damaged_one_is_noticed_and_the_previous_one_used(self, tmp_path: Path, damage: str) -> None:
        folder = _folder(tmp_path)
        for step in (5, 10):
            write_checkpoint(folder, step, _checkpoint(step, step))
        newest = folder.checkpoint(10)
        content = bytearray(newest.read_bytes())
        if damage == "flipped":
            place = content.find(_checkpoint(10, 10).theta[3].tobytes())
            content[place + 7] ^= 0x10
        newest.write_bytes({"truncated": content[: len(content) // 2], "emptied": b""}.get(damage, content))
        checkpoint, path, notices = read_newest(folder)
        assert path == folder.checkpoint(5)
        assert _same(checkpoint, _checkpoint(5, 5))
        assert len(notices) == 1
        assert str(newest) in notices[0]
        assert "damaged" in notices[0]

    def test_nothing_to_resume_from_is_said(self, tmp_path: Path) -> None:
        with pytest.raises(RunFolderError, match="no checkpoint was written yet"):
            read_newest(_folder(tmp_path))

    @settings(max_examples=40, deadline=None)
    @given(data=st.binary(max_size=300), place=st.integers(0, 4000))
    def test_any_damage_is_an_error_of_ours_or_harmless(
        self, tmp_path_factory: pytest.TempPathFactory, data: bytes, place: int
    ) -> None:
        folder = _folder(tmp_path_factory.mktemp("run"))
        truth = _checkpoint(1, 5)
        path = write_checkpoint(folder, 5, truth)
        content = path.read_bytes()
        path.write_bytes(content[:place] + data + content[place + len(data) :])
        try:
            found = read_checkpoint(path)
        except RunFolderError:
            return
        assert _same(found, truth)


class TestFolder:
    def test_a_folder_in_use_is_refused_with_advice(self, tmp_path: Path) -> None:
        folder = _folder(tmp_path)
        with pytest.raises(RunFolderError, match="rbsim resume"):
            create_run_folder(folder.path)
        (tmp_path / "other").mkdir()
        (tmp_path / "other" / "thing").touch()
        with pytest.raises(RunFolderError, match="not empty"):
            create_run_folder(tmp_path / "other")
        with pytest.raises(RunFolderError, match="no such run folder"):
            open_run_folder(tmp_path / "absent")
        with pytest.raises(RunFolderError, match="not a run folder"):
            open_run_folder(tmp_path / "other")

    def test_leftovers_of_killed_writers_are_swept(self, tmp_path: Path) -> None:
        folder = _folder(tmp_path)
        leftover = folder.fields / f"field_000001.h5.77{atomic.UNFINISHED}"
        leftover.touch()
        open_run_folder(folder.path)
        assert leftover.exists()
        open_run_folder(folder.path, for_writing=True)
        assert not leftover.exists()

    def test_snapshots_come_back_and_open_in_xarray(self, tmp_path: Path) -> None:
        rng = np.random.default_rng(3)
        fields = [rng.standard_normal((5, 8)) for _ in range(3)]
        snapshot = Snapshot(2.5, np.arange(8) / 4, HEIGHTS, *fields)
        write_snapshot(tmp_path / "field.h5", snapshot)
        back = read_snapshot(tmp_path / "field.h5")
        assert back.time == 2.5
        np.testing.assert_array_equal(back.vertical_velocity, fields[2])
        with xarray.open_dataset(tmp_path / "field.h5", engine="h5netcdf") as data:
            assert data["temperature"].dims == ("z", "x")
            assert data["horizontal_velocity"].attrs["units"] == "free-fall velocity"


class TestLock:
    def test_a_second_process_is_told_who_holds_the_lock(self, tmp_path: Path) -> None:
        folder = _folder(tmp_path)
        code = (
            "import sys\nfrom pathlib import Path\nfrom rbsim.files.layout import RunFolder\n"
            "from rbsim.files.lock import locked\n"
            "with locked(RunFolder(Path(sys.argv[1]))):\n    print('held', flush=True)\n    sys.stdin.read()\n"
        )
        command = [sys.executable, "-c", code, str(folder.path)]
        holder = subprocess.Popen(command, stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True)
        assert holder.stdout is not None
        assert holder.stdout.readline() == "held\n"
        with pytest.raises(RunFolderError, match=f"process {holder.pid}"), locked(folder):
            pass
        holder.kill()
        holder.communicate()
        with locked(folder):  # the lock of a dead process is taken over
            assert folder.lock.exists()
        assert not folder.lock.exists()

    @pytest.mark.parametrize("text", ["", "{", '{"host": 1}', "[]"])
    def test_a_half_written_lock_is_taken_over(self, tmp_path: Path, text: str) -> None:
        folder = _folder(tmp_path)
        folder.lock.write_text(text, encoding="utf-8")
        with locked(folder):
            pass

    def test_a_lock_of_another_host_is_respected(self, tmp_path: Path) -> None:
        folder = _folder(tmp_path)
        folder.lock.write_text('{"host": "elsewhere", "pid": 1, "started": "1"}', encoding="utf-8")
        with pytest.raises(RunFolderError, match="host elsewhere"), locked(folder):
            pass
