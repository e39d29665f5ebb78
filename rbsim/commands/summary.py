"""`rbsim summary`: averages, error bars and verdict of a run."""

from __future__ import annotations

import argparse
import json
import math
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from rbsim.files.reader import RunRecords
    from rbsim.simulation.summary import Summary

NAME = "summary"
HELP = "print averages with error bars and the verdict of a run, also while it goes on"
EXAMPLES = """  rbsim summary runs/first
  rbsim summary runs/first --from 50 --json
"""


def add_arguments(parser: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    parser.add_argument("folder", metavar="DIR", help="run folder")
    parser.add_argument("--json", action="store_true", help="print JSON")
    parser.add_argument(
        "--from",
        dest="start",
        type=float,
        metavar="T",
        help="start of the averages in free-fall times (default: the detected end of the transient)",
    )


def execute(args: argparse.Namespace) -> int:
    """Print the summary."""
    from rbsim.errors import RunFolderError
    from rbsim.files.reader import open_run
    from rbsim.simulation.summary import summarise

    records = open_run(args.folder)
    if not args.json:
        print_summary(records, args.start)
        return 0
    summary = summarise(records, args.start)
    if summary is None:
        raise RunFolderError(f"{args.folder}: too few history samples to average; run longer")
    print(json.dumps(summary.as_dict(), indent=2))
    return 0


def print_summary(records: RunRecords, start: float | None = None) -> None:
    """Print what a run found as a table."""
    from rbsim.simulation.summary import summarise

    summary = summarise(records, start)
    facts = records.attributes
    print(
        f"Ra = {facts['rayleigh']:g}  Pr = {facts['prandtl']:g}  Γ = {facts['aspect_ratio']:g}  "
        f"grid {facts['nx']} x {facts['nz']}  transforms {facts['transforms']}  threads {facts['threads']}"
    )
    if summary is None:
        print("too few history samples to average; run longer")
        return
    for line in table(summary):
        print(line)


def table(summary: Summary) -> list[str]:
    """Return the lines of the table."""
    lines = [
        f"averages from t = {summary.start:g} to {summary.end:g} free-fall times"
        + ("" if summary.transient.trustworthy else f"  (not steady: {summary.transient.reason})"),
        "",
        f"{'Nusselt number':<16}{'mean':>10}{'± 95 %':>10}{'storage':>10}{'balanced':>10}",
    ]
    for name, value in summary.nusselt.items():
        lines.append(
            f"{name:<16}{value.raw.mean:>10.4f}{error(value.raw.ci95):>10}{value.storage:>10.4f}"
            f"{value.balanced:>10.4f}"
        )
    pairs, share = summary.roll_pairs
    agreement = summary.agreement
    lines += [
        "",
        f"Reynolds number  {summary.reynolds.mean:.2f} ± {error(summary.reynolds.ci95)}",
        f"roll pairs       {pairs} ({share:.0%} of the time)",
        f"spectral tails   {summary.tails[0]:.1e} in x, {summary.tails[1]:.1e} in z",
        f"verdict          {agreement.verdict}: spread {agreement.spread:.1e}, drift {agreement.drift:.1e}",
        f"                 {agreement.advice}",
    ]
    return lines


def error(value: float) -> str:
    """Return an error bar; an infinite one means that the record is too short."""
    return f"{value:.4f}" if math.isfinite(value) else "unknown"
