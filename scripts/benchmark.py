"""Speed and memory of the time stepping: `python scripts/benchmark.py [--json FILE] [--grids 256x128,...]`.

For each grid: time of one step, of its transforms alone (the same library, blocks, sizes and threads, in
turns with the steps), their ratio (target 1.35), memory of the solver in fields of the dealiased grid (target
40), and, up to 256x128, the time of scripts/plain_solver.py (target: at least 3 times slower).
Medians over repeated runs; other work on the machine disturbs all columns alike, so trust the ratios.
"""

from __future__ import annotations

import argparse
import json
import platform
import statistics
import time
import tracemalloc
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
from plain_solver import PlainSolver

from rbsim.dynamics.cell import Cell
from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.state import State
from rbsim.dynamics.stepper import Stepper
from rbsim.spectral.grid import Grid
from rbsim.spectral.team import Team
from rbsim.spectral.transforms import choose_threads, choose_transforms

GRIDS = "128x64,192x96,256x128,512x256,1024x512,2048x1024"
LARGEST_PLAIN = 256 * 128
COLUMNS = {
    "grid": ">10",
    "library": ">10",
    "threads": ">7",
    "step_ms": ">9.3f",
    "transforms_ms": ">13.3f",
    "ratio": ">6.2f",
    "fields": ">6.1f",
    "bytes_per_point": ">15.0f",
    "plain_ms": ">9.2f",
    "plain_ratio": ">11.1f",
}


def smooth_state(equations: BoussinesqEquations) -> State:
    """Return a state whose spectra fill all modes, as in a turbulent run, without denormal numbers."""
    rng, state = np.random.default_rng(1), equations.new_state()
    for values in (state.theta, state.psi):
        rows, columns = values.shape
        decay = np.exp(-12.0 * (np.arange(rows)[:, None] / rows + np.arange(columns) / columns))
        values[:] = (
            1e-3 * decay * (rng.standard_normal(values.shape) + 1j * rng.standard_normal(values.shape))
        )
        values[:, 0] = values[:, 0].real
    return state


def in_turns(works: list[Callable[[], None]], repeats: int) -> list[float]:
    """Return the median time of each work in milliseconds, taken in turns."""
    times: list[list[float]] = [[] for _ in works]
    for _ in range(repeats):
        for work, record in zip(works, times, strict=True):
            start = time.perf_counter()
            work()
            record.append(1e3 * (time.perf_counter() - start))
    return [statistics.median(record) for record in times]


def measure(nx: int, nz: int, threads: int | None, library: str | None) -> dict[str, Any]:
    """Measure one grid."""
    grid, layer = Grid(nx, nz, 2.0), Cell(1e7, 1.0, 2.0)
    team = Team(threads or choose_threads(grid))
    tracemalloc.start()
    equations = BoussinesqEquations(layer, grid, choose_transforms(grid, library), team)
    stepper, state = Stepper(equations), smooth_state(equations)
    stepper.set_step_size(1e-4)

    def step() -> None:
        stepper.evaluate(state)
        stepper.advance(state)

    step()
    used = tracemalloc.get_traced_memory()[0]
    tracemalloc.stop()
    works: list[Callable[[], None]] = [step, transforms_of_one_step(equations)]
    if nx * nz <= LARGEST_PLAIN:
        works.append(plain_work(layer, grid, smooth_state(equations)))
    medians = in_turns(works, max(5, min(60, 20_000_000 // (nx * nz))))
    plain = medians[2] if len(medians) > 2 else None
    return {
        "grid": f"{nx}x{nz}",
        "library": equations.transforms.name,
        "threads": team.threads,
        "step_ms": medians[0],
        "transforms_ms": medians[1],
        "ratio": medians[0] / medians[1],
        "fields": used / (8 * nx * nz),
        "bytes_per_point": used / (nx * nz),
        "plain_ms": plain,
        "plain_ratio": plain / medians[0] if plain else None,
    }


def transforms_of_one_step(equations: BoussinesqEquations) -> Callable[[], None]:
    """Return the transforms of three evaluations, in the shares and blocks of a step and nothing else."""
    transforms, grid, team, block = equations.transforms, equations.grid, equations.team, equations.block
    stack = np.zeros((3, grid.nz, grid.modes_x), dtype=complex)
    result = np.zeros((4, grid.nz, grid.modes_x), dtype=complex)
    scratch = [(np.zeros((3, block, grid.nx)), np.zeros((4, block, grid.nx))) for _ in range(team.threads)]

    def through_rows(start: int, stop: int, member: int) -> None:
        values, products = scratch[member]
        for first in range(start, stop, block):
            last = min(stop, first + block)
            transforms.rows_to_values(first, last, values[:, : last - first])
            transforms.values_to_rows(first, last, products[:, : last - first])

    def work() -> None:
        for _ in range(3):
            team.share(grid.modes_x, lambda a, b, _: transforms.columns_to_rows(stack, a, b))
            team.share(grid.nz, through_rows)
            team.share(grid.modes_x, lambda a, b, _: transforms.rows_to_columns(result, a, b))

    return work


def plain_work(layer: Cell, grid: Grid, state: State) -> Callable[[], None]:
    """Return a step of the plain solver."""
    solver = PlainSolver(layer, grid, 1e-4)
    return lambda: solver.step(state.theta, state.psi) and None


def cell(value: Any, form: str) -> str:
    """Format one entry of the table; what was not measured is a dash."""
    return f"{'-':{form.split('.')[0]}}" if value is None else f"{value:{form}}"


def main() -> None:
    """Print the table and write JSON on request."""
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument("--grids", default=GRIDS, help="comma-separated NXxNZ")
    parser.add_argument("--threads", type=int, help="threads (default: chosen by size)")
    parser.add_argument(
        "--library", choices=("scipy.fft", "ducc0.fft"), help="default: the fastest installed"
    )
    parser.add_argument("--json", help="also write the rows to this file")
    options = parser.parse_args()
    print(" ".join(f"{name:{form.split('.')[0]}}" for name, form in COLUMNS.items()))
    measure(32, 32, 1, options.library)  # compiles the loops, so that their memory is not counted
    rows = []
    for size in options.grids.split(","):
        nx, nz = map(int, size.split("x"))
        rows.append(measure(nx, nz, options.threads, options.library))
        print(" ".join(cell(rows[-1][name], form) for name, form in COLUMNS.items()), flush=True)
    if options.json:
        table = {"machine": platform.processor() or platform.machine(), "rows": rows}
        Path(options.json).write_text(json.dumps(table, indent=1) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
