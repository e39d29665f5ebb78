"""Branch tables."""

from __future__ import annotations

from pathlib import Path

import pytest
import xarray

from rbsim.dynamics.cell import Cell
from rbsim.errors import ConfigError
from rbsim.files.branchfile import COLUMNS, write_branch
from rbsim.files.tables import read_csv
from rbsim.stability.rolls import Roll, roll_path


@pytest.fixture(scope="module")
def rolls() -> list[Roll]:
    return list(roll_path(Cell(4e3, 1.0, 2.0)))


def test_both_formats_hold_the_same_numbers(rolls: list[Roll], tmp_path: Path) -> None:
    for name in ("branch.csv", "branch.h5"):
        write_branch(tmp_path / name, rolls)
    table = read_csv(tmp_path / "branch.csv", [column.name for column in COLUMNS])
    with xarray.open_dataset(tmp_path / "branch.h5") as data:
        for column in COLUMNS:
            assert data[column.name].values.tolist() == table[column.name].tolist()
            assert data[column.name].dims == ("point",)
    assert table["nusselt"].tolist() == [roll.nusselt for roll in rolls]


def test_other_endings_are_refused(rolls: list[Roll], tmp_path: Path) -> None:
    with pytest.raises(ConfigError, match=r"must be \.csv or \.h5"):
        write_branch(tmp_path / "branch.txt", rolls)
