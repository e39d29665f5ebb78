"""The run file holds what was appended, whenever it was flushed, and is whole at every moment."""

from __future__ import annotations

import errno
import os
from pathlib import Path

import h5py
import numpy as np
import pytest
import xarray
from hypothesis import given, settings
from hypothesis import strategies as st

from rbsim.diagnostics.quantities import HISTORY, PROFILES, READINGS
from rbsim.errors import ConfigError, RunFolderError
from rbsim.files.layout import RunFolder
from rbsim.files.runfile import RunFileWriter, Stream, read_run_file

STREAMS = [
    Stream("time", HISTORY[:2]),
    Stream("profile_time", PROFILES[:2], across="z"),
    Stream("time_a", READINGS, attributes={"x": 0.5, "z": 0.25}),
]
HEIGHTS = np.linspace(0.1, 0.9, 5)


def _writer(path: Path) -> RunFileWriter:
    writer = RunFileWriter(path, STREAMS)
    writer.create(HEIGHTS, {"rayleigh": 1e5, "case": "title = 'Γ'\n"})
    return writer


def _stored(path: Path, dimension: str) -> int:
    return read_run_file(path)[0][dimension].size


class TestContent:
    @pytest.mark.parametrize("engine", [None, "h5netcdf"])
    def test_opens_in_xarray_with_dimensions_coordinates_and_units(
        self, tmp_path: Path, engine: str | None
    ) -> None:
        writer = _writer(tmp_path / "run.h5")
        writer.append("time", 0.0, [1.0, 1.5])
        writer.append("time", 0.1, [2.0, 2.5])
        writer.append("profile_time", 0.0, [HEIGHTS**2, HEIGHTS])
        writer.append("time_a", 0.05, [0.5, 0.1, -0.1])
        writer.flush()
        with xarray.open_dataset(tmp_path / "run.h5", engine=engine) as data:
            assert dict(data.sizes) == {"time": 2, "profile_time": 1, "z": 5, "time_a": 1}
            assert set(data.coords) == {"time", "profile_time", "z", "time_a"}
            np.testing.assert_array_equal(data["nusselt_top"].sel(time=0.1), 2.5)
            np.testing.assert_array_equal(data["z"], HEIGHTS)
            for coordinate in ("time", "profile_time", "time_a"):
                assert data[coordinate].attrs["units"] == "free-fall time"
            assert data["z"].attrs["units"] == "H"
            assert data["temperature_profile"].dims == ("profile_time", "z")
            for quantity in (*HISTORY[:2], *PROFILES[:2]):
                assert data[quantity.name].attrs["units"] == quantity.unit
                assert data[quantity.name].attrs["long_name"] == quantity.meaning
            assert (data["temperature"].attrs["x"], data["temperature"].attrs["z"]) == (0.5, 0.25)
            assert data.attrs["rayleigh"] == 1e5
            assert data.attrs["case"] == "title = 'Γ'\n"
            assert {"program_version", "libraries", "platform", "created", "format"} <= set(data.attrs)

    def test_an_empty_file_opens_too(self, tmp_path: Path) -> None:
        _writer(tmp_path / "run.h5")
        with xarray.open_dataset(tmp_path / "run.h5") as data:
            assert dict(data.sizes) == {"time": 0, "profile_time": 0, "z": 5, "time_a": 0}

    def test_a_very_long_case_fits(self, tmp_path: Path) -> None:
        text = "# a comment\n" * 20_000
        RunFileWriter(tmp_path / "run.h5", STREAMS).create(HEIGHTS, {"case": text})
        assert read_run_file(tmp_path / "run.h5")[1]["case"] == text

    def test_rows_are_copied_when_they_are_appended(self, tmp_path: Path) -> None:
        writer, row, profile = _writer(tmp_path / "run.h5"), np.ones(2), np.ones((2, 5))
        writer.append("time", 0.0, row)
        writer.append("profile_time", 0.0, profile)
        row[:], profile[:] = 7.0, 7.0
        writer.flush()
        arrays, _, _ = read_run_file(tmp_path / "run.h5")
        assert arrays["nusselt_top"].tolist() == [1.0]
        assert arrays["nusselt_profile"].tolist() == [[1.0] * 5]

    def test_a_row_of_the_wrong_length_is_a_mistake_of_the_caller(self, tmp_path: Path) -> None:
        writer = _writer(tmp_path / "run.h5")
        with pytest.raises(ValueError, match="2 quantities"):
            writer.append("time", 0.0, [1.0])

    @pytest.mark.parametrize("name", ["mean", "profile", "rms_profile"])
    def test_a_thermometer_whose_records_are_called_like_others_is_refused(
        self, tmp_path: Path, name: str
    ) -> None:
        readings = tuple(type(q)(f"{q.name}_{name}", q.symbol, q.unit, q.meaning) for q in READINGS)
        streams = [
            Stream("time", HISTORY),
            Stream("profile_time", PROFILES, across="z"),
            Stream(f"time_{name}", readings),
        ]
        with pytest.raises(ConfigError, match=rf"temperature_{name}'.*thermometer"):
            RunFileWriter(tmp_path / "run.h5", streams)


