"""The `rbsim` command: finds the subcommand, runs it, turns errors into one line and an exit code.

A subcommand is a module of this folder whose name stands in COMMANDS. It has

- ``NAME``, ``HELP`` and ``EXAMPLES``: what it is called, one phrase, and lines that show its use;
- ``add_arguments(parser)``, which declares its arguments, except ``--debug``, which all have;
- ``execute(args) -> int``, which does the work, prints the result and returns 0. It raises an `RbsimError`
  for whatever the user can cause or cure.

Such a module imports nothing heavier than argparse before ``execute``, so that help stays fast.
"""

from __future__ import annotations

import argparse
import io
import os
import sys
import traceback
from collections.abc import Sequence
from importlib import import_module
from typing import NoReturn, Protocol, cast

from rbsim.errors import RbsimError

#: Modules of the subcommands, in the order of the help.
COMMANDS = ("validate", "run", "resume", "summary", "snapshot", "onset", "rolls")

EXIT_CODES = """exit codes:
  0  done
  1  internal error (a fault of rbsim; --debug shows where)
  2  usage or configuration
  3  run folder or file: missing, damaged, in use, disk full
  4  the simulated state diverged; the last checkpoint is kept
  5  interrupted by a signal after a checkpoint; `rbsim resume` goes on
  6  an iteration did not converge, or a branch ended
  130  interrupted by Ctrl-C with nothing to resume
"""

EXAMPLES = """examples:
  rbsim run configs/quickstart.toml --out runs/first
  rbsim summary runs/first
  rbsim resume runs/first --until 300

"""


def main(argv: Sequence[str] | None = None) -> int:
    """Run the command line.

    Parameters
    ----------
    argv : sequence of str, optional
        Arguments without the program name; those of the process by default.

    Returns
    -------
    int
        Exit code.
    """
    _print_what_the_terminal_can()
    try:
        args = build_parser().parse_args(argv)
    except SystemExit as leaving:  # argparse has printed help or a usage error
        return int(leaving.code or 0)
    try:
        code = int(args.execute(args))
        sys.stdout.flush()
        return code
    except RbsimError as error:
        for line in str(error).splitlines():
            print(f"rbsim: {line}", file=sys.stderr)
        return error.exit_code
    except KeyboardInterrupt:
        print("rbsim: interrupted", file=sys.stderr)
        return 130
    except BrokenPipeError:  # the reader of our output has gone
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 0
    except Exception as error:
        if args.debug:
            traceback.print_exc()
        text = " ".join(f"{type(error).__name__}: {error}".split())
        print(f"rbsim: internal error: {text}; --debug shows where", file=sys.stderr)
        return 1


def _print_what_the_terminal_can() -> None:
    """Show characters that a terminal lacks as escapes instead of failing."""
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):
            stream.reconfigure(errors="backslashreplace")


class Command(Protocol):
    """What the module of a subcommand offers."""

    NAME: str
    HELP: str
    EXAMPLES: str

    def add_arguments(self, parser: argparse.ArgumentParser) -> None:
        """Declare the arguments."""

    def execute(self, args: argparse.Namespace) -> int:
        """Do the work and return the exit code."""


def build_parser() -> argparse.ArgumentParser:
    """Return the parser of all commands."""
    parser = _Parser(
        prog="rbsim",
        description="Numerical twin of a Rayleigh-Bénard cell.",
        epilog=EXAMPLES + EXIT_CODES,
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    parser.add_argument("--version", action=_Version, nargs=0, help="print the version and leave")
    parser.add_argument("--debug", action="store_true", help="show a traceback for internal errors")
    commands = parser.add_subparsers(metavar="COMMAND", required=True)
    for name in COMMANDS:
        module = cast("Command", import_module(f"rbsim.commands.{name}"))
        sub = commands.add_parser(
            module.NAME,
            help=module.HELP,
            description=module.HELP,
            epilog=f"examples:\n{module.EXAMPLES}",
            formatter_class=argparse.RawDescriptionHelpFormatter,
        )
        module.add_arguments(sub)
        sub.add_argument(
            "--debug",
            action="store_true",
            default=argparse.SUPPRESS,
            help="show a traceback for internal errors",
        )
        sub.set_defaults(execute=module.execute)
    return parser


class _Parser(argparse.ArgumentParser):
    """Says in one line what is wrong with the arguments."""

    def error(self, message: str) -> NoReturn:
        self.exit(2, f"rbsim: {' '.join(message.split())}; see `{self.prog} --help`\n")


class _Version(argparse.Action):
    """Prints the version, found only when asked for."""

    def __call__(self, parser: argparse.ArgumentParser, *_: object) -> None:
        from importlib.metadata import PackageNotFoundError, version

        try:
            print(f"rbsim {version('rbsim')}")
        except PackageNotFoundError:
            print("rbsim, version unknown: it runs without being installed")
        parser.exit()


if __name__ == "__main__":
    sys.exit(main())
