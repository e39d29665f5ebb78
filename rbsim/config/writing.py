"""Writing a case as TOML that reads back to the same case."""

from __future__ import annotations

import json
from collections.abc import Mapping
from typing import Any

from rbsim.config.schema import Case


def case_to_toml(case: Case) -> str:
    """Return the case as TOML, keys that were never set left at their defaults.

    Parameters
    ----------
    case : Case
        Any valid case.

    Returns
    -------
    str
        TOML; `load_case` gives an equal case back.
    """
    table = case.model_dump(exclude_none=True)
    allowed = {"noise": {"amplitude", "seed"}, "roll": {"amplitude", "pairs"}, "state": {"path"}}[
        case.start.kind
    ]
    table["start"] = {key: value for key, value in table["start"].items() if key in {"kind", *allowed}}
    return "\n".join(_lines(table)) + "\n"


def _lines(table: Mapping[str, Any], prefix: str = "") -> list[str]:
    """Write plain values first, then sub-tables, then lists of tables."""
    plain = {key: value for key, value in table.items() if not isinstance(value, dict | list | tuple)}
    lines = [f"{key} = {_value(value)}" for key, value in plain.items()]
    for key, value in table.items():
        name = f"{prefix}{key}"
        if isinstance(value, dict):
            header = ["", f"[{name}]"] if any(not isinstance(v, dict) for v in value.values()) else []
            lines += [*header, *_lines(value, f"{name}.")]
        elif isinstance(value, list | tuple):
            for entry in value:
                lines += ["", f"[[{name}]]", *_lines(entry, f"{name}.")]
    return lines


def _value(value: Any) -> str:
    # JSON texts are TOML texts once DEL, which JSON leaves bare, is escaped
    return (
        json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")
        if isinstance(value, str)
        else repr(value)
    )
