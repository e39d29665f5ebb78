"""Set up the project and simulate the quickstart cell: `python scripts/quickstart.py`.

Makes `.venv`, installs rbsim, runs configs/quickstart.toml into runs/quickstart and prints what it found.
Options are handed on to `rbsim run`, for example `--set time.end=300`.
"""

from __future__ import annotations

import shutil
import sys

from environment import PROJECT, prepare, run


def main() -> None:
    """Run the quickstart cell from scratch."""
    python = prepare("fast" if "--fast" in sys.argv else "")
    handed_on = [option for option in sys.argv[1:] if option != "--fast"]
    folder = PROJECT / "runs" / "quickstart"
    shutil.rmtree(folder, ignore_errors=True)
    run([python, "-m", "rbsim", "run", PROJECT / "configs" / "quickstart.toml", "--out", folder, *handed_on])


if __name__ == "__main__":
    main()