ACTIONS = st.lists(st.sampled_from(["row", "profile", "reading", "flush"]), max_size=40)


class TestFlushing:
    @settings(max_examples=30, deadline=None)
    @given(actions=ACTIONS, data=st.data())
    def test_content_depends_on_rows_alone_and_can_be_cut_and_continued(
        self, tmp_path_factory: pytest.TempPathFactory, actions: list[str], data: st.DataObject
    ) -> None:
        path = tmp_path_factory.mktemp("run") / "run.h5"
        writer, expected = _writer(path), _Expected()
        for i, action in enumerate(actions):
            if action == "flush":
                writer.flush()
            else:
                writer.append(*expected.add(action, i))
            assert writer.counts() == expected.counts()
        writer.flush()
        expected.check(path)
        kept = {name: data.draw(st.integers(0, count)) for name, count in expected.counts().items()}
        resumed = RunFileWriter(path, STREAMS)
        resumed.resume(kept)
        expected.cut(kept)
        expected.check(path)
        assert resumed.counts() == kept
        for i, action in enumerate(("row", "profile", "reading")):
            resumed.append(*expected.add(action, 100 + i))
        resumed.flush()
        expected.check(path)

    def test_many_rows_span_chunks_and_buffers(self, tmp_path: Path) -> None:
        writer, rng = _writer(tmp_path / "run.h5"), np.random.default_rng(7)
        values = rng.standard_normal((5000, 2))
        for i, row in enumerate(values):
            writer.append("time", float(i), row)
            if i in (3, 1500, 1501):
                writer.flush()
        writer.flush()
        arrays, _, _ = read_run_file(tmp_path / "run.h5")
        np.testing.assert_array_equal(np.stack([arrays["nusselt_bottom"], arrays["nusselt_top"]], 1), values)

    def test_the_same_rows_and_flushes_give_the_same_bytes(self, tmp_path: Path) -> None:
        contents = []
        for name in ("one.h5", "two.h5"):
            writer = _writer(tmp_path / name)
            writer.append("time", 0.0, [1.0, 2.0])
            writer.flush()
            with h5py.File(tmp_path / name, "r+") as file:
                file.attrs["created"] = "always"
            contents.append((tmp_path / name).read_bytes())
        assert contents[0] == contents[1]

    def test_nothing_to_flush_leaves_the_file_untouched(self, tmp_path: Path) -> None:
        writer = _writer(tmp_path / "run.h5")
        before = (tmp_path / "run.h5").stat()
        writer.flush()
        assert os.path.samestat(before, (tmp_path / "run.h5").stat())

    def test_a_full_disk_leaves_the_file_and_the_waiting_rows(
        self, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
    ) -> None:
        path = tmp_path / "run.h5"
        writer = _writer(path)
        writer.append("time", 0.0, [1.0, 1.5])
        writer.flush()
        before = path.read_bytes()
        writer.append("time", 0.1, [2.0, 2.5])

        def full(_: int) -> None:
            raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

        monkeypatch.setattr(os, "fsync", full)
        with pytest.raises(RunFolderError, match=r"No space left.*resume"):
            writer.flush()
        monkeypatch.undo()
        assert path.read_bytes() == before
        assert [entry.name for entry in tmp_path.iterdir()] == ["run.h5"]
        assert writer.counts()["time"] == 2
        writer.flush()  # there is room again: nothing was lost
        assert read_run_file(path)[0]["time"].tolist() == [0.0, 0.1]


