"""Checkpoints come back bit for bit or not at all."""

from __future__ import annotations

from pathlib import Path

import h5py
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rbsim.errors import RunFolderError
from rbsim.files.checkpoint import Checkpoint, read_checkpoint, read_newest, write_checkpoint
from rbsim.files.format import FORMAT_VERSION
from rbsim.files.layout import RunFolder


def _checkpoint(step: int, shape: tuple[int, int] = (9, 6)) -> Checkpoint:
    """Any bit pattern: NaNs with payloads, infinities, negative zeros, denormal numbers."""
    rng = np.random.default_rng(step)
    bits = rng.integers(0, 2**64, size=(2, *shape, 2), dtype=np.uint64)
    bits[:, 0, 0] = [0x7FF80000DEADBEEF, 1 << 63]
    theta, psi = bits.view(np.complex128)[..., 0]
    facts = {"time": 0.1 * step, "steps": step, "bottom": "no-slip", "stride_step": 1 / 3, "note": "Γ"}
    return Checkpoint(theta, psi, facts, {"time": step, "snapshots": 2})


def _same(a: Checkpoint, b: Checkpoint) -> bool:
    arrays = a.theta.tobytes() == b.theta.tobytes() and a.psi.tobytes() == b.psi.tobytes()
    return arrays and a.theta.shape == b.theta.shape and (a.facts, a.counts) == (b.facts, b.counts)


@pytest.fixture(scope="module")
def written(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Return a checkpoint file."""
    folder = RunFolder(tmp_path_factory.mktemp("run"))
    folder.checkpoints.mkdir()
    return write_checkpoint(folder, 5, _checkpoint(5))


@pytest.mark.parametrize("shape", [(1, 1), (9, 6), (683, 683)])
def test_a_checkpoint_comes_back_bit_for_bit(folder: RunFolder, shape: tuple[int, int]) -> None:
    path = write_checkpoint(folder, 7, _checkpoint(7, shape))
    back = read_checkpoint(path)
    assert _same(back, _checkpoint(7, shape))
    for key, value in _checkpoint(7).facts.items():
        assert type(back.facts[key]) is type(value)


def test_the_last_two_stay(folder: RunFolder) -> None:
    for step in (5, 10, 100):
        write_checkpoint(folder, step, _checkpoint(step))
    assert folder.checkpoint_files() == [folder.checkpoint(100), folder.checkpoint(10)]
    newest, path, notices = read_newest(folder)
    assert _same(newest, _checkpoint(100))
    assert (path, notices) == (folder.checkpoint(100), ())


def test_a_damaged_one_of_a_later_step_does_not_push_out_good_ones(folder: RunFolder) -> None:
    """After a fall back, the run reaches the damaged step again only later."""
    for step in (5, 10):
        write_checkpoint(folder, step, _checkpoint(step))
    folder.checkpoint(10).write_bytes(b"damaged")
    for step in (7, 8):
        write_checkpoint(folder, step, _checkpoint(step))
    assert folder.checkpoint_files() == [folder.checkpoint(8), folder.checkpoint(7)]


def test_writing_the_same_step_again_keeps_the_one_before(folder: RunFolder) -> None:
    for step in (5, 10, 10):
        write_checkpoint(folder, step, _checkpoint(step))
    assert folder.checkpoint_files() == [folder.checkpoint(10), folder.checkpoint(5)]


@pytest.mark.parametrize("damage", ["truncated", "flipped", "emptied", "removed"])
def test_a_damaged_one_is_reported_and_the_previous_one_used(folder: RunFolder, damage: str) -> None:
    for step in (5, 10):
        write_checkpoint(folder, step, _checkpoint(step))
    newest = folder.checkpoint(10)
    content = newest.read_bytes()
    flipped = content[:2000] + bytes([content[2000] ^ 1]) + content[2001:]
    newest.write_bytes({"truncated": content[:-1], "flipped": flipped}.get(damage, b""))
    if damage == "removed":
        newest.unlink()
    checkpoint, path, notices = read_newest(folder)
    assert path == folder.checkpoint(5)
    assert _same(checkpoint, _checkpoint(5))
    assert [str(newest) in notice and "damaged" in notice for notice in notices] == [True] * (
        damage != "removed"
    )


def test_nothing_to_resume_from_is_said_with_the_reasons(folder: RunFolder) -> None:
    with pytest.raises(RunFolderError, match="no checkpoint was written yet"):
        read_newest(folder)
    write_checkpoint(folder, 5, _checkpoint(5)).write_bytes(b"")
    with pytest.raises(RunFolderError, match=r"nothing to resume from .*000005\.h5: damaged"):
        read_newest(folder)
    with pytest.raises(RunFolderError, match="no such checkpoint"):
        read_checkpoint(folder.checkpoint(6))


@settings(max_examples=200, deadline=None)
@given(place=st.floats(0.0, 1.0, exclude_max=True), bit=st.integers(0, 7))
def test_no_flipped_bit_anywhere_goes_unnoticed(written: Path, place: float, bit: int) -> None:
    content = bytearray(written.read_bytes())
    content[int(place * len(content))] ^= 1 << bit
    damaged = written.with_name("damaged.h5")
    damaged.write_bytes(content)
    with pytest.raises(RunFolderError):
        read_checkpoint(damaged)


@settings(max_examples=50, deadline=None)
@given(data=st.binary(max_size=900), place=st.integers(0, 6000))
def test_any_damage_is_an_error_of_ours_or_harmless(written: Path, data: bytes, place: int) -> None:
    content = written.read_bytes()
    damaged = written.with_name("damaged.h5")
    damaged.write_bytes(content[:place] + data + content[place + len(data) :])
    if damaged.read_bytes() == content:
        assert _same(read_checkpoint(damaged), _checkpoint(5))
    else:
        with pytest.raises(RunFolderError):
            read_checkpoint(damaged)


@pytest.mark.parametrize(("step", "words"), [(1, "is newer than"), (-1, "is older than")])
def test_other_versions_are_told_apart(folder: RunFolder, step: int, words: str) -> None:
    path = write_checkpoint(folder, 5, _checkpoint(5))
    ours, other = f"version {FORMAT_VERSION}\n", f"version {FORMAT_VERSION + step}\n"
    path.write_bytes(path.read_bytes().replace(ours.encode(), other.encode(), 1))
    with pytest.raises(RunFolderError, match=words):
        read_checkpoint(path)


def test_other_programs_can_read_it_as_hdf5(folder: RunFolder) -> None:
    path = write_checkpoint(folder, 5, _checkpoint(5))
    assert path.read_bytes().startswith(b"rbsim run\nversion ")
    with h5py.File(path) as file:
        assert file["theta"][()].tobytes() == _checkpoint(5).theta.tobytes()
        assert file["facts"].attrs["steps"] == 5
        assert {"program_version", "libraries", "platform", "created"} <= set(file.attrs)
