"""Names of everything in a run folder; making and opening one."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

from rbsim.errors import RunFolderError
from rbsim.files.atomic import sweep
from rbsim.files.hdf5 import reading


@dataclass(frozen=True)
class RunFolder:
    """A folder that holds one run.

    Parameters
    ----------
    path : Path
        The folder.
    """

    path: Path

    @property
    def case(self) -> Path:
        """The case as TOML."""
        return self.path / "case.toml"

    @property
    def run_file(self) -> Path:
        """Histories, profiles and thermometer records."""
        return self.path / "run.h5"

    @property
    def summary(self) -> Path:
        """Averages and verdict as JSON."""
        return self.path / "summary.json"

    @property
    def lock(self) -> Path:
        """Who is writing."""
        return self.path / "lock"

    @property
    def fields(self) -> Path:
        """Folder of the snapshots."""
        return self.path / "fields"

    @property
    def checkpoints(self) -> Path:
        """Folder of the checkpoints."""
        return self.path / "checkpoints"

    @property
    def figures(self) -> Path:
        """Folder of the figures."""
        return self.path / "figures"

    def field(self, number: int) -> Path:
        """Return the file of a snapshot, counted from 0."""
        return self.fields / f"field_{number:06d}.h5"

    def checkpoint(self, step: int) -> Path:
        """Return the file of the checkpoint after a step."""
        return self.checkpoints / f"checkpoint_{step:09d}.h5"

    def snapshots(self) -> list[Path]:
        """Return all snapshots, oldest first."""
        return sorted(self.fields.glob("field_*.h5"))

    def checkpoint_files(self) -> list[Path]:
        """Return all checkpoints, newest first."""
        return sorted(self.checkpoints.glob("checkpoint_*.h5"), reverse=True)


def create_run_folder(path: str | Path) -> RunFolder:
    """Make a new run folder.

    Parameters
    ----------
    path : str or Path
        New or empty folder; missing parents are made.

    Raises
    ------
    RunFolderError
        If there is something at that place already, or the place cannot be written.
    """
    folder = RunFolder(Path(path))
    try:
        _refuse_occupied(folder)
        for part in (folder.path, folder.fields, folder.checkpoints, folder.figures):
            part.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise RunFolderError(
            f"{folder.path}: cannot be made ({error.strerror or error}); name another folder"
        ) from error
    return folder


def open_run_folder(path: str | Path, *, for_writing: bool = False) -> RunFolder:
    """Return an existing run folder.

    Parameters
    ----------
    path : str or Path
        The folder.
    for_writing : bool
        Also remove unfinished files of killed processes; only for the holder of the lock.

    Raises
    ------
    RunFolderError
        If it is missing, not a run folder, or of an older or newer format.
    """
    folder = RunFolder(Path(path))
    if not folder.path.is_dir():
        raise RunFolderError(f"{folder.path}: no such run folder; make one with `rbsim run`")
    if not folder.case.is_file():
        raise RunFolderError(f"{folder.path}: not a run folder (case.toml is missing)")
    if folder.run_file.is_file():
        with reading(folder.run_file):
            pass  # the check of the format is all that is wanted
    if for_writing:
        sweep(folder.path)
    return folder


def _refuse_occupied(folder: RunFolder) -> None:
    if not folder.path.exists():
        return
    if not folder.path.is_dir():
        raise RunFolderError(f"{folder.path}: is a file; name another folder")
    if folder.case.exists():
        raise RunFolderError(
            f"{folder.path}: holds a run already; go on with `rbsim resume`, or name another folder"
        )
    if any(folder.path.iterdir()):
        raise RunFolderError(f"{folder.path}: is not empty; name another folder")
