"""Critical Rayleigh numbers and wavenumbers against published values and exact limits."""

from __future__ import annotations

import itertools
import tomllib
from math import inf, pi, sqrt
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from rbsim.dynamics.cell import Plate
from rbsim.errors import NotConvergedError
from rbsim.stability.forms import AnyPlate, ThickPlate
from rbsim.stability.marginal import critical_mode, marginal_mode, neutral_curve

PUBLISHED = tomllib.loads((Path(__file__).parents[1] / "published" / "onset.toml").read_text("utf-8"))
NO_SLIP, FREE_SLIP = Plate(), Plate("free-slip")
INSULATING = Plate("no-slip", 0.0)


def plate(text: str) -> Plate:
    motion, thermal = text.split("/")
    return Plate("no-slip" if motion == "no-slip" else "free-slip", {"T": inf, "F": 0.0}[thermal])


@pytest.mark.parametrize("row", PUBLISHED["critical"], ids=lambda row: f"{row['bottom']} {row['top']}")
def test_published_critical_values_are_met_to_their_last_digit(row: dict[str, Any]) -> None:
    mode = critical_mode(plate(row["bottom"]), plate(row["top"]), row.get("number", 0))
    assert mode.rayleigh == pytest.approx(row["rayleigh"], abs=row["rayleigh_tolerance"], rel=0)
    assert mode.wavenumber == pytest.approx(row["wavenumber"], abs=row["wavenumber_tolerance"], rel=0)


@pytest.mark.parametrize("row", PUBLISHED["printed"], ids=lambda row: str(row["rayleigh"]))
def test_digits_printed_in_1964_are_met_to_1e_5(row: dict[str, Any]) -> None:
    mode = critical_mode(plate(row["bottom"]), plate(row["top"]))
    assert mode.rayleigh == pytest.approx(row["rayleigh"], rel=row["relative_tolerance"])


def test_neutral_curve_equals_chandrasekhars_table() -> None:
    table = PUBLISHED["neutral"]
    curve = neutral_curve(NO_SLIP, NO_SLIP, np.array(table["wavenumber"]))
    np.testing.assert_allclose(curve, table["rayleigh"], atol=table["tolerance"], rtol=0)


def test_long_wave_slope_is_the_fraction_of_chapman_and_proctor() -> None:
    row = PUBLISHED["long_wave"]
    limit = marginal_mode(INSULATING, INSULATING, 0.0)
    assert limit.slope == pytest.approx(row["numerator"] / row["denominator"], rel=row["tolerance"])


def test_neutral_curve_meets_its_long_wave_expansion() -> None:
    limit = marginal_mode(INSULATING, FREE_SLIP_INSULATING, 0.0)
    near = marginal_mode(INSULATING, FREE_SLIP_INSULATING, 1e-3)
    assert near.rayleigh == pytest.approx(limit.rayleigh * (1 + limit.slope * 1e-6), rel=1e-10)
    assert near.slope == pytest.approx(limit.slope, rel=1e-5)


FREE_SLIP_INSULATING = Plate("free-slip", 0.0)


def test_thick_plates_of_the_fluids_conductivity() -> None:
    row = PUBLISHED["thick_plates"]
    mode = critical_mode(ThickPlate(ratio=row["ratio"]), ThickPlate(ratio=row["ratio"]))
    assert mode.rayleigh == pytest.approx(row["rayleigh"], abs=row["rayleigh_tolerance"], rel=0)
    assert mode.wavenumber == pytest.approx(row["wavenumber"], abs=row["wavenumber_tolerance"], rel=0)


@pytest.mark.parametrize(("ratio", "limit"), [(1e-7, 720.0), (1e7, 1707.7617771047)])
def test_thick_plates_join_both_limits(ratio: float, limit: float) -> None:
    """The departure from either limit is of the order of a root of the conductivity ratio."""
    thick = ThickPlate(ratio=ratio)
    assert critical_mode(thick, thick).rayleigh == pytest.approx(limit, rel=1e-4)


