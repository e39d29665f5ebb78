"""The table of quantities is complete enough for files, tables and figures."""

from __future__ import annotations

import pytest
from matplotlib.mathtext import MathTextParser

from rbsim.diagnostics.nusselt import DEFINITIONS
from rbsim.diagnostics.quantities import HISTORY, PROFILES, READINGS, Quantity

EVERY = (*HISTORY, *PROFILES, *READINGS)
UNITS = {"1", "Delta", "H", "free-fall time", "free-fall velocity", "free-fall velocity squared"}


def test_names_symbols_and_meanings_tell_quantities_apart() -> None:
    for field in ("name", "symbol", "meaning"):
        assert len({getattr(quantity, field) for quantity in EVERY}) == len(EVERY), field


@pytest.mark.parametrize("quantity", EVERY, ids=lambda quantity: quantity.name)
def test_every_quantity_can_be_a_variable_and_a_label(quantity: Quantity) -> None:
    assert quantity.name.isidentifier()
    assert quantity.unit in UNITS
    MathTextParser("agg").parse(quantity.symbol)


def test_every_definition_of_the_nusselt_number_is_recorded_with_its_storage() -> None:
    names = {quantity.name for quantity in HISTORY}
    assert {f"nusselt_{definition}" for definition in DEFINITIONS} <= names
    # the storage of the volume mean is zero by definition
    assert {f"storage_{definition}" for definition in DEFINITIONS if definition != "volume"} <= names
