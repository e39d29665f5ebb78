"""One fault of a configuration, and how it reads."""

from __future__ import annotations

import json
import math
import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

#: Longest piece of a value that a message repeats.
LONGEST_VALUE = 60


@dataclass(frozen=True)
class Fault:
    """What is wrong with one key.

    Parameters
    ----------
    key : str
        Dotted name of the key, as ``--set`` takes it.
    problem : str
        What is allowed, and what to do.
    value : str
        What was given, as `shown` writes it; empty if nothing was.
    """

    key: str
    problem: str
    value: str = ""

    def line(self, source: str) -> str:
        """Return the fault as one line.

        Parameters
        ----------
        source : str
            Where the value comes from.
        """
        value = f" = {self.value}" if self.value else ""
        return f"{source}: key '{self.key}'{value}: {self.problem}"


class FaultsError(ValueError):
    """Faults found before it was known where the values came from.

    Parameters
    ----------
    faults : tuple of Fault
        At least one.
    """

    def __init__(self, faults: tuple[Fault, ...]) -> None:
        super().__init__(faults)
        self.faults = faults

    def __str__(self) -> str:
        return "; ".join(fault.line("values") for fault in self.faults)


def dotted(place: Iterable[str | int]) -> str:
    """Return the dotted name of a place; odd characters of a key are quoted and escaped."""
    parts = (str(part) for part in place)
    return ".".join(part if re.fullmatch(r"[A-Za-z0-9_-]+", part) else _quoted(part) for part in parts)


def key_at(place: Sequence[str | int], table: Mapping[str, Any]) -> str:
    """Return the dotted name of a place in a table, a thermometer named by its name where that is clear.

    Parameters
    ----------
    place : sequence of str or int
        Keys, and indices of lists from 0.
    table : mapping
        The whole configuration.
    """
    match place:
        case ("thermometers", int(index), str(key), *deeper) if key != "name":
            names = [_name_of(entry) for entry in table["thermometers"]]
            name = names[index]
            if isinstance(name, str) and name.isidentifier() and names.count(name) == 1:
                return dotted(("thermometers", name, key, *deeper))
    return dotted(place)


def _name_of(entry: Any) -> Any:
    return entry.get("name") if isinstance(entry, Mapping) else getattr(entry, "name", None)


def shown(value: Any) -> str:
    """Return a value as one short line in the notation of TOML."""
    text = _notation(value)
    return text if len(text) <= LONGEST_VALUE else text[: LONGEST_VALUE - 1] + "…"


def on_one_line(text: str) -> str:
    """Return a text with its line breaks and control characters escaped."""
    return text if text.isprintable() else _quoted(text)[1:-1]


def _notation(value: Any) -> str:
    match value:
        case None:
            return "None"
        case bool():
            return str(value).lower()
        case str():
            return _quoted(value)
        case int():
            # decimal digits of a huge number cost quadratic time and are limited by the interpreter
            return str(value) if abs(value) < 10**60 else hex(value)
        case float():
            return repr(float(value)) if math.isfinite(value) else str(float(value))
        case Mapping():
            return (
                "{"
                + ", ".join(f"{dotted((key,))} = {_notation(inner)}" for key, inner in value.items())
                + "}"
            )
        case list() | tuple():
            return "[" + ", ".join(_notation(inner) for inner in value) + "]"
    return on_one_line(str(value))


def _quoted(text: str) -> str:
    return json.dumps(text, ensure_ascii=not text.isprintable())
