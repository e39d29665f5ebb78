"""`rbsim rolls`: steady rolls without waiting for time stepping."""

from __future__ import annotations

import argparse
import json
import math
from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING, Any

from rbsim.commands.plates import add_plate_arguments, plates_of, use_one_matrix_thread

if TYPE_CHECKING:
    from rbsim.dynamics.cell import Cell
    from rbsim.stability.rolls import Roll
    from rbsim.stability.spectrum import RollMode

NAME = "rolls"
HELP = "steady rolls by Newton's method, their branches, stability and period of most heat"
EXAMPLES = """  rbsim rolls --rayleigh 1e4 --prandtl 0.71 --period 2.0158 --json
  rbsim rolls --rayleigh 1e4 --prandtl 7 --state roll.h5 --figure roll.png
  rbsim rolls --rayleigh 1e4 --follow rayleigh --to 1e6 --branch branch.csv
  rbsim rolls --rayleigh 1e5 --prandtl 7 --best-period
  rbsim rolls --rayleigh 1e4 --prandtl 0.71 --period 2 --modes
  rbsim rolls --rayleigh 6e5 --prandtl 0.71 --period 2 --oscillatory-onset
"""

SYMMETRY = {1: "even", -1: "odd", 0: "mixed"}


def add_arguments(parser: argparse.ArgumentParser) -> None:
    """Declare the arguments."""
    add_plate_arguments(parser)
    parser.add_argument("--rayleigh", type=float, required=True, metavar="RA")
    parser.add_argument("--prandtl", type=float, default=1.0, metavar="PR", help="default 1")
    parser.add_argument("--period", type=float, metavar="G", help="of a roll pair (H; default: of onset)")
    parser.add_argument("--best-period", action="store_true", help="find the period of most heat nearby")
    parser.add_argument("--grid", metavar="NX,NZ", help="dealiased points (default: enough)")
    parser.add_argument("--follow", choices=("rayleigh", "prandtl", "period"), help="follow the branch in it")
    parser.add_argument("--to", type=float, metavar="VALUE", help="where to stop following")
    parser.add_argument(
        "--modes", action="store_true", help="growth of the leading disturbances (the last roll)"
    )
    parser.add_argument(
        "--oscillatory-onset", action="store_true", help="find the Ra nearby where rolls turn oscillatory"
    )
    parser.add_argument("--branch", metavar="FILE", help="table of the branch, .csv or .h5")
    parser.add_argument("--states", metavar="DIR", help="keep every state of the branch, to start runs from")
    parser.add_argument("--state", metavar="FILE", help="keep the last state, to start a run from")
    parser.add_argument("--figure", metavar="FILE", help="draw its temperature, .png, .svg or .pdf")
    parser.add_argument("--json", action="store_true", help="print JSON")


def execute(args: argparse.Namespace) -> int:
    """Find the rolls."""
    use_one_matrix_thread()
    cell, grid = cell_of(args), _grid(args)
    _check_branch_file(args)
    rolls: list[Roll] = []
    try:
        for roll in _computed(args, cell, grid):
            rolls.append(roll)
            if args.follow and not args.json:
                print(_line(roll), flush=True)
        modes = _modes(args, rolls)
    finally:
        _write(args, rolls)
    facts = facts_of(rolls[-1])
    if args.follow:
        facts["points"] = len(rolls)
    if modes:
        facts["modes"] = [_mode_facts(mode) for mode in modes]
    print(json.dumps(facts, indent=2) if args.json else _text(facts))
    return 0


def _computed(args: argparse.Namespace, cell: Cell, grid: tuple[int, int] | None) -> Iterator[Roll]:
    from rbsim.stability.branches import best_period, branch
    from rbsim.stability.rolls import roll_path, settled, solved

    *_, roll = roll_path(cell)
    if args.follow:
        yield from branch(roll, args.follow, args.to)
        return
    if args.best_period:
        roll = best_period(roll)
    if grid is not None:
        roll = solved(roll.cell, grid, roll.state)
    elif not args.oscillatory_onset:  # that refines on its own, at other Rayleigh numbers
        roll = settled(roll)
    yield roll


