"""Leading eigenvalues of a steady roll: Arnoldi on the time-stepping simulator, then Newton on each pair.

A small disturbance of a steady state obeys M v̇ = J v. The simulator's own flow over a few free-fall times
singles out the modes that grow most (ARPACK finds them); Newton's method on J x = σ M x, with the
preconditioner of the steady states, then removes the error of the time steps.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from itertools import product
from math import ceil, exp, log

import numpy as np
from scipy.optimize import brentq
from scipy.sparse.linalg import ArpackNoConvergence, LinearOperator, eigs

from rbsim.dynamics.equations import BoussinesqEquations
from rbsim.dynamics.stepper import Stepper
from rbsim.errors import NotConvergedError
from rbsim.spectral.banded import ComplexArray
from rbsim.spectral.grid import Array
from rbsim.stability.kernels import length
from rbsim.stability.krylov import minimal_residual
from rbsim.stability.rolls import Roll, refined, solved
from rbsim.stability.steady import SteadyProblem, new_equations
from rbsim.stability.subspace import Sign

#: Free-fall times the flow takes for one Arnoldi vector, and the Courant number of its steps.
HORIZON, COURANT = 4.0, 0.5
#: Size of the disturbance that is followed, relative to the roll.
SMALL = 1e-6
#: Accuracy of ARPACK, and of the eigenvalue after Newton's method (residual relative to the mode).
ARNOLDI_TOLERANCE, TOLERANCE = 1e-3, 1e-10
#: Most Newton and Krylov iterations for one pair, and the accuracy of each linear solve.
NEWTON_LIMIT, KRYLOV_LIMIT, FORCING = 8, 1500, 1e-4
#: Angular frequency above which a mode counts as oscillating.
OSCILLATING = 1e-3
#: Eigenvalues closer than this are a pair of complex conjugates.
SAME = 1e-3
#: Spectral tail of the rolls whose stability is followed.
MODE_TAIL = 1e-6
#: Steps in ln Ra on the way to a change of sign, and the most of them.
BRACKET_STEP, BRACKET_LIMIT = 0.1, 23


@dataclass(frozen=True, eq=False)
class RollMode:
    """A disturbance x e^{σt} of a steady roll.

    Parameters
    ----------
    growth : float
        Real part of σ in 1/free-fall time.
    frequency : float
        Angular frequency, the imaginary part of σ, not negative.
    mirror, half_turn : {1, −1, 0}
        Symmetry class as in `Subspace`; 0 where the plates leave none.
    residual : float
        Norm of L⁻¹ (J x − σ M x) over that of x.
    vector : complex ndarray
        x in the subspace of its class.
    """

    growth: float
    frequency: float
    mirror: Sign
    half_turn: Sign
    residual: float
    vector: ComplexArray


class _Linearised:
    """J, M and the flow of small disturbances of one symmetry class."""

    def __init__(self, equations: BoussinesqEquations, roll: Roll, mirror: Sign, half_turn: Sign) -> None:
        self.problem = SteadyProblem(equations, mirror, half_turn)
        self.symmetry = (mirror, half_turn)
        whole = SteadyProblem(equations, 0, 0)
        self._base = whole.space.pack(roll.state.theta, roll.state.psi)
        self._size = length(self._base)
        self._equations, self._roll = equations, roll
        self._pairs = (equations.heat, equations.flow)
        self._factors = (equations.heat.new_factors(), equations.flow.new_factors())
        for pair, factors in zip(self._pairs, self._factors, strict=True):
            pair.factorise(0.0, factors)

    def jacobian(self, vector: Array) -> Array:
        """Return J x; the central quotient is exact, since the equations are quadratic."""
        scale = self._size / max(length(vector), 1e-300)
        sides = [self._explicit(vector, s * scale) for s in (1.0, -1.0)]
        return np.asarray(self.problem.implicit(vector) + (sides[0] - sides[1]) / (2.0 * scale))

    def _explicit(self, vector: Array, scale: float) -> Array:
        state = self.problem.space.unpack(scale * vector)
        state.theta += self._roll.state.theta
        state.psi += self._roll.state.psi
        heat, flow = np.empty_like(state.theta), np.empty_like(state.psi)
        self._equations.explicit_terms(state, heat, flow)
        return self.problem.space.pack(heat, flow)

    def mass(self, vector: Array) -> Array:
        """Return M x."""
        state = self.problem.space.unpack(vector)
        heat, flow = self._pairs
        return self.problem.space.pack(heat.apply_mass(state.theta), flow.apply_mass(state.psi))

    def rate(self, vector: Array) -> Array:
        """Return M⁻¹ J x."""
        state = self.problem.space.unpack(self.jacobian(vector))
        theta, psi = (
            pair.solve(factors, part)
            for pair, factors, part in zip(self._pairs, self._factors, (state.theta, state.psi), strict=True)
        )
        return self.problem.space.pack(theta, psi)

    def flow_map(self) -> Callable[[Array], Array]:
        """Return the map of a disturbance over the horizon, by the simulator itself."""
        stepper, base = Stepper(self._equations), self._roll.state
        steps = ceil(HORIZON * stepper.evaluate(base) / COURANT)
        stepper.set_step_size(HORIZON / steps)

        def advance(vector: Array) -> Array:
            scale = SMALL * self._size / length(vector)
            state = self.problem.space.unpack(scale * vector)
            state.theta += base.theta
            state.psi += base.psi
            for _ in range(steps):
                stepper.evaluate(state)
                stepper.advance(state)
            change = self.problem.space.pack(state.theta - base.theta, state.psi - base.psi)
            return np.asarray(change / scale)

        return advance


def leading_modes(roll: Roll, count: int = 2) -> list[RollMode]:
    """Return the disturbances of a roll that grow fastest, from all symmetry classes.

    Parameters
    ----------
    roll : Roll
        A steady roll.
    count : int
        Modes of each class; a pair of complex conjugates counts once.

    Returns
    -------
    list of RollMode
        Fastest growth first. One mode, the translation of the roll, has σ = 0.

    Raises
    ------
    NotConvergedError
        An eigenvalue was not found.
    """
    equations = new_equations(roll.cell, *roll.grid)
    half_turns: tuple[Sign, ...] = (1, -1) if roll.cell.bottom == roll.cell.top else (0,)
    mirrors: tuple[Sign, ...] = (1, -1)
    modes = [
        mode
        for mirror, half_turn in product(mirrors, half_turns)
        for mode in _modes_of_class(_Linearised(equations, roll, mirror, half_turn), count)
    ]
    return sorted(modes, key=lambda mode: -mode.growth)


def _modes_of_class(linear: _Linearised, count: int) -> list[RollMode]:
    size = linear.problem.space.size
    wanted = 2 * count + 1
    operator = LinearOperator((size, size), matvec=linear.flow_map(), dtype=np.float64)
    start = np.random.default_rng(0).standard_normal(size)
    try:
        factors, vectors = eigs(
            operator, k=wanted, which="LM", v0=start, ncv=4 * wanted + 12, tol=ARNOLDI_TOLERANCE, maxiter=40
        )
    except ArpackNoConvergence as error:
        raise NotConvergedError(f"leading modes of symmetry {linear.symmetry}: {error}") from error
    found: list[RollMode] = []
    for i in np.argsort(-np.abs(factors)):
        vector = np.ascontiguousarray(vectors[:, i])
        rate = _quotient(linear, vector)
        known = any(
            abs(complex(m.growth, m.frequency) - _upper(rate)) < SAME * (1.0 + abs(rate)) for m in found
        )
        if len(found) < count and not known:
            found.append(_polished(linear, vector, rate))
    return found


def _upper(rate: complex) -> complex:
    return complex(rate.real, abs(rate.imag))


def _quotient(linear: _Linearised, vector: ComplexArray) -> complex:
    """Return x* M⁻¹ J x / x* x."""
    image = _rate(linear, vector)
    return complex(np.vdot(vector, image) / np.vdot(vector, vector))


def _rate(linear: _Linearised, vector: ComplexArray) -> ComplexArray:
    return linear.rate(vector.real.copy()) + 1j * linear.rate(vector.imag.copy())


def _polished(linear: _Linearised, vector: ComplexArray, rate: complex) -> RollMode:
    """Solve L⁻¹ (J x − σ M x) = 0 for x and σ together, at fixed x₀* x."""
    vector = vector / np.linalg.norm(vector)
    fixed = vector.conj()
    for _ in range(NEWTON_LIMIT):
        rest = _defect(linear, vector, rate)
        residual = float(np.linalg.norm(rest))
        if residual < TOLERANCE:
            mirror, half_turn = linear.symmetry
            return RollMode(rate.real, abs(rate.imag), mirror, half_turn, residual, vector)
        vector, rate = _corrected(linear, (vector, rate), rest, fixed)
    raise NotConvergedError(
        f"mode of symmetry {linear.symmetry} near σ = {rate:.4g}: residual {residual:.1e} after "
        f"{NEWTON_LIMIT} Newton iterations; use a finer grid"
    )


def _defect(linear: _Linearised, vector: ComplexArray, rate: complex) -> ComplexArray:
    """Return L⁻¹ (J x − σ M x)."""
    real, imaginary = (_side(linear, np.ascontiguousarray(part)) for part in (vector.real, vector.imag))
    return np.asarray(real[0] + 1j * imaginary[0] - rate * (real[1] + 1j * imaginary[1]))


def _side(linear: _Linearised, part: Array) -> tuple[Array, Array]:
    precondition = linear.problem.precondition
    return precondition(linear.jacobian(part)), precondition(linear.mass(part))


def _corrected(
    linear: _Linearised, pair: tuple[ComplexArray, complex], rest: ComplexArray, fixed: ComplexArray
) -> tuple[ComplexArray, complex]:
    vector, rate = pair
    weight = _inertia(linear, vector)

    def apply(flat: Array) -> Array:
        long = flat.view(np.complex128)
        above = _defect(linear, long[:-1], rate) - long[-1] * weight
        return np.append(above, fixed @ long[:-1]).view(np.float64)

    right = np.append(-rest, 0.0).view(np.float64)
    change = minimal_residual(apply, right, FORCING, KRYLOV_LIMIT).vector.view(np.complex128)
    return vector + change[:-1], rate + complex(change[-1])


def _inertia(linear: _Linearised, vector: ComplexArray) -> ComplexArray:
    """Return L⁻¹ M x."""
    precondition, mass = linear.problem.precondition, linear.mass
    parts = (precondition(mass(np.ascontiguousarray(part))) for part in (vector.real, vector.imag))
    real, imaginary = parts
    return np.asarray(real + 1j * imaginary)


def followed_mode(mode: RollMode, before: Roll, roll: Roll) -> RollMode:
    """Return the mode of a roll that continues a mode of a neighbouring one.

    Parameters
    ----------
    mode : RollMode
        Mode of the neighbouring roll.
    before, roll : Roll
        The neighbour and the roll.
    """
    old = SteadyProblem(new_equations(before.cell, *before.grid), mode.mirror, mode.half_turn).space
    linear = _Linearised(new_equations(roll.cell, *roll.grid), roll, mode.mirror, mode.half_turn)
    space, grid = linear.problem.space, linear.problem.equations.grid
    parts = []
    for part in (mode.vector.real, mode.vector.imag):
        state = old.unpack(np.ascontiguousarray(part)).resized(grid.modes_z, grid.modes_x)
        parts.append(space.pack(state.theta, state.psi))
    vector = parts[0] + 1j * parts[1]
    return _polished(linear, vector, _quotient(linear, vector))


def oscillatory_onset(roll: Roll, mode: RollMode, tolerance: float = 1e-7) -> tuple[Roll, RollMode]:
    """Return the roll and the mode at which an oscillatory disturbance neither grows nor decays.

    The Rayleigh number is bracketed by steps from the given roll and then bisected (Brent 1973).

    Parameters
    ----------
    roll : Roll
        Steady roll close to the change of stability.
    mode : RollMode
        Its oscillatory mode.
    tolerance : float
        Relative accuracy of the Rayleigh number.

    Raises
    ------
    NotConvergedError
        The growth rate does not change its sign within a factor of ten in Ra.
    """
    known: dict[float, tuple[Roll, RollMode]] = {log(roll.cell.rayleigh): (roll, mode)}

    def growth(log_rayleigh: float) -> float:
        before, last = known[min(known, key=lambda point: abs(point - log_rayleigh))]
        cell = replace(before.cell, rayleigh=exp(log_rayleigh))
        following = refined(solved(cell, before.grid, before.state), MODE_TAIL)
        known[log_rayleigh] = (following, followed_mode(last, before, following))
        return known[log_rayleigh][1].growth

    first = log(roll.cell.rayleigh)
    stride = BRACKET_STEP if mode.growth < 0.0 else -BRACKET_STEP
    for _ in range(BRACKET_LIMIT):
        if growth(first + stride) * mode.growth <= 0.0:
            break
        first += stride
    else:
        raise NotConvergedError(
            f"oscillatory onset: growth keeps its sign from Ra = {roll.cell.rayleigh:.6g} to "
            f"{exp(first):.6g}; start closer"
        )
    root = float(brentq(growth, first, first + stride, xtol=tolerance))
    return known[min(known, key=lambda point: abs(point - root))]
