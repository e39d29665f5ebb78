"""Assignments `section.key=value`."""

from __future__ import annotations

from typing import Any

import pytest

from rbsim.config.overrides import apply_overrides


def _changed(table: dict[str, Any], *assignments: str) -> dict[str, Any]:
    _, faults = apply_overrides(table, assignments)
    assert not faults
    return table


def _thermometers() -> dict[str, Any]:
    return {"thermometers": [{"name": "low", "z": 0.1}, {"name": "high", "z": 0.9}]}


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("3e6", 3e6),
        (" 7 ", 7),
        ("true", True),
        ("free-slip", "free-slip"),
        ('"two words"', "two words"),
        ("two words", "two words"),
        ("/tmp/a run", "/tmp/a run"),
        ("a=b", "a=b"),
        ("{nx = 64, nz = 32}", {"nx": 64, "nz": 32}),
        ("1\nother = 2", "1\nother = 2"),
        ("", ""),
    ],
)
def test_values_are_toml_and_bare_words_are_texts(text: str, value: object) -> None:
    assert _changed({}, f"section.key={text}") == {"section": {"key": value}}


def test_the_last_assignment_wins_and_neighbours_stay() -> None:
    table = {"time": {"end": 1.0, "courant": 0.5}}
    assert _changed(table, "time.end=2", "time.end=3") == {"time": {"end": 3, "courant": 0.5}}


def test_thermometers_go_by_name_or_index() -> None:
    table = _changed(_thermometers(), "thermometers.high.z=0.8", "thermometers.0.z=0.2")
    assert [t["z"] for t in table["thermometers"]] == [0.2, 0.8]


def test_keys_are_named_as_messages_name_them() -> None:
    keys, faults = apply_overrides(_thermometers(), ["thermometers.1.z=2", "time.end=5", "nonsense"])
    assert keys == ("thermometers.high.z", "time.end", "nonsense")
    assert [fault.key for fault in faults] == ["nonsense"]


def test_a_table_replaces_a_word() -> None:
    assert _changed({"grid": "auto"}, "grid.nx=64", "grid.nz=32") == {"grid": {"nx": 64, "nz": 32}}


def test_a_new_kind_of_start_forgets_the_keys_of_the_old_one() -> None:
    table = {"start": {"kind": "noise", "seed": 4, "amplitude": 0.1}}
    assert _changed(table, "start.pairs=2", "start.kind=roll") == {"start": {"kind": "roll", "pairs": 2}}


@pytest.mark.parametrize(
    "assignment", ["thermometers.middle.z=1", "thermometers.2.z=1", "thermometers.low=1"]
)
def test_what_cannot_be_assigned_is_a_fault(assignment: str) -> None:
    table = _thermometers()
    _, faults = apply_overrides(table, [assignment])
    assert len(faults) == 1
    assert table == _thermometers()