class TestResuming:
    def test_a_file_with_fewer_rows_than_the_checkpoint_knows_is_refused(self, tmp_path: Path) -> None:
        """Growing it would invent zeros."""
        writer = _writer(tmp_path / "run.h5")
        writer.append("time", 0.0, [1.0, 2.0])
        writer.flush()
        with pytest.raises(RunFolderError, match=r"holds 1 rows along time, the checkpoint knows 2"):
            writer.resume({"time": 2, "profile_time": 0, "time_a": 0})
        assert _stored(tmp_path / "run.h5", "time") == 1

    @pytest.mark.parametrize("counts", [{"time": 0}, {"time": 0, "profile_time": 0, "time_b": 0}])
    def test_another_case_is_refused(self, tmp_path: Path, counts: dict[str, int]) -> None:
        writer = _writer(tmp_path / "run.h5")
        with pytest.raises(RunFolderError, match=r"case\.toml"):
            writer.resume(counts)

    def test_a_missing_or_damaged_file_is_refused(self, tmp_path: Path) -> None:
        writer = RunFileWriter(tmp_path / "run.h5", STREAMS)
        with pytest.raises(RunFolderError, match="no such file"):
            writer.resume({"time": 0, "profile_time": 0, "time_a": 0})
        (tmp_path / "run.h5").write_bytes(b"\x89HDF\r\n\x1a\n")
        with pytest.raises(RunFolderError, match="damaged"):
            writer.resume({"time": 0, "profile_time": 0, "time_a": 0})

    def test_rows_that_wait_are_forgotten(self, folder: RunFolder) -> None:
        writer = _writer(folder.run_file)
        writer.append("time", 0.0, [1.0, 2.0])
        writer.resume({"time": 0, "profile_time": 0, "time_a": 0})
        writer.flush()
        assert _stored(folder.run_file, "time") == 0


class _Expected:
    """The rows of a run file as plain lists."""

    def __init__(self) -> None:
        self._rows: dict[str, list[tuple[float, np.ndarray]]] = {stream.dimension: [] for stream in STREAMS}

    def add(self, action: str, i: int) -> tuple[str, float, np.ndarray]:
        dimension = {"row": "time", "profile": "profile_time", "reading": "time_a"}[action]
        values = {
            "row": np.array([i / 3, -i / 7]),
            "profile": np.array([HEIGHTS + i, HEIGHTS / (i + 1)]),
            "reading": np.array([i / 9, np.nan, -0.0]),
        }[action]
        self._rows[dimension].append((0.1 * i, values))
        return dimension, 0.1 * i, values

    def counts(self) -> dict[str, int]:
        return {name: len(rows) for name, rows in self._rows.items()}

    def cut(self, counts: dict[str, int]) -> None:
        self._rows = {name: rows[: counts[name]] for name, rows in self._rows.items()}

    def check(self, path: Path) -> None:
        arrays, _, _ = read_run_file(path)
        for stream in STREAMS:
            rows = self._rows[stream.dimension]
            assert arrays[stream.dimension].tolist() == [time for time, _ in rows]
            for i, quantity in enumerate(stream.quantities):
                column = np.array([values[i] for _, values in rows])
                assert arrays[quantity.name].tobytes() == column.tobytes()
