"""Runs: recorded exactly when due, resumed bit for bit, stopped and broken without loss."""

from __future__ import annotations

import random
import signal
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest

from rbsim.config.loading import build_case
from rbsim.config.schema import Case
from rbsim.config.writing import case_to_toml
from rbsim.diagnostics.quantities import HISTORY
from rbsim.errors import ConfigError, DivergedError, InterruptedRunError, RunFolderError
from rbsim.files.fieldfile import read_snapshot
from rbsim.files.layout import RunFolder, create_run_folder
from rbsim.files.reader import RunRecords, open_run
from rbsim.files.runfile import read_run_file
from rbsim.simulation.loop import RunOptions
from rbsim.simulation.running import resume, simulate

OPTIONS = RunOptions(threads=1, library="scipy.fft")


def small_case(end: float = 3.0, **sections: object) -> Case:
    sections.setdefault("output", {"history_interval": 0.1, "profile_interval": 0.5, "field_interval": 1.0})
    sections.setdefault("grid", {"nx": 32, "nz": 24})
    sections.setdefault("start", {"kind": "noise", "amplitude": 0.1, "seed": 3})
    case = build_case(rayleigh=1e5, end=end, **sections)
    case = case.with_thermometer("left", x=0.31, z=0.5, interval=0.07)
    return case.with_thermometer("right", x=1.31, z=0.05, interval=0.1)


def content(folder: RunFolder) -> dict[str, np.ndarray]:
    """Every recorded number of a run."""
    arrays, _, _ = read_run_file(folder.run_file)
    for path in folder.snapshots():
        snapshot = read_snapshot(path)
        arrays[path.name] = np.array(
            [snapshot.temperature, snapshot.horizontal_velocity, snapshot.vertical_velocity]
        )
    return arrays


def assert_same(one: RunFolder, other: RunFolder) -> None:
    a, b = content(one), content(other)
    assert a.keys() == b.keys()
    for name in a:
        np.testing.assert_array_equal(a[name], b[name], err_msg=name)
    assert one.case.read_text(encoding="utf-8") == other.case.read_text(encoding="utf-8")


@pytest.fixture(scope="module")
def whole(tmp_path_factory: pytest.TempPathFactory) -> RunFolder:
    """Return an uninterrupted run."""
    return simulate(small_case(), tmp_path_factory.mktemp("runs") / "whole", OPTIONS)


def test_everything_is_recorded_at_its_exact_times(whole: RunFolder) -> None:
    records: RunRecords = open_run(whole.path)
    np.testing.assert_allclose(records.history["time"], 0.1 * np.arange(31), rtol=1e-12)
    np.testing.assert_allclose(records.profiles["time"], 0.5 * np.arange(7), rtol=1e-12)
    left, right = records.thermometers["left"], records.thermometers["right"]
    np.testing.assert_allclose(left.time, 0.07 * np.arange(43), rtol=1e-12)
    np.testing.assert_allclose(right.time, records.history["time"], rtol=1e-12)
    assert (left.x, left.z) == (0.31, 0.5)
    assert len(whole.snapshots()) == 4
    assert set(records.history) == {"time", *(q.name for q in HISTORY)}
    assert all(np.isfinite(values).all() for values in records.history.values())
    assert not whole.lock.exists()


def test_thermometers_agree_with_the_snapshots(whole: RunFolder) -> None:
    """A reading lies between the values of the surrounding grid points of the snapshot of that moment."""
    snapshot = read_snapshot(whole.snapshots()[2])
    record = open_run(whole.path).thermometers["right"]
    reading = record.temperature[np.argmin(np.abs(record.time - snapshot.time))]
    i, j = np.searchsorted(snapshot.x, 1.31), np.searchsorted(snapshot.z, 0.05)
    around = snapshot.temperature[j - 1 : j + 1, i - 1 : i + 1]
    assert around.min() - 0.01 < reading < around.max() + 0.01


class StopAfter:
    """Asks to stop at the given step."""

    def __init__(self, steps: int) -> None:
        self.left = steps

    def __call__(self) -> bool:
        self.left -= 1
        return self.left == 0


