"""Set up the project and run every check: `python scripts/check.py`.

Lint, format, types, then the tests. Options are handed on to pytest: `python scripts/check.py -m physics`
runs the longer physics checks, `-k nusselt` only what is named so.
"""

from __future__ import annotations

import sys

from environment import prepare, run


def main() -> None:
    """Run all checks; the exit code is that of the first one that fails."""
    python = prepare("dev")
    run([python, "-m", "ruff", "check", "."])
    run([python, "-m", "ruff", "format", "--check", "."])
    run([python, "-m", "mypy"])
    run([python, "-m", "pytest", *sys.argv[1:]])


if __name__ == "__main__":
    main()
