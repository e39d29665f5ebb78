"""Name and version of the format, and the refusal of any other."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from rbsim.errors import RunFolderError

#: Kept in every HDF5 file of a run; a change that older readers would misread raises the version.
FORMAT, FORMAT_VERSION = "rbsim run", 1

#: Root attributes that hold them.
FORMAT_KEY, VERSION_KEY = "format", "format_version"


def refuse_other_format(path: Path, name: Any, version: Any) -> None:
    """Tell foreign, older and newer files apart from those of this program.

    Parameters
    ----------
    path : Path
        File, for the message.
    name, version : object
        What the file says of itself, None if it says nothing.

    Raises
    ------
    RunFolderError
        If it is not exactly this format.
    """
    if name != FORMAT:
        raise RunFolderError(f"{path}: not a file of an rbsim run; name another one")
    try:
        found = int(version)
    except (TypeError, ValueError):
        raise RunFolderError(f"{path}: damaged (its format version is unreadable)") from None
    if found != FORMAT_VERSION:
        age = "newer" if found > FORMAT_VERSION else "older"
        raise RunFolderError(
            f"{path}: format version {found} is {age} than version {FORMAT_VERSION}, which this rbsim reads; "
            "use the release of rbsim that wrote it"
        )