@pytest.mark.parametrize("steps", [1, 2, 17, 40])
def test_an_interrupted_run_resumes_bit_for_bit(whole: RunFolder, tmp_path: Path, steps: int) -> None:
    stop = RunOptions(threads=1, library="scipy.fft", should_stop=StopAfter(steps))
    with pytest.raises(InterruptedRunError, match="rbsim resume"):
        simulate(small_case(), tmp_path / "run", stop)
    stop = RunOptions(threads=1, library="scipy.fft", should_stop=StopAfter(5))
    with pytest.raises(InterruptedRunError):
        resume(tmp_path / "run", options=stop)
    assert_same(resume(tmp_path / "run", options=OPTIONS), whole)


def test_rows_after_the_last_checkpoint_are_cut_before_resuming(whole: RunFolder, tmp_path: Path) -> None:
    """The newest checkpoint is lost; run file and snapshots are ahead of the one that is left."""
    stop = RunOptions(threads=1, library="scipy.fft", should_stop=StopAfter(60))
    with pytest.raises(InterruptedRunError):
        simulate(small_case(), tmp_path / "run", stop)
    folder, notices = RunFolder(tmp_path / "run"), []
    folder.checkpoint_files()[0].write_bytes(b"damaged")
    options = RunOptions(threads=1, library="scipy.fft", notice=notices.append)
    assert_same(resume(folder.path, options=options), whole)
    assert "damaged" in notices[0]
    assert "checkpoint_000000000.h5" in notices[-1]


def test_a_finished_run_goes_on_to_a_later_end(whole: RunFolder, tmp_path: Path) -> None:
    simulate(small_case(end=2.0), tmp_path / "run", OPTIONS)
    folder = resume(tmp_path / "run", until=3.0, options=OPTIONS)
    assert_same(folder, whole)
    with pytest.raises(ConfigError, match="--until 2"):
        resume(tmp_path / "run", until=2.0, options=OPTIONS)


def test_a_run_killed_before_its_first_checkpoint_starts_over(whole: RunFolder, tmp_path: Path) -> None:
    folder, notices = create_run_folder(tmp_path / "run"), []
    folder.case.write_text(case_to_toml(small_case()), encoding="utf-8")
    options = RunOptions(threads=1, library="scipy.fft", notice=notices.append)
    assert_same(resume(folder.path, options=options), whole)
    assert "starting over" in notices[0]


def test_a_run_goes_on_with_the_library_it_began_with(whole: RunFolder, tmp_path: Path) -> None:
    """Bit for bit without naming threads or library again."""
    simulate(small_case(end=2.0), tmp_path / "run", OPTIONS)
    assert_same(resume(tmp_path / "run", until=3.0), whole)


def _start(config: Path, out: Path) -> subprocess.Popen[str]:
    command = [sys.executable, "-m", "rbsim", "run", str(config), "--out", str(out), "--no-figures"]
    command += ["--threads", "1", "--transforms", "scipy.fft"]
    return subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)


def _wait_for(path: Path, process: subprocess.Popen[str]) -> None:
    for _ in range(1200):
        if path.exists():
            return
        assert process.poll() is None, process.communicate()
        time.sleep(0.05)
    raise AssertionError(f"{path} did not appear")


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_a_signal_writes_a_checkpoint_and_leaves_with_code_5(tmp_path: Path, number: signal.Signals) -> None:
    config = tmp_path / "cell.toml"
    config.write_text(case_to_toml(small_case(end=1e5)), encoding="utf-8")
    process = _start(config, tmp_path / "run")
    _wait_for(RunFolder(tmp_path / "run").field(1), process)
    process.send_signal(number)
    _, complaint = process.communicate(timeout=60)
    assert process.returncode == 5
    lines = complaint.splitlines()
    assert lines[-1].startswith("rbsim: ")
    assert "rbsim resume" in lines[-1]
    folder = RunFolder(tmp_path / "run")
    assert not folder.lock.exists()
    assert resume(folder.path, until=_time_of(folder) + 0.5, options=OPTIONS) == folder


