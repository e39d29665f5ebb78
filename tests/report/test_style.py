"""Labels carry symbols and units; numbers are written as people write them."""

from __future__ import annotations

import pytest

from rbsim.diagnostics.quantities import Quantity
from rbsim.report.style import axis_label, number


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (1.0, "1"),
        (0.71, "0.71"),
        (1707.76, "1708"),
        (1e6, "$10^{6}$"),
        (2.5e8, r"$2.5 \times 10^{8}$"),
        (1e-5, "$10^{-5}$"),
    ],
)
def test_numbers_in_headlines(value: float, text: str) -> None:
    assert number(value) == text


@pytest.mark.parametrize(
    ("unit", "text"),
    [("1", "mean $q$"), ("Delta", r"mean $q$ ($\Delta$)"), ("free-fall time", "mean $q$ (free-fall times)")],
)
def test_units_in_labels(unit: str, text: str) -> None:
    assert axis_label(Quantity("q", "$q$", unit, "something"), "mean") == text
