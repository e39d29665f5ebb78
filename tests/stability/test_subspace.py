"""Symmetry classes: complete, disjoint and left alone by the equations."""

from __future__ import annotations

import numpy as np
import pytest

from rbsim.dynamics.cell import Cell, Plate
from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.stability.steady import new_equations
from rbsim.stability.subspace import Sign, Subspace


@pytest.fixture(scope="module")
def equations() -> BoussinesqEquations:
    return new_equations(Cell(3e3, 1.0, 2.0), 24, 16)


def test_classes_add_up_to_all_real_states(equations: BoussinesqEquations) -> None:
    sizes = [Subspace(equations, m, h).size for m in (-1, 1) for h in (-1, 1)]
    state = equations.new_state()
    real = 2 * (state.theta.size + state.psi.size) - state.theta.shape[0] - state.psi.shape[0]
    assert sum(sizes) == Subspace(equations, 0, 0).size == real


@pytest.mark.parametrize("mirror", [-1, 0, 1])
@pytest.mark.parametrize("half_turn", [-1, 0, 1])
def test_vectors_survive_the_round_trip(
    equations: BoussinesqEquations, mirror: Sign, half_turn: Sign
) -> None:
    space = Subspace(equations, mirror, half_turn)
    vector = np.random.default_rng(1).standard_normal(space.size)
    state = space.unpack(vector)
    assert np.array_equal(space.pack(state.theta, state.psi), vector)


@pytest.mark.parametrize("half_turn", [0, 1])
@pytest.mark.parametrize("mirror", [0, 1])
def test_the_equations_keep_even_states_even(
    equations: BoussinesqEquations, mirror: Sign, half_turn: Sign
) -> None:
    space = Subspace(equations, mirror, half_turn)
    state = space.unpack(np.random.default_rng(2).standard_normal(space.size))
    heat, flow = np.empty_like(state.theta), np.empty_like(state.psi)
    equations.explicit_terms(state, heat, flow)
    kept = space.unpack(space.pack(heat, flow))
    np.testing.assert_allclose(kept.theta, heat, atol=1e-11 * np.abs(heat).max())
    np.testing.assert_allclose(kept.psi, flow, atol=1e-11 * np.abs(flow).max())


def test_unequal_plates_break_the_half_turn() -> None:
    equations = new_equations(Cell(3e3, 1.0, 2.0, Plate(), Plate("free-slip")), 24, 16)
    space = Subspace(equations, 1, 1)
    state = space.unpack(np.random.default_rng(2).standard_normal(space.size))
    flow = equations.flow.apply_stiffness(state.psi)
    heat = equations.heat.apply_stiffness(state.theta)
    kept = space.unpack(space.pack(heat, flow))
    assert np.abs(kept.psi - flow).max() > 1e-3 * np.abs(flow).max()