def _time_of(folder: RunFolder) -> float:
    return float(open_run(folder.path).history["time"][-1])


def test_a_killed_run_resumes_to_the_same_end(tmp_path: Path) -> None:
    """SIGKILL at random moments, with checkpoints and flushes every few steps."""
    output = {
        "history_interval": 0.1,
        "profile_interval": 0.5,
        "field_interval": 0.5,
        "checkpoint_seconds": 0.01,
    }
    case = small_case(end=40.0, output=output)
    truth = simulate(case, tmp_path / "whole", OPTIONS)
    config, out = tmp_path / "cell.toml", tmp_path / "run"
    config.write_text(case_to_toml(case), encoding="utf-8")
    process, rng, kills = _start(config, out), random.Random(4), 0
    _wait_for(RunFolder(out).checkpoint(0), process)
    while kills < 4:
        time.sleep(rng.uniform(0.0, 0.5))
        if process.poll() is not None:
            break
        process.kill()
        process.communicate()
        kills += 1
        command = [sys.executable, "-m", "rbsim", "resume", str(out), "--no-figures", "--threads", "1"]
        command += ["--transforms", "scipy.fft"]
        process = subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
        time.sleep(2.0)
    _, complaint = process.communicate(timeout=300)
    assert process.returncode == 0, complaint
    assert kills >= 1
    assert_same(RunFolder(out), truth)


def test_divergence_names_the_last_good_checkpoint(tmp_path: Path) -> None:
    case = build_case(
        rayleigh=1e9,
        end=100.0,
        grid={"nx": 24, "nz": 16},
        time={"step": 0.4},
        start={"kind": "roll", "amplitude": 0.5},
        output={"history_interval": 0.4, "field_interval": 0},
    )
    with pytest.raises(DivergedError, match=r"finer grid.*checkpoint_\d+\.h5") as caught:
        simulate(case, tmp_path / "run", OPTIONS)
    assert caught.value.time > 0
    assert RunFolder(tmp_path / "run").checkpoint_files()
    assert np.isfinite(open_run(tmp_path / "run").history["nusselt_bottom"]).all()


def test_a_run_starts_from_another_at_a_finer_grid(whole: RunFolder, tmp_path: Path) -> None:
    start = {"kind": "state", "path": str(whole.path)}
    case = small_case(end=0.2, grid={"nx": 64, "nz": 48}, start=start)
    folder = simulate(case, tmp_path / "fine", OPTIONS)
    before, after = open_run(whole.path).history, open_run(folder.path).history
    assert after["time"][0] == 0.0
    assert after["nusselt_volume"][0] == pytest.approx(before["nusselt_volume"][-1], rel=1e-4)
    # the same coefficients; the quadrature of the energy is that of each grid
    assert after["kinetic_energy"][0] == pytest.approx(before["kinetic_energy"][-1], rel=1e-8)
    newest = whole.checkpoint_files()[0]
    with pytest.raises(ConfigError, match="same plates"):
        simulate(
            small_case(start={"kind": "state", "path": str(newest)}, plates={"top": {"motion": "free-slip"}}),
            tmp_path / "other",
            OPTIONS,
        )
    with pytest.raises(ConfigError, match=r"start\.path"):
        simulate(
            small_case(start={"kind": "state", "path": str(tmp_path / "absent")}), tmp_path / "x", OPTIONS
        )
    assert not (tmp_path / "x").exists()


def test_a_second_writer_is_refused(whole: RunFolder, tmp_path: Path) -> None:
    with pytest.raises(RunFolderError, match="rbsim resume"):
        simulate(small_case(), whole.path, OPTIONS)


def test_too_many_roll_pairs_for_the_grid_are_a_configuration_error(tmp_path: Path) -> None:
    with pytest.raises(ConfigError, match=r"start\.pairs.*finer grid"):
        simulate(small_case(start={"kind": "roll", "pairs": 400}), tmp_path / "run", OPTIONS)
    assert not (tmp_path / "run").exists()
