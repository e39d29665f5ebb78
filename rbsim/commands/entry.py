"""The `rbsim` command: finds the subcommand, runs it, turns errors into one line and an exit code.

A subcommand is a module of this folder with NAME, HELP, EXAMPLES, add_arguments(parser) and
execute(args) -> int; its name stands in COMMANDS. Modules load nothing heavy before execute, so that help
stays fast.
"""

from __future__ import annotations

import argparse
import sys
import traceback
from collections.abc import Sequence
from importlib import import_module
from types import ModuleType

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
  6  an iteration did not converge
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
    try:
        args = build_parser().parse_args(argv)
    except SystemExit as leaving:  # argparse has printed help or a usage error
        return int(leaving.code or 0)
    try:
        return int(args.execute(args))
    except RbsimError as error:
        for line in str(error).splitlines():
            print(f"rbsim: {line}", file=sys.stderr)
        return error.exit_code
    except KeyboardInterrupt:
        print("rbsim: interrupted", file=sys.stderr)
        return 5
    except BrokenPipeError:  # the reader of our output has gone
        sys.stderr.close()
        return 0
    except Exception as error:
        if args.debug:
            traceback.print_exc()
        print(f"rbsim: internal error: {type(error).__name__}: {error}; --debug shows where", file=sys.stderr)
        return 1


def build_parser() -> argparse.ArgumentParser:
    """Return the parser of all commands."""
    parser = argparse.ArgumentParser(
        prog="rbsim",
        description="Numerical twin of a Rayleigh-Bénard cell.",
        epilog=EXAMPLES + EXIT_CODES,
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    parser.add_argument("--version", action=_Version, nargs=0, help="print the version and leave")
    parser.add_argument("--debug", action="store_true", help="show a traceback for internal errors")
    commands = parser.add_subparsers(metavar="COMMAND", required=True)
    for name in COMMANDS:
        module: ModuleType = import_module(f"rbsim.commands.{name}")
        sub = commands.add_parser(
            module.NAME,
            help=module.HELP,
            description=module.HELP,
            epilog=f"examples:\n{module.EXAMPLES}",
            formatter_class=argparse.RawDescriptionHelpFormatter,
        )
        module.add_arguments(sub)
        sub.set_defaults(execute=module.execute)
    return parser


class _Version(argparse.Action):
    """Prints the version, found only when asked for."""

    def __call__(self, parser: argparse.ArgumentParser, *_: object) -> None:
        from importlib.metadata import version

        print(f"rbsim {version('rbsim')}")
        parser.exit()


if __name__ == "__main__":
    sys.exit(main())