def test_turning_the_layer_over_changes_nothing() -> None:
    kinds = [NO_SLIP, FREE_SLIP, INSULATING, Plate("free-slip", 2.5), ThickPlate("no-slip", 0.4, 0.2)]
    for bottom, top in itertools.combinations(kinds, 2):
        one, other = critical_mode(bottom, top), critical_mode(top, bottom)
        assert one.rayleigh == pytest.approx(other.rayleigh, rel=1e-11)
        assert one.wavenumber == pytest.approx(other.wavenumber, rel=1e-10)


def test_conducting_plates_delay_onset_monotonically() -> None:
    biots = [0.0, 1e-6, 1e-3, 0.1, 1.0, 10.0, 1e3, inf]
    values = [critical_mode(Plate(biot=b), Plate(biot=b)).rayleigh for b in biots]
    assert values == sorted(values)
    assert values[1] == pytest.approx(values[0], rel=1e-3)


@pytest.mark.parametrize("k", [0.3, 2.0, 9.0])
@pytest.mark.parametrize("bottom", [NO_SLIP, ThickPlate("free-slip", 0.7, 0.4)], ids=["plain", "thick"])
def test_slope_equals_the_difference_quotient(bottom: AnyPlate, k: float) -> None:
    mode = marginal_mode(bottom, INSULATING, k)
    step = 1e-4 * k
    above, below = (marginal_mode(bottom, INSULATING, k + d).rayleigh for d in (step, -step))
    quotient = np.log(above / below) / ((k + step) ** 2 - (k - step) ** 2)
    # central difference: error of order (step/k)²
    assert mode.slope == pytest.approx(quotient, rel=1e-6, abs=1e-8)


@pytest.mark.parametrize("period", [0.7, 2.0, 2.0158, 9.3, 64.0])
def test_a_periodic_cell_takes_the_best_of_its_own_wavenumbers(period: float) -> None:
    mode = critical_mode(NO_SLIP, NO_SLIP, period=period)
    counts = np.arange(1, int(period) + 3)
    curve = neutral_curve(NO_SLIP, NO_SLIP, 2 * pi * counts / period)
    assert mode.rayleigh == pytest.approx(curve.min(), rel=1e-12)
    assert mode.wavenumber * period / (2 * pi) == pytest.approx(counts[np.argmin(curve)], rel=1e-12)


def test_a_periodic_cell_of_fixed_flux_starts_with_one_roll_pair() -> None:
    mode = critical_mode(INSULATING, INSULATING, period=10.0)
    assert mode.wavenumber == pytest.approx(2 * pi / 10)
    assert mode.rayleigh > 720.0


def test_marginal_shapes_of_free_slip_plates_are_sines() -> None:
    """w = q⁴ sin πz/(…): ratio θ/w = 1/(k² + π²) at onset (Rayleigh 1916)."""
    mode = marginal_mode(FREE_SLIP, FREE_SLIP, 2.0)
    z = np.linspace(0, 1, 11)
    table = np.cos(np.outer(np.arccos(1 - 2 * z), np.arange(mode.flow.size)))
    w, theta = table @ mode.flow, table @ mode.heat
    np.testing.assert_allclose(theta / theta[5], np.sin(pi * z), atol=1e-11)
    np.testing.assert_allclose(w / theta[5], (4 + pi**2) * np.sin(pi * z), atol=1e-10)


def test_wavenumbers_must_be_positive() -> None:
    with pytest.raises(ValueError, match="wavenumber 0"):
        marginal_mode(NO_SLIP, NO_SLIP, 0.0)


def test_too_thin_modes_are_reported() -> None:
    with pytest.raises(NotConvergedError, match="not settled"):
        marginal_mode(NO_SLIP, NO_SLIP, 1e4)


def test_exact_values_of_rayleigh_in_ten_digits() -> None:
    mode = critical_mode(FREE_SLIP, FREE_SLIP)
    assert mode.rayleigh == pytest.approx(27 * pi**4 / 4, rel=1e-12)
    assert mode.wavenumber == pytest.approx(pi / sqrt(2), rel=1e-12)