def _modes(args: argparse.Namespace, rolls: list[Roll]) -> list[RollMode]:
    """Find what was asked about stability; the roll of oscillatory onset becomes the last of the rolls."""
    if not (args.modes or args.oscillatory_onset):
        return []
    from rbsim.errors import NotConvergedError
    from rbsim.stability.spectrum import OSCILLATING, leading_modes, oscillatory_onset

    last = rolls[-1] if args.grid else _sufficient(rolls[-1])
    modes = leading_modes(last)
    if not args.oscillatory_onset:
        return modes
    swaying = [mode for mode in modes if mode.frequency > OSCILLATING]
    if not swaying:
        raise NotConvergedError(
            f"oscillatory onset: no leading mode oscillates at Ra = {last.cell.rayleigh:.6g}; start closer"
        )
    critical, mode = oscillatory_onset(last, swaying[0])
    rolls.append(critical)
    return [mode]


def _sufficient(roll: Roll) -> Roll:
    """Return a roll on a grid that suffices for its modes: before the last doubling, if there was one."""
    from rbsim.stability.rolls import refined, solved
    from rbsim.stability.spectrum import MODE_TAIL

    if math.isnan(roll.nusselt_change):
        return refined(roll, MODE_TAIL)
    nx, nz = roll.grid
    return solved(roll.cell, (nx // 2, nz // 2), roll.state)


def _mode_facts(mode: RollMode) -> dict[str, Any]:
    return {
        "growth": mode.growth,
        "frequency": mode.frequency,
        "mirror": mode.mirror,
        "half_turn": mode.half_turn,
        "residual": mode.residual,
    }


def cell_of(args: argparse.Namespace) -> Cell:
    """Return the cell that was asked for.

    Raises
    ------
    ConfigError
        A number is out of its range, or options do not go together.
    """
    from rbsim.dynamics.cell import Cell, Plate
    from rbsim.errors import ConfigError

    bottom, top = plates_of(args)
    faults = [
        f"--{name} {value:g}: must be positive and finite"
        for name in ("rayleigh", "prandtl", "period", "to")
        if (value := getattr(args, name)) is not None and not 0.0 < value < math.inf
    ]
    if not isinstance(bottom, Plate) or not isinstance(top, Plate):
        faults.append("--bottom-thermal, --top-thermal: slabs are not possible for rolls; give biot=NUMBER")
    if (args.follow is None) != (args.to is None):
        faults.append("--follow and --to go together")
    if args.follow and args.grid:
        faults.append("--grid and --follow exclude each other: a branch refines its grid as it goes")
    if (args.branch or args.states) and not args.follow:
        faults.append("--branch and --states need --follow")
    if args.follow and (args.best_period or args.oscillatory_onset):
        faults.append("--best-period and --oscillatory-onset exclude --follow")
    if faults or not isinstance(bottom, Plate) or not isinstance(top, Plate):
        raise ConfigError("\n".join(faults), tuple(faults))
    return Cell(args.rayleigh, args.prandtl, _period(args, bottom, top), bottom, top)


def _check_branch_file(args: argparse.Namespace) -> None:
    if args.branch:
        from rbsim.files.branchfile import check_ending

        check_ending(Path(args.branch))


def _period(args: argparse.Namespace, bottom: Any, top: Any) -> float:
    from rbsim.errors import ConfigError
    from rbsim.stability.marginal import critical_mode

    if args.period is not None:
        return float(args.period)
    k = critical_mode(bottom, top).wavenumber
    if k == 0.0:
        raise ConfigError(
            "--period: needed between plates of fixed flux, whose onset has no finite wavelength"
        )
    return 2.0 * math.pi / k


def _grid(args: argparse.Namespace) -> tuple[int, int] | None:
    from rbsim.errors import ConfigError

    if args.grid is None:
        return None
    try:
        nx, nz = (int(part) for part in args.grid.split(","))
    except ValueError:
        nx = nz = 0
    if min(nx, nz) < 16 or max(nx, nz) > 4096 or nx % 2 or nz % 2:
        raise ConfigError(f"--grid {args.grid}: must be NX,NZ, two even numbers from 16 to 4096")
    return nx, nz


def facts_of(roll: Roll) -> dict[str, Any]:
    """Return what is printed of a roll."""
    changes = {"nusselt_change": roll.nusselt_change, "reynolds_change": roll.reynolds_change}
    return {
        "rayleigh": roll.cell.rayleigh,
        "prandtl": roll.cell.prandtl,
        "period": roll.cell.width,
        "nusselt": roll.nusselt,
        "reynolds": roll.reynolds,
        **{name: None if math.isnan(value) else value for name, value in changes.items()},
        "residual": roll.residual,
        "grid": list(roll.grid),
    }


def _line(roll: Roll) -> str:
    cell = roll.cell
    return (
        f"Ra {cell.rayleigh:<12.6g} Pr {cell.prandtl:<10.6g} period {cell.width:<10.6g} "
        f"Nu {roll.nusselt:<12.9g} Re {roll.reynolds:.9g}"
    )


def _text(facts: dict[str, Any]) -> str:
    change = facts["nusselt_change"]
    nx, nz = facts["grid"]
    tail = "" if change is None else f"; Nu changed by {change:.0e} when the grid was doubled"
    modes = "".join(
        f"\nmode: growth {mode['growth']:.6g}, frequency {mode['frequency']:.6g} per free-fall time, "
        f"{SYMMETRY[mode['mirror']]} in the mirror, {SYMMETRY[mode['half_turn']]} in the half turn"
        for mode in facts.get("modes", [])
    )
    return (
        f"steady rolls at Ra = {facts['rayleigh']:.8g}, Pr = {facts['prandtl']:.8g}, "
        f"period {facts['period']:.8g} H\n"
        f"Nusselt number   {facts['nusselt']:.10g}\n"
        f"Reynolds number  {facts['reynolds']:.10g}\n"
        f"grid {nx} x {nz}, residual {facts['residual']:.0e}{tail}{modes}"
    )


def _write(args: argparse.Namespace, rolls: list[Roll]) -> None:
    """Keep what was computed, also when the branch ended early."""
    if not rolls:
        return
    if args.branch:
        from rbsim.files.branchfile import write_branch

        write_branch(Path(args.branch), rolls)
    if args.states:
        Path(args.states).mkdir(parents=True, exist_ok=True)
        for number, roll in enumerate(rolls):
            _write_state(Path(args.states) / f"roll_{number:04d}.h5", roll)
    if args.state:
        _write_state(Path(args.state), rolls[-1])
    if args.figure:
        _draw(Path(args.figure), rolls[-1])


def _write_state(path: Path, roll: Roll) -> None:
    from rbsim.files.checkpoint import write_single_checkpoint
    from rbsim.simulation.storing import pack
    from rbsim.stability.steady import new_equations

    write_single_checkpoint(path, pack(new_equations(roll.cell, *roll.grid), roll.state, None, {}))


def _draw(path: Path, roll: Roll) -> None:
    from rbsim.report.figures import temperature_field
    from rbsim.report.runfigures import save
    from rbsim.stability.steady import new_equations

    equations = new_equations(roll.cell, *roll.grid)
    _, _, temperature = equations.fields(roll.state)
    grid, cell = equations.grid, roll.cell
    title = f"steady rolls, Ra = {cell.rayleigh:.4g}, Pr = {cell.prandtl:.4g}, Nu = {roll.nusselt:.6g}"
    save(temperature_field(grid.x, grid.z, temperature, cell.width, title), path)
