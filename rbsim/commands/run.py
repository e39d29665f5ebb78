"""`rbsim run`: simulate a configuration into a run folder."""

from __future__ import annotations

import argparse
from typing import TYPE_CHECKING

from rbsim.commands.validate import add_configuration

if TYPE_CHECKING:
    from rbsim.commands.progress import ProgressLine
    from rbsim.files.layout import RunFolder
    from rbsim.simulation.loop import RunOptions

NAME = "run"
HELP = "simulate a configuration into a new run folder"
EXAMPLES = """  rbsim run configs/quickstart.toml --out runs/first
  rbsim run cell.toml --out runs/high --set numbers.rayleigh=1e8 --set time.end=400 --threads 2
"""


def add_arguments(parser: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    add_configuration(parser)
    parser.add_argument("--out", metavar="DIR", help="run folder (default: runs/NAME of the configuration)")
    add_machine(parser)


def add_machine(parser: argparse.ArgumentParser) -> None:
    """Declare how to use the machine, as `resume` takes it too."""
    parser.add_argument("--threads", type=_count, metavar="N", help="threads (default: chosen by grid size)")
    parser.add_argument(
        "--transforms",
        choices=("scipy.fft", "ducc0.fft"),
        help="transform library (default: ducc0.fft if installed, else scipy.fft)",
    )
    parser.add_argument("--no-figures", action="store_true", help="leave the figures out")


def _count(text: str) -> int:
    if not text.isdigit() or not 1 <= int(text) <= 1024:
        raise argparse.ArgumentTypeError(f"{text!r}: must be a whole number from 1 to 1024")
    return int(text)


def execute(args: argparse.Namespace) -> int:
    """Simulate, then print the summary."""
    from pathlib import Path

    from rbsim.commands.progress import ProgressLine
    from rbsim.config.loading import check_start_exists, load_case
    from rbsim.simulation.running import simulate

    case = load_case(args.config, args.overrides)
    check_start_exists(case, args.config)
    out = args.out or str(Path("runs") / Path(args.config).stem)
    line = ProgressLine()
    options = options_of(args, line)
    finish(simulate(case, out, options), line, figures=not args.no_figures)
    return 0


def options_of(args: argparse.Namespace, line: ProgressLine) -> RunOptions:
    """Return the run options of the command line."""
    from rbsim.commands.progress import StopOnSignal
    from rbsim.simulation.loop import RunOptions

    return RunOptions(
        threads=args.threads,
        library=args.transforms,
        watch=line.show,
        should_stop=StopOnSignal(),
        notice=line.say,
    )


def finish(folder: RunFolder, line: ProgressLine, *, figures: bool) -> None:
    """Print the summary of a finished run and draw its figures."""
    from rbsim.commands.summary import print_summary
    from rbsim.files.reader import open_run
    from rbsim.report.runfigures import draw_run

    line.close()
    records = open_run(folder.path)
    print_summary(records)
    if figures:
        drawn = draw_run(records)
        print(f"figures: {', '.join(str(path) for path in drawn)}")
    print(f"run folder: {folder.path}")
