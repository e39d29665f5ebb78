"""Writing a case as TOML that reads back to the same case."""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping
from typing import Any

from rbsim.config.rules import START_KEYS
from rbsim.config.schema import Case


def case_to_toml(case: Case) -> str:
    """Return the whole case as TOML, defaults included.

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
    own = ("kind", *START_KEYS[case.start.kind])
    table["start"] = {key: value for key, value in table["start"].items() if key in own}
    return "\n".join(_lines(table)) + "\n"


def _lines(table: Mapping[str, Any], prefix: str = "") -> Iterator[str]:
    """Write values first, then tables, then lists of tables."""
    for key, value in table.items():
        if not isinstance(value, dict | tuple):
            yield f"{key} = {_value(value)}"
    for key, value in table.items():
        if isinstance(value, dict):
            if any(not isinstance(inner, dict) for inner in value.values()):
                yield from ("", f"[{prefix}{key}]")
            yield from _lines(value, f"{prefix}{key}.")
        elif isinstance(value, tuple):
            for entry in value:
                yield from ("", f"[[{prefix}{key}]]", *_lines(entry))


def _value(value: str | float) -> str:
    # texts of a case are printable, and for those JSON and TOML agree
    return json.dumps(value, ensure_ascii=False) if isinstance(value, str) else repr(value)
