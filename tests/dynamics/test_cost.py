"""What a step costs in memory: bounded storage, and nothing allocated in the loop."""

from __future__ import annotations

import tracemalloc

import pytest

from rbsim.dynamics.cell import Cell
from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.starts import conduction_with_noise
from rbsim.dynamics.stepper import Stepper, compile_loops
from rbsim.spectral.grid import Grid
from rbsim.spectral.team import Team
from rbsim.spectral.transforms import choose_transforms

GRID = Grid(256, 128, 2.0)
FIELD = 8 * GRID.nx * GRID.nz

#: Beyond this the loop would hold an array of the grid: the interpreter's own small objects stay far below.
SMALL = FIELD // 8


@pytest.mark.parametrize("threads", [1, 2])
def test_storage_stays_below_forty_fields_and_steps_allocate_nothing(threads: int) -> None:
    pytest.importorskip("ducc0", reason="scipy.fft allocates its results; the promise is that of ducc0.fft")
    compile_loops()
    tracemalloc.start()
    try:
        cell = Cell(1e6, 1.0, 2.0)
        equations = BoussinesqEquations(cell, GRID, choose_transforms(GRID, "ducc0.fft"), Team(threads))
        stepper, state = Stepper(equations), conduction_with_noise(equations, 0.1, 1)
        stepper.set_step_size(1e-3)
        stepper.evaluate(state)
        stepper.advance(state)
        before = tracemalloc.get_traced_memory()[0]
        tracemalloc.reset_peak()
        for _ in range(5):
            stepper.evaluate(state)
            stepper.advance(state)
        after, peak = tracemalloc.get_traced_memory()
    finally:
        tracemalloc.stop()
    assert before < 40 * FIELD
    assert after - before < SMALL
    assert peak - before < SMALL
