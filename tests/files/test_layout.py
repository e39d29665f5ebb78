"""Run folders are made where nothing is, and opened only if they are of this format."""

from __future__ import annotations

from pathlib import Path

import h5py
import pytest

from rbsim.errors import RunFolderError
from rbsim.files.atomic import UNFINISHED
from rbsim.files.format import FORMAT_KEY, FORMAT_VERSION, VERSION_KEY
from rbsim.files.layout import RunFolder, create_run_folder, open_run_folder
from rbsim.files.runfile import RunFileWriter


def test_a_new_folder_holds_its_parts_and_nothing_else(tmp_path: Path) -> None:
    folder = create_run_folder(tmp_path / "deep" / "run")
    assert sorted(path.name for path in folder.path.iterdir()) == ["checkpoints", "fields", "figures"]


def test_an_empty_folder_may_be_used(tmp_path: Path) -> None:
    assert create_run_folder(str(tmp_path)).path == tmp_path


def test_an_occupied_place_is_refused_with_advice(folder: RunFolder, tmp_path: Path) -> None:
    with pytest.raises(RunFolderError, match=r"holds a run already.*rbsim resume"):
        create_run_folder(folder.path)
    (tmp_path / "other").mkdir()
    (tmp_path / "other" / "thesis.tex").touch()
    with pytest.raises(RunFolderError, match=r"other: is not empty"):
        create_run_folder(tmp_path / "other")
    with pytest.raises(RunFolderError, match="is a file"):
        create_run_folder(folder.case)
    with pytest.raises(RunFolderError, match="cannot be made"):
        create_run_folder(folder.case / "run")
    assert [path.name for path in (tmp_path / "other").iterdir()] == ["thesis.tex"]


def test_missing_and_foreign_folders_are_told_apart(tmp_path: Path) -> None:
    with pytest.raises(RunFolderError, match="no such run folder"):
        open_run_folder(tmp_path / "absent")
    with pytest.raises(RunFolderError, match="not a run folder"):
        open_run_folder(tmp_path)


@pytest.mark.parametrize(
    ("key", "value", "words"),
    [
        (VERSION_KEY, FORMAT_VERSION + 1, "is newer than"),
        (VERSION_KEY, FORMAT_VERSION - 1, "is older than"),
        (VERSION_KEY, "many", "damaged"),
        (FORMAT_KEY, "something else", "not a file of an rbsim run"),
    ],
)
def test_other_formats_are_told_apart_before_anything_is_read(
    folder: RunFolder, key: str, value: object, words: str
) -> None:
    RunFileWriter(folder.run_file, []).create([0.5], {})
    with h5py.File(folder.run_file, "r+") as file:
        file.attrs[key] = value
    with pytest.raises(RunFolderError, match=words):
        open_run_folder(folder.path)


def test_leftovers_are_swept_by_the_holder_of_the_lock_only(folder: RunFolder) -> None:
    leftover = folder.fields / f"field_000001.h5.77{UNFINISHED}"
    leftover.touch()
    open_run_folder(folder.path)
    assert leftover.exists()
    open_run_folder(folder.path, for_writing=True)
    assert not leftover.exists()


def test_files_are_listed_in_the_order_of_time(folder: RunFolder) -> None:
    for number in (10, 2, 100):
        folder.field(number).touch()
        folder.checkpoint(number).touch()
    (folder.fields / "notes.txt").touch()
    assert folder.snapshots() == [folder.field(n) for n in (2, 10, 100)]
    assert folder.checkpoint_files() == [folder.checkpoint(n) for n in (100, 10, 2)]
