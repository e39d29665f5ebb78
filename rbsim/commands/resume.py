"""`rbsim resume`: go on where a run stopped."""

from __future__ import annotations

import argparse

from rbsim.commands.run import add_machine, finish, options_of

NAME = "resume"
HELP = "go on with an interrupted run, or with a finished one to a later end"
EXAMPLES = """  rbsim resume runs/first
  rbsim resume runs/first --until 400
"""


def add_arguments(parser: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    parser.add_argument("folder", metavar="DIR", help="run folder")
    parser.add_argument("--until", type=float, metavar="T", help="new end in free-fall times")
    add_machine(parser)


def execute(args: argparse.Namespace) -> int:
    """Resume, then print the summary."""
    from rbsim.commands.progress import ProgressLine
    from rbsim.simulation.running import resume

    line = ProgressLine()
    finish(resume(args.folder, args.until, options_of(args, line)), line, figures=not args.no_figures)
    return 0
