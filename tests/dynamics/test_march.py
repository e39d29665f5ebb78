"""Appointments, strides, starts and the generator of steps."""

from __future__ import annotations

import numpy as np
import pytest

from rbsim.dynamics.cell import Cell
from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.march import March
from rbsim.dynamics.starts import conduction_with_noise, from_state, single_roll
from rbsim.dynamics.stepper import Stepper
from rbsim.dynamics.stepsize import Agenda, StepControl, Stride, plan_stride
from rbsim.errors import DivergedError
from rbsim.spectral.grid import Grid
from rbsim.spectral.team import Team
from rbsim.spectral.transforms import choose_transforms, installed_libraries


def _equations(rayleigh: float = 1e5, nx: int = 48, nz: int = 32) -> BoussinesqEquations:
    grid = Grid(nx, nz, 2.0)
    return BoussinesqEquations(Cell(rayleigh, 1.0, 2.0), grid, choose_transforms(grid, "scipy.fft"), Team(1))


def test_agenda_visits_all_multiples_and_merges_equal_times() -> None:
    agenda = Agenda({"fast": 0.1, "slow": 0.25}, 1.0)
    time, visits = 0.0, []
    while "end" not in agenda.due_at(time):
        time = agenda.next_after(time)
        visits.append((round(time, 9), agenda.due_at(time)))
    times = [t for t, _ in visits]
    assert times == [0.1, 0.2, 0.25, 0.3, 0.4, 0.5, 0.6, 0.7, 0.75, 0.8, 0.9, 1.0]
    assert dict(visits)[0.5] == ("fast", "slow")
    assert dict(visits)[1.0] == ("fast", "slow", "end")
    assert dict(visits)[0.25] == ("slow",)


@pytest.mark.parametrize(
    ("intervals", "start"),
    [({"x": 0.005, "y": 0.0033333333}, 0.3), ({"x": 1e-4, "h": 0.1}, 5e6), ({"x": 0.1, "y": 0.1000001}, 0.0)],
)
def test_agenda_always_moves_on_and_never_by_a_rounding(intervals: dict[str, float], start: float) -> None:
    agenda, time = Agenda(intervals, 1e7), start
    for _ in range(300):
        later = agenda.next_after(time)
        assert later - time > 0.4e-7
        time = later


def test_nearly_commensurate_intervals_do_not_look_like_divergence() -> None:
    equations = _equations(1e4, 16, 16)
    agenda = Agenda({"x": 0.005, "y": 0.0033333333}, 0.5)
    seen: list[str] = []
    state = conduction_with_noise(equations, 0.1, 1)
    for step in March(Stepper(equations), state, agenda, StepControl()).steps():
        seen += step.due
    assert seen.count("x") == 100
    assert seen.count("y") == 150


def test_steps_grow_again_within_a_long_stride() -> None:
    agenda, control = Agenda({}, 100.0), StepControl(courant=0.8)
    short = plan_stride(control, None, 0.0, 800.0, agenda)
    assert plan_stride(control, short.after_step(), 0.001, 10.0, agenda).step_size > 10 * short.step_size


def test_a_state_is_physical_only_if_all_of_it_is_finite_and_bounded() -> None:
    equations = _equations(1e4, 16, 16)
    state = conduction_with_noise(equations, 0.1, 1)
    assert state.is_physical()
    for values, bad in ((state.psi, np.nan), (state.theta, np.nan), (state.theta, 11.0), (state.psi, np.inf)):
        kept, values[0, 2] = values[0, 2], bad
        assert not state.is_physical()
        values[0, 2] = kept


def test_strides_divide_the_way_to_the_appointment_evenly() -> None:
    agenda, control = Agenda({"a": 0.1}, 1.0), StepControl(courant=0.5, largest=0.04)
    stride = plan_stride(control, None, 0.0, 0.0, agenda)
    assert stride == Stride(pytest.approx(0.1), 3, pytest.approx(0.1 / 3))
    assert plan_stride(control, stride, 0.0, 0.0, agenda) is stride
    cut = plan_stride(control, stride.after_step(), 0.1 / 3, 100.0, agenda)
    assert cut.target == stride.target
    assert cut.step_size * 100.0 <= 0.5
    assert cut.left * cut.step_size == pytest.approx(0.1 - 0.1 / 3)


def test_fixed_steps_ignore_the_courant_number() -> None:
    control = StepControl(largest=0.02, fixed=True)
    assert plan_stride(control, None, 0.0, 1e9, Agenda({}, 1.0)).step_size == pytest.approx(0.02)


