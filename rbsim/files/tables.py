"""Plain tables of named columns as CSV, readable by spreadsheets."""

from __future__ import annotations

import csv
import io
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rbsim.errors import ConfigError
from rbsim.files.atomic import write_text

Array = NDArray[np.float64]


def write_csv(path: Path, columns: Mapping[str, Any]) -> None:
    """Write columns of equal length with a header line, numbers in full precision.

    Parameters
    ----------
    path : Path
        File, replaced at once if it exists.
    columns : mapping of str to sequence
        Name and values of each column.
    """
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(columns)
    writer.writerows([_plain(value) for value in row] for row in zip(*columns.values(), strict=True))
    write_text(path, text.getvalue())


def _plain(value: Any) -> Any:
    return repr(float(value)) if isinstance(value, float | np.floating) else value


def column_names(path: Path) -> list[str]:
    """Return the lower-case names in the header of a CSV file.

    Raises
    ------
    ConfigError
        The file cannot be read.
    """
    return _header(_rows(path))


def read_csv(path: Path, names: Sequence[str]) -> dict[str, Array]:
    """Read named columns of numbers; other columns and lines that start with # are passed over.

    Parameters
    ----------
    path : Path
        CSV file with a header line.
    names : sequence of str
        Wanted columns; upper and lower case are the same.

    Raises
    ------
    ConfigError
        The file is missing, has no such column, or holds something that is no number.
    """
    rows = _rows(path)
    header = _header(rows)
    missing = [name for name in names if name.lower() not in header]
    if missing:
        raise ConfigError(
            f"{path}: no column {missing[0]!r}; the header is {','.join(header) or 'missing'!r}, "
            f"needed are {', '.join(names)}"
        )
    return {name: _column(path, rows[1:], header.index(name.lower()), name) for name in names}


def _rows(path: Path) -> list[list[str]]:
    try:
        text = path.read_text(encoding="utf-8-sig")
    except (OSError, UnicodeDecodeError) as error:
        raise ConfigError(f"{path}: cannot be read as text ({error}); name a CSV file") from error
    lines = [line for line in text.splitlines() if line.strip() and not line.lstrip().startswith("#")]
    return list(csv.reader(lines))


def _header(rows: list[list[str]]) -> list[str]:
    return [name.strip().lower() for name in rows[0]] if rows else []


def _column(path: Path, rows: list[list[str]], place: int, name: str) -> Array:
    values = np.empty(len(rows))
    for i, row in enumerate(rows):
        try:
            values[i] = float(row[place])
        except (ValueError, IndexError):
            found = row[place] if place < len(row) else "nothing"
            raise ConfigError(f"{path}: row {i + 1}, column {name!r}: {found!r} is not a number") from None
    return values
