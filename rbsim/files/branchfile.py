"""Branches of steady rolls as tables: CSV for spreadsheets, HDF5 for xarray."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import numpy as np

from rbsim.diagnostics.quantities import Quantity
from rbsim.errors import ConfigError
from rbsim.files.hdf5 import add_dimension, add_variable, composing
from rbsim.files.tables import write_csv
from rbsim.stability.rolls import Roll

#: Columns of a branch table.
COLUMNS = (
    Quantity("rayleigh", "Ra", "1", "Rayleigh number"),
    Quantity("prandtl", "Pr", "1", "Prandtl number"),
    Quantity("wavelength", "Γ", "H", "horizontal period of the roll pair"),
    Quantity("nusselt", "Nu", "1", "Nusselt number"),
    Quantity("reynolds", "Re", "1", "Reynolds number of the rms velocity"),
    Quantity("residual", "r", "1", "norm of the preconditioned residual over that of the state"),
    Quantity("nx", "nx", "1", "dealiased points in x"),
    Quantity("nz", "nz", "1", "dealiased points in z"),
)


def write_branch(path: Path, rolls: Sequence[Roll]) -> None:
    """Write a branch; the ending of the file, .csv or .h5, chooses the format.

    Parameters
    ----------
    path : Path
        File, replaced at once if it exists.
    rolls : sequence of Roll
        Rolls in the order of the branch.

    Raises
    ------
    ConfigError
        The ending is neither .csv nor .h5.
    RunFolderError
        The file cannot be written.
    """
    check_ending(path)
    rows = [
        (r.cell.rayleigh, r.cell.prandtl, r.cell.width, r.nusselt, r.reynolds, r.residual, *r.grid)
        for r in rolls
    ]
    columns = dict(zip((c.name for c in COLUMNS), zip(*rows, strict=True), strict=True))
    if path.suffix.lower() == ".csv":
        write_csv(path, columns)
        return
    with composing(path) as file:
        add_dimension(file, "point", np.arange(len(rolls)), "1", "place on the branch")
        for quantity in COLUMNS:
            add_variable(file, quantity, ("point",), columns[quantity.name])


def _row(roll: Roll) -> tuple[float, ...]:
    cell = roll.cell
    return (cell.rayleigh, cell.prandtl, cell.width, roll.nusselt, roll.reynolds, roll.residual, *roll.grid)


def check_ending(path: Path) -> None:
    """Check the ending of a branch file before anything is computed.

    Raises
    ------
    ConfigError
        The ending is neither .csv nor .h5.
    """
    if path.suffix.lower() not in (".csv", ".h5"):
        raise ConfigError(f"{path}: the ending must be .csv or .h5")