def test_march_hits_appointments_exactly_and_respects_the_courant_limit() -> None:
    equations = _equations()
    state = conduction_with_noise(equations, 0.1, 1)
    march = March(
        Stepper(equations), state, Agenda({"probe": 0.3, "save": 1.0}, 12.0), StepControl(courant=0.6)
    )
    probes, saves, courants = [], [], []
    for step in march.steps():
        courants.append(step.courant)
        probes += [step.time] if "probe" in step.due else []
        saves += [step.time] if "save" in step.due else []
    np.testing.assert_allclose(probes, 0.3 * np.arange(1, 41), rtol=1e-12)
    np.testing.assert_allclose(saves, np.arange(1, 13), rtol=1e-12)
    assert max(courants) <= 0.6 * (1 + 1e-5)
    assert max(courants) > 0.4  # the limit decides, not the largest step


def test_a_march_cut_in_two_equals_the_whole_bit_for_bit() -> None:
    equations = _equations()
    agenda, control = Agenda({"probe": 0.3}, 6.0), StepControl()
    whole = conduction_with_noise(equations, 0.1, 1)
    for _ in March(Stepper(equations), whole, agenda, control).steps():
        pass
    part = conduction_with_noise(equations, 0.1, 1)
    march = March(Stepper(equations), part, agenda, control)
    for i, _ in enumerate(march.steps()):
        if i == 100:  # in the middle of a stride
            break
    resumed = part.copy()
    for _ in March(Stepper(equations), resumed, agenda, control, march.stride).steps():
        pass
    assert resumed.steps == whole.steps
    np.testing.assert_array_equal(resumed.theta, whole.theta)
    np.testing.assert_array_equal(resumed.psi, whole.psi)


@pytest.mark.parametrize("library", installed_libraries())
def test_threads_do_not_change_the_result(library: str) -> None:
    results = []
    for threads in (1, 2, 3):
        grid = Grid(96, 48, 2.0)
        equations = BoussinesqEquations(
            Cell(1e6, 1.0, 2.0), grid, choose_transforms(grid, library), Team(threads)
        )
        state = conduction_with_noise(equations, 0.1, 2)
        for _ in March(Stepper(equations), state, Agenda({}, 2.0), StepControl()).steps():
            pass
        results.append(state.theta)
    np.testing.assert_array_equal(results[0], results[1])
    np.testing.assert_array_equal(results[0], results[2])


def test_a_diverging_run_is_stopped_with_advice() -> None:
    equations = _equations(1e8, 24, 16)
    state = single_roll(equations, 1, 0.5)
    march = March(Stepper(equations), state, Agenda({}, 500.0), StepControl(largest=0.4, fixed=True))
    with pytest.raises(DivergedError, match=r"finer grid.*time\.courant") as caught:
        for _ in march.steps():
            pass
    assert caught.value.time > 0
    assert caught.value.step_size == pytest.approx(0.4, rel=1e-3)


def test_noise_has_the_wanted_strength_and_does_not_depend_on_the_grid() -> None:
    coarse, fine = _equations(nx=48, nz=32), _equations(nx=96, nz=64)
    a, b = conduction_with_noise(coarse, 1e-3, 5), conduction_with_noise(fine, 1e-3, 5)
    departure = coarse.fields(a)[2] - (1 - coarse.grid.z)[:, None]
    rms = np.sqrt(coarse.grid.weights_z @ np.mean(departure**2, axis=1))
    assert rms == pytest.approx(1e-3, rel=1e-12)
    # the two grids differ by the quadrature error of the strength alone
    np.testing.assert_allclose(a.theta[:14, :14], b.theta[:14, :14], rtol=1e-4)
    assert not np.array_equal(a.theta, conduction_with_noise(coarse, 1e-3, 6).theta)


def test_a_single_roll_has_its_shape() -> None:
    equations = _equations()
    temperature = equations.fields(single_roll(equations, 3, 0.2))[2]
    x, z = equations.grid.x[None, :], equations.grid.z[:, None]
    np.testing.assert_allclose(temperature, 1 - z + 0.8 * z * (1 - z) * np.cos(3 * np.pi * x), atol=1e-14)
    with pytest.raises(ValueError, match="pairs 99"):
        single_roll(equations, 99, 0.2)


def test_a_state_moves_to_a_finer_grid_and_back_unchanged() -> None:
    coarse, fine = _equations(nx=32, nz=24), _equations(nx=64, nz=48)
    state = conduction_with_noise(coarse, 0.1, 1)
    state.time, state.steps = 3.0, 7
    there = from_state(fine, state)
    assert (there.time, there.steps) == (0.0, 0)
    back = from_state(coarse, there)
    np.testing.assert_array_equal(back.theta, state.theta)
    np.testing.assert_array_equal(back.psi, state.psi)
    assert there.theta.shape == fine.new_state().theta.shape
