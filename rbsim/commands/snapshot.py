"""`rbsim snapshot`: a picture of a temperature field."""

from __future__ import annotations

import argparse

NAME = "snapshot"
HELP = "draw a temperature field of a run"
EXAMPLES = """  rbsim snapshot runs/first --figure field.png
  rbsim snapshot runs/first --time 50 --figure field.svg
"""


def add_arguments(parser: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    parser.add_argument("folder", metavar="DIR", help="run folder")
    parser.add_argument("--figure", required=True, metavar="FILE", help="file to draw, .png, .svg or .pdf")
    parser.add_argument(
        "--time", type=float, metavar="T", help="snapshot closest to this time (default: the last)"
    )


def execute(args: argparse.Namespace) -> int:
    """Draw the snapshot."""
    from pathlib import Path

    from rbsim.files.reader import open_run
    from rbsim.report.runfigures import draw_snapshot

    drawn = draw_snapshot(open_run(args.folder), Path(args.figure), args.time)
    print(f"temperature at t = {drawn:g} free-fall times: {args.figure}")
    return 0
