"""`rbsim validate`: check a configuration without running it."""

from __future__ import annotations

import argparse

NAME = "validate"
HELP = "check a configuration and say what would be simulated"
EXAMPLES = """  rbsim validate configs/quickstart.toml
  rbsim validate cell.toml --set numbers.rayleigh=1e8
"""


def add_arguments(parser: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    add_configuration(parser)


def add_configuration(parser: argparse.ArgumentParser) -> None:
    """Declare the configuration file and its overrides, as `run` takes them too."""
    parser.add_argument("config", metavar="CONFIG.toml", help="configuration")
    parser.add_argument(
        "--set",
        dest="overrides",
        metavar="SECTION.KEY=VALUE",
        action="append",
        default=[],
        help="replace a value of the configuration; may be repeated",
    )


def execute(args: argparse.Namespace) -> int:
    """Print one line about a valid configuration."""
    from rbsim.config.loading import check_start_exists, load_case
    from rbsim.simulation.assembly import grid_of

    case = load_case(args.config, args.overrides)
    check_start_exists(case, args.config)
    grid = grid_of(case)
    chosen = " (chosen)" if case.grid == "auto" else ""
    numbers, points = case.numbers, f"{grid.nx} x {grid.nz}{chosen}"
    print(
        f"valid: Ra = {numbers.rayleigh:g}, Pr = {numbers.prandtl:g}, Γ = {case.cell.aspect_ratio:g}, "
        f"grid {points}, {len(case.thermometers)} thermometers, end at {case.time.end:g} free-fall times"
    )
    return 0
