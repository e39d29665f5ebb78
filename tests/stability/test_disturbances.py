"""Growth rates against closed forms, an amplitude equation and the marginal curve."""

from __future__ import annotations

import tomllib
from pathlib import Path

import numpy as np
import pytest

from rbsim.dynamics.cell import Plate
from rbsim.stability.disturbances import growth_rates
from rbsim.stability.forms import ThickPlate
from rbsim.stability.marginal import critical_mode, marginal_mode

PUBLISHED = tomllib.loads((Path(__file__).parents[1] / "published" / "onset.toml").read_text("utf-8"))
NO_SLIP, FREE_SLIP = Plate(), Plate("free-slip")


def free_slip_rate(rayleigh: float, prandtl: float, k: float, n: int) -> float:
    """(σ + q²)(σ/Pr + q²) q² = Ra k², q² = k² + n²π² (Rayleigh 1916, exact)."""
    q2 = k**2 + (n * np.pi) ** 2
    return float(np.roots([q2 / prandtl, q2**2 * (1 + 1 / prandtl), q2**3 - rayleigh * k**2]).real.max())


@pytest.mark.parametrize(
    ("rayleigh", "prandtl", "k"), [(3e3, 2.0, 3.0), (700.0, 0.1, 2.2), (1e6, 1e3, 5.0), (1e8, 1.0, 20.0)]
)
def test_free_slip_rates_are_exact(rayleigh: float, prandtl: float, k: float) -> None:
    modes = growth_rates((FREE_SLIP, FREE_SLIP), rayleigh, prandtl, k, count=2)
    for n, mode in enumerate(modes, 1):
        exact = free_slip_rate(rayleigh, prandtl, k, n)
        assert mode.rate == pytest.approx(exact, rel=1e-11, abs=1e-10)


@pytest.mark.parametrize("plates", [(NO_SLIP, Plate("free-slip", 0.0)), (ThickPlate(), Plate(biot=3.0))])
def test_growth_vanishes_on_the_neutral_curve(plates: tuple[Plate, Plate]) -> None:
    marginal = marginal_mode(*plates, 2.2)
    mode = growth_rates(plates, marginal.rayleigh, 0.71, 2.2)[0]
    assert abs(mode.rate) < 1e-10


@pytest.mark.parametrize("prandtl", [0.025, 0.71, 7.0, 1e4])
def test_growth_near_onset_follows_the_amplitude_equation(prandtl: float) -> None:
    row = PUBLISHED["amplitude_equation"]
    critical = critical_mode(NO_SLIP, NO_SLIP)
    excess = 1e-5
    rates = [
        growth_rates((NO_SLIP, NO_SLIP), critical.rayleigh * (1 + s * excess), prandtl, critical.wavenumber)[
            0
        ].rate
        for s in (1, -1)
    ]
    tau = 2 * excess / (rates[0] - rates[1])
    expected = (prandtl + row["tau_shift"]) / (row["tau_scale"] * prandtl)
    assert tau == pytest.approx(expected, rel=row["tau_relative_tolerance"])


def test_curvature_of_the_neutral_curve_is_the_coherence_length() -> None:
    row = PUBLISHED["amplitude_equation"]
    critical = critical_mode(NO_SLIP, NO_SLIP)
    step = 1e-3
    sides = [marginal_mode(NO_SLIP, NO_SLIP, critical.wavenumber + s * step).rayleigh for s in (1, -1)]
    square = (sum(sides) / (2 * critical.rayleigh) - 1) / step**2
    assert square == pytest.approx(row["xi_square"], abs=row["xi_tolerance"])


def test_shapes_obey_continuity_and_the_plates() -> None:
    z = np.linspace(0, 1, 201)
    shapes = growth_rates((NO_SLIP, FREE_SLIP), 2e3, 1.0, 2.0)[0].shapes(z)
    w, u = shapes["vertical_velocity"], shapes["horizontal_velocity"]
    # differences of second order on 201 points
    np.testing.assert_allclose(-np.gradient(w, z)[1:-1] / 2.0, u[1:-1], atol=2e-3 * np.abs(u).max())
    assert np.abs(shapes["temperature"]).max() == pytest.approx(1.0)
    assert max(abs(w[0]), abs(w[-1]), abs(u[0])) < 1e-8 * np.abs(w).max()
    assert abs(u[-1]) > 0.1 * np.abs(u).max()


@pytest.mark.parametrize("name", ["rayleigh", "prandtl", "wavenumber"])
def test_numbers_must_be_positive(name: str) -> None:
    numbers = {"rayleigh": 2e3, "prandtl": 1.0, "wavenumber": 3.0, name: -1.0}
    with pytest.raises(ValueError, match=f"{name} -1"):
        growth_rates((NO_SLIP, NO_SLIP), *numbers.values())
