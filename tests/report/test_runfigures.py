"""The figures of a run folder: all of them, and a single snapshot, saved whole."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from matplotlib.figure import Figure

from rbsim.diagnostics.quantities import HISTORY, PROFILES, READINGS
from rbsim.errors import ConfigError, RunFolderError
from rbsim.files.fieldfile import Snapshot, write_snapshot
from rbsim.files.layout import create_run_folder
from rbsim.files.reader import RunRecords, open_run
from rbsim.files.runfile import RunFileWriter, Stream
from rbsim.report.runfigures import draw_run, draw_snapshot, save

HEIGHTS = np.linspace(0.05, 0.95, 10)


def _records(path: Path, thermometers: tuple[str, ...] = ("centre",), snapshots: int = 2) -> RunRecords:
    """Invented records of a run of 40 history samples."""
    rng = np.random.default_rng(5)
    folder = create_run_folder(path)
    folder.case.write_text("", encoding="utf-8")
    streams = [Stream("time", HISTORY), Stream("profile_time", PROFILES, across="z")]
    for name in thermometers:
        named = tuple(replace(q, name=f"{q.name}_{name}") for q in READINGS)
        streams.append(Stream(f"time_{name}", named, attributes={"x": 0.5, "z": 0.5}))
    writer = RunFileWriter(folder.run_file, streams)
    writer.create(HEIGHTS, {"rayleigh": 1e6, "prandtl": 1.0, "aspect_ratio": 2.0})
    for i in range(40):
        writer.append("time", 0.1 * i, 5.0 + rng.standard_normal(len(HISTORY)))
        for stream in streams[2:]:
            writer.append(stream.dimension, 0.1 * i, rng.random(3))
    writer.append("profile_time", 0.0, rng.random((len(PROFILES), HEIGHTS.size)))
    writer.flush()
    for i in range(snapshots):
        fields = rng.random((3, HEIGHTS.size, 8))
        write_snapshot(folder.field(i), Snapshot(10.0 * i, np.arange(8) / 4, HEIGHTS, *fields))
    return open_run(path)


@pytest.mark.parametrize("endings", [("centre",), ()])
def test_a_run_is_drawn_with_what_it_has(tmp_path: Path, endings: tuple[str, ...]) -> None:
    drawn = draw_run(_records(tmp_path / "run", endings, snapshots=len(endings)))
    wanted = {"nusselt_history.png", "profiles.png"}
    wanted |= {"thermometer_traces.png", "temperature.png"} if endings else set()
    assert {path.name for path in drawn} == wanted
    assert {path.name for path in (tmp_path / "run" / "figures").iterdir()} == wanted


@pytest.mark.parametrize(("time", "drawn"), [(None, 10.0), (0.0, 0.0), (4.0, 0.0), (7.0, 10.0)])
def test_the_closest_snapshot_is_drawn(tmp_path: Path, time: float | None, drawn: float) -> None:
    records = _records(tmp_path / "run")
    assert draw_snapshot(records, tmp_path / "field.png", time) == drawn
    assert (tmp_path / "field.png").read_bytes().startswith(b"\x89PNG")


def test_a_run_without_snapshots_says_how_to_get_some(tmp_path: Path) -> None:
    with pytest.raises(RunFolderError, match="field_interval"):
        draw_snapshot(_records(tmp_path / "run", snapshots=0), tmp_path / "field.png")


@pytest.mark.parametrize(("kind", "magic"), [("png", b"\x89PNG"), ("svg", b"<?xml"), ("pdf", b"%PDF")])
def test_figures_are_saved_in_the_format_of_their_ending(tmp_path: Path, kind: str, magic: bytes) -> None:
    first = save(_small_figure(), tmp_path / f"first.{kind}").read_bytes()
    second = save(_small_figure(), tmp_path / f"second.{kind.upper()}").read_bytes()
    assert first.startswith(magic)
    assert first == second
    assert len(list(tmp_path.iterdir())) == 2


def test_an_unknown_ending_is_refused(tmp_path: Path) -> None:
    with pytest.raises(ConfigError, match=r"\.png"):
        save(_small_figure(), tmp_path / "figure.bmp")


def test_a_place_that_cannot_be_written_is_named(tmp_path: Path) -> None:
    with pytest.raises(RunFolderError, match="cannot be written"):
        save(_small_figure(), tmp_path / "absent" / "figure.png")


def _small_figure() -> Figure:
    figure = Figure(figsize=(1, 1))
    figure.add_subplot().plot([0, 1], [0, 1])
    return figure
