"""Where a file comes from: program, libraries, platform, date."""

from __future__ import annotations

import datetime
import platform
from collections.abc import Mapping
from importlib.metadata import PackageNotFoundError, version

#: Libraries whose versions may change the last bit of a result.
LIBRARIES = ("numpy", "scipy", "numba")


def provenance() -> Mapping[str, str]:
    """Return program, libraries, platform and date of this moment, as attributes of a file."""
    return {
        "program_version": f"rbsim {_version('rbsim')}",
        "libraries": ", ".join(f"{name} {_version(name)}" for name in LIBRARIES),
        "platform": f"{platform.platform()}, Python {platform.python_version()}",
        "created": datetime.datetime.now(datetime.UTC).isoformat(timespec="seconds"),
    }


def _version(package: str) -> str:
    try:
        return version(package)
    except PackageNotFoundError:
        return "(not installed)"
