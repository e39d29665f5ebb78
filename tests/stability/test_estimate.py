"""Onset from tables: laws recovered, intervals that cover, faults that say what is missing."""

from __future__ import annotations

from math import pi

import numpy as np
import pytest

from rbsim.dynamics.cell import Cell, Plate
from rbsim.errors import ConfigError
from rbsim.stability.disturbances import growth_rates
from rbsim.stability.estimate import onset_from_growth, onset_from_nusselt
from rbsim.stability.marginal import critical_mode
from rbsim.stability.rolls import steady_roll

ONSET = critical_mode(Plate(), Plate())
EXCESS = np.array([1.04, 1.08, 1.13, 1.2, 1.27, 1.34, 1.41, 1.48, 1.7, 2.5])


def law(rayleigh: np.ndarray, critical: float) -> np.ndarray:
    x = np.maximum(0.0, 1 - critical / rayleigh)
    return 1 + 1.43 * x + 0.25 * x**2


def test_an_exact_law_is_recovered_in_any_order() -> None:
    rayleigh = np.concatenate([900 * EXCESS[::-1], [500.0, 700.0]])
    found = onset_from_nusselt(rayleigh, law(rayleigh, 900.0))
    assert found.rayleigh == pytest.approx(900.0, rel=1e-7)
    assert found.coefficients == pytest.approx((1.43, 0.25), rel=1e-5)
    assert found.used.tolist() == (rayleigh <= 1350).tolist()
    np.testing.assert_allclose(found.nusselt(rayleigh), law(rayleigh, 900.0), rtol=1e-8)


def test_simulated_rolls_give_the_onset_of_theory() -> None:
    """The law is cut after its second term, which costs 6e-4 in Ra_c over this range."""
    period = 2 * pi / ONSET.wavenumber
    rayleigh = ONSET.rayleigh * EXCESS[:8]
    nusselt = np.array([steady_roll(Cell(float(ra), 0.71, period), (32, 32)).nusselt for ra in rayleigh])
    found = onset_from_nusselt(rayleigh, nusselt)
    assert found.rayleigh == pytest.approx(ONSET.rayleigh, rel=1e-3)
    assert found.coefficients[0] == pytest.approx(1.41, rel=0.03)  # Schlüter, Lortz & Busse 1965


def test_the_interval_covers_the_truth_as_often_as_it_says() -> None:
    draws = np.random.default_rng(11)
    rayleigh = np.concatenate([[1200.0, 1450.0, 1600.0], 1707.76 * EXCESS])
    hits = 0
    for _ in range(200):
        noise = 1 + 0.005 * draws.standard_normal(rayleigh.size)
        found = onset_from_nusselt(rayleigh, law(rayleigh, 1707.76) * noise)
        hits += found.interval[0] < 1707.76 < found.interval[1]
    assert 180 <= hits <= 200  # 190 expected; four standard deviations are 12


def test_growth_rates_extrapolate_to_the_onset_of_theory() -> None:
    rayleigh = np.linspace(1550.0, 1900.0, 8)
    k = ONSET.wavenumber
    rates = np.array([growth_rates((Plate(), Plate()), float(ra), 7.0, k)[0].rate for ra in rayleigh])
    found = onset_from_growth(rayleigh, rates)
    assert found.rayleigh == pytest.approx(ONSET.rayleigh, rel=1e-5)
    # 1/τ0 of Cross & Hohenberg 1993
    assert found.coefficients[0] == pytest.approx(19.65 * 7 / (7 + 0.5117), rel=1e-3)
    np.testing.assert_allclose(found.growth(rayleigh), rates, atol=2e-3)


def test_growth_rates_with_noise_are_covered() -> None:
    draws = np.random.default_rng(12)
    rayleigh = np.linspace(1550.0, 1900.0, 12)
    hits = 0
    for _ in range(200):
        rates = 18.3 * (rayleigh / 1707.76 - 1) + 0.05 * draws.standard_normal(12)
        found = onset_from_growth(rayleigh, rates)
        hits += found.interval[0] < 1707.76 < found.interval[1]
    assert 178 <= hits <= 200


@pytest.mark.parametrize(
    ("rayleigh", "nusselt", "words"),
    [
        ([1e3, 2e3, 3e3], [1.0, 1.2, 1.4], "2 points convect"),
        ([1e3, 2e3, 4e3, 8e3, 1.6e4], [1.0, 1.2, 1.6, 2.0, 2.5], "convecting points lie below 1.5 times"),
        ([1e3, -2e3], [1.0, 1.2], "Ra positive"),
        ([1e3, 2e3], [1.0, float("nan")], "must be finite"),
        ([1e3, 2e3], [1.0], "same length"),
    ],
)
def test_faults_say_what_is_missing(rayleigh: list[float], nusselt: list[float], words: str) -> None:
    with pytest.raises(ConfigError, match=words):
        onset_from_nusselt(np.array(rayleigh), np.array(nusselt))


def test_growth_rates_without_an_onset_are_refused() -> None:
    rayleigh = np.linspace(1e3, 2e3, 6)
    with pytest.raises(ConfigError, match="do not vanish"):
        onset_from_growth(rayleigh, 5 + (rayleigh / 1500 - 1) ** 2)
    with pytest.raises(ConfigError, match="5 are needed"):
        onset_from_growth(rayleigh[:3], rayleigh[:3])
