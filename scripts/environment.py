"""Makes the project's own virtual environment, with nothing but the standard library."""

from __future__ import annotations

import hashlib
import subprocess
import sys
import venv
from pathlib import Path

PROJECT = Path(__file__).resolve().parent.parent
FOLDER = PROJECT / ".venv"
OLDEST_PYTHON = (3, 11)


def prepare(extras: str) -> Path:
    """Create or refresh `.venv` and return its Python interpreter.

    Parameters
    ----------
    extras : str
        Comma-separated optional dependencies of pyproject.toml.
    """
    if sys.version_info < OLDEST_PYTHON:
        sys.exit(f"Python {sys.version.split()[0]} is too old: rbsim needs 3.11 or newer")
    python = FOLDER / ("Scripts/python.exe" if sys.platform == "win32" else "bin/python")
    stamp = FOLDER / f"installed-{extras or 'plain'}"
    wanted = hashlib.sha256((PROJECT / "pyproject.toml").read_bytes()).hexdigest()
    if stamp.exists() and stamp.read_text() == wanted:
        return python
    print(f"Setting up {FOLDER} (once; takes a minute or two) ...", flush=True)
    if not python.exists():
        venv.create(FOLDER, with_pip=True)
    wish = f"{PROJECT}[{extras}]" if extras else PROJECT
    run([python, "-m", "pip", "install", "--quiet", "--editable", wish])
    stamp.write_text(wanted)
    return python


def run(command: list[str | Path]) -> None:
    """Run a command in the project folder and leave with its exit code if it fails."""
    print("$ " + " ".join(_short(part) for part in command), flush=True)
    code = subprocess.run([str(part) for part in command], cwd=PROJECT, check=False).returncode
    if code:
        sys.exit(code)


def _short(part: str | Path) -> str:
    path = Path(part)
    return str(path.relative_to(PROJECT)) if path.is_absolute() and PROJECT in path.parents else str(part)
