"""Assignments `section.key=value` that replace what a file says."""

from __future__ import annotations

import tomllib
from collections.abc import Sequence
from typing import Any

from rbsim.config.faults import Fault, FaultsError, dotted, key_at, shown

Place = tuple[str | int, ...]

#: How an assignment must look.
FORM = "must be written section.key=value, for example numbers.rayleigh=3e6"


def apply_overrides(table: dict[str, Any], assignments: Sequence[str]) -> tuple[tuple[str, ...], list[Fault]]:
    """Change a table in place.

    A new ``start.kind`` empties the table ``start`` first, since each kind has keys of its own.

    Parameters
    ----------
    table : dict
        Sections and keys as in TOML.
    assignments : sequence of str
        Each ``section.key=value``: the value in TOML notation, bare words are texts; a thermometer goes by
        its name or its index from 0.

    Returns
    -------
    tuple of str
        Dotted names of the changed keys.
    list of Fault
        Assignments that could not be made.
    """
    changes, places, faults = [], list[Place](), list[Fault]()
    for assignment in assignments:
        try:
            changes.append(_parsed(assignment))
        except FaultsError as error:
            faults += error.faults
    if any(names == ["start", "kind"] for names, _ in changes):
        table["start"] = {}
    for names, value in changes:
        try:
            places.append(_assign(table, names, value))
        except FaultsError as error:
            faults += error.faults
    keys = [key_at(place, table) for place in places]
    return (*keys, *(fault.key for fault in faults)), faults


def _parsed(assignment: str) -> tuple[list[str], Any]:
    key, mark, text = assignment.partition("=")
    names = [name.strip() for name in key.split(".")]
    if not mark or not all(names):
        raise FaultsError((Fault(dotted(names), FORM),))
    text = text.strip()
    try:
        values = tomllib.loads(f"value = {text}")
        if list(values) == ["value"]:
            return names, values["value"]
    except (ValueError, RecursionError):
        if text.startswith(('"', "'", "[", "{")):
            problem = (
                "must be a value as TOML writes it; check quotes and brackets, also those the shell takes"
            )
            raise FaultsError((Fault(dotted(names), problem, shown(text)),)) from None
    return names, text


def _assign(table: dict[str, Any], names: Sequence[str], value: Any) -> Place:
    """Set a value and return its place."""
    here: Any = table
    place: Place = ()
    for name in names[:-1]:
        step: str | int = name if isinstance(here, dict) else _index(here, name, names)
        if isinstance(here, dict) and not isinstance(here.get(name), dict | list):
            here[name] = {}
        here, place = here[step], (*place, step)
    if not isinstance(here, dict):
        raise FaultsError((Fault(dotted(names), "cannot be set: name a key of one entry of the list"),))
    here[names[-1]] = value
    return (*place, names[-1])


def _index(entries: Any, name: str, names: Sequence[str]) -> int:
    """Return which entry of a list a name or an index means."""
    entries = entries if isinstance(entries, list) else []
    known = [entry.get("name") if isinstance(entry, dict) else None for entry in entries]
    labels = [str(index) for index in range(len(known))]
    for choices in (known, labels):
        if name in choices:
            return choices.index(name)
    problem = f"no entry of the list is called {shown(name)}; there are {shown(known)}"
    raise FaultsError((Fault(dotted(names), problem),))
