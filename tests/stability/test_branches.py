"""Branches: exact targets, folds, ends, and the period of most heat."""

from __future__ import annotations

import tomllib
from math import pi
from pathlib import Path

import numpy as np
import pytest

from rbsim.dynamics.cell import Cell, Plate
from rbsim.errors import NotConvergedError
from rbsim.stability.branches import best_period, branch, follow_best_period, parameter_of, with_parameter
from rbsim.stability.marginal import marginal_mode
from rbsim.stability.rolls import Roll, steady_roll

PUBLISHED = tomllib.loads((Path(__file__).parents[1] / "published" / "steady_rolls.toml").read_text("utf-8"))
CELL = Cell(1e4, 0.71, 2.0158)


@pytest.fixture(scope="module")
def start() -> Roll:
    return steady_roll(CELL, (64, 64))


@pytest.mark.parametrize(("parameter", "target"), [("rayleigh", 2e4), ("prandtl", 0.4), ("period", 1.6)])
def test_a_branch_ends_exactly_at_its_target(start: Roll, parameter: str, target: float) -> None:
    *way, last = branch(start, parameter, target)  # type: ignore[arg-type]
    assert parameter_of(last.cell, parameter) == target  # type: ignore[arg-type]
    direct = steady_roll(with_parameter(CELL, parameter, target), last.grid)  # type: ignore[arg-type]
    assert last.nusselt == pytest.approx(direct.nusselt, rel=1e-10)
    assert len(way) > 1
    assert all(roll.residual < 1e-9 for roll in [*way, last])


def test_a_branch_turns_round_a_fold(start: Roll) -> None:
    """Wide rolls at Ra = 1e4 cease to exist beyond a fold in the period near 5.5 H."""
    periods, nusselts = [], []
    for roll in branch(start, "period", 20.0):
        periods.append(roll.cell.width)
        nusselts.append(roll.nusselt)
        if periods[-1] < max(periods) - 0.2:
            break
    assert 5.4 < max(periods) < 5.6
    # beyond the fold the branch is another one: more heat at the same period
    before = np.interp(periods[-1], periods[: int(np.argmax(periods))], nusselts[: int(np.argmax(periods))])
    assert abs(before - nusselts[-1]) > 0.01


def test_a_branch_that_ends_keeps_what_was_computed_and_says_where() -> None:
    rolls: list[Roll] = []
    start = steady_roll(Cell(2500.0, 0.71, 1.6), (32, 32))
    with pytest.raises(NotConvergedError, match=r"branch in period ended near 1\.2.*onset") as caught:
        rolls.extend(branch(start, "period", 0.3))
    last = rolls[-1]
    assert f"{last.cell.width:.6g}" in caught.value.message
    marginal = marginal_mode(Plate(), Plate(), 2 * pi / last.cell.width).rayleigh
    assert marginal == pytest.approx(2500, rel=0.05)
    assert marginal < 2500


def test_a_branch_of_no_length_is_its_start(start: Roll) -> None:
    assert len(list(branch(start, "period", CELL.width))) == 1


def test_the_best_period_carries_more_heat_than_its_neighbours(start: Roll) -> None:
    best = best_period(start)
    for factor in (0.98, 1.02):
        beside = steady_roll(with_parameter(CELL, "period", factor * best.cell.width), best.grid)
        assert beside.nusselt < best.nusselt
    assert best.cell.width == pytest.approx(1.68746, abs=2e-5)  # own converged value


def test_the_best_period_shrinks_with_rayleigh(start: Roll) -> None:
    periods = [roll.cell.width for roll in follow_best_period(start, np.array([1e4, 1.5e4, 2.2e4]))]
    assert periods == sorted(periods, reverse=True)


@pytest.mark.physics
def test_the_best_period_follows_its_published_fit() -> None:
    row = PUBLISHED["best_period"]
    ra = row["rayleigh"]
    best = best_period(steady_roll(Cell(ra, row["prandtl"], 0.9), (240, 120)))
    k = 2 * pi / best.cell.width
    half = row["half_wavenumber_coefficient"] * ra ** row["half_wavenumber_exponent"]
    assert k / 2 == pytest.approx(half, rel=row["relative_tolerance"])
    fit = row["nusselt_coefficient"] * ra ** row["nusselt_exponent"]
    assert best.nusselt - 1 == pytest.approx(fit, rel=row["relative_tolerance"])
