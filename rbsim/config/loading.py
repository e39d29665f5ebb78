"""Reading a case from TOML with overrides; every fault becomes one line that says what is allowed."""

from __future__ import annotations

import difflib
import tomllib
import types
import typing
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from pydantic import BaseModel, ValidationError

from rbsim.config.schema import Case
from rbsim.errors import ConfigError

#: What the checker inserts into places to tell the two kinds of grid apart.
GRID_TAGS = ("word", "points")


def load_case(path: str | Path, overrides: Sequence[str] = ()) -> Case:
    """Read a case from a TOML file.

    Parameters
    ----------
    path : str or Path
        Configuration file; a relative ``start.path`` in it is relative to its folder.
    overrides : sequence of str
        Assignments ``section.key=value`` that replace what the file says; values in TOML notation, bare
        words are texts.

    Raises
    ------
    ConfigError
        With all faults at once, one line for each.
    """
    file = Path(path)
    table = _read(file)
    for override in overrides:
        _assign(table, override)
    start = table.get("start")
    if isinstance(start, dict) and isinstance(start.get("path"), str):
        start["path"] = str((file.parent / start["path"]).absolute())
    return case_from_table(table, str(file))


def case_from_table(table: Mapping[str, Any], source: str) -> Case:
    """Check a table of values and return the case.

    Parameters
    ----------
    table : mapping
        Sections and keys as in TOML.
    source : str
        Where the values come from, for messages.

    Raises
    ------
    ConfigError
        With all faults at once.
    """
    try:
        return Case.model_validate(table)
    except ValidationError as error:
        faults = tuple(dict.fromkeys(f"{source}: {_fault(detail)}" for detail in error.errors()))
        raise ConfigError("\n".join(faults), faults) from None


def build_case(
    *,
    rayleigh: float,
    prandtl: float = 1.0,
    aspect_ratio: float = 2.0,
    end: float = 100.0,
    **sections: Any,
) -> Case:
    """Return a case from Python values.

    Parameters
    ----------
    rayleigh, prandtl, aspect_ratio, end : float
        Pure numbers, period in heights, last time in free-fall times.
    **sections
        Further sections as in TOML, for example ``grid={"nx": 256, "nz": 128}``.

    Raises
    ------
    ConfigError
        With all faults at once.
    """
    table: dict[str, Any] = {
        "numbers": {"rayleigh": rayleigh, "prandtl": prandtl},
        "cell": {"aspect_ratio": aspect_ratio},
        **sections,
    }
    table["time"] = {"end": end, **table.get("time", {})}
    return case_from_table(table, "python")


def _read(file: Path) -> dict[str, Any]:
    try:
        return tomllib.loads(file.read_bytes().decode("utf-8"))
    except FileNotFoundError:
        raise ConfigError(f"{file}: no such file; name a TOML configuration, see configs/") from None
    except IsADirectoryError:
        raise ConfigError(f"{file}: is a folder; name a TOML configuration, see configs/") from None
    except UnicodeDecodeError as error:
        raise ConfigError(f"{file}: byte {error.start} is not UTF-8 text; save the file as UTF-8") from None
    except tomllib.TOMLDecodeError as error:
        raise ConfigError(f"{file}: not valid TOML: {error}") from None
    except OSError as error:
        raise ConfigError(f"{file}: cannot be read: {error.strerror}") from None


def _assign(table: dict[str, Any], override: str) -> None:
    key, mark, text = override.partition("=")
    names = [name.strip() for name in key.split(".")]
    if not mark or not all(names):
        raise ConfigError(f"--set {override}: must look like section.key=value")
    try:
        value = tomllib.loads(f"value = {text}")["value"]
    except tomllib.TOMLDecodeError:
        value = text.strip()
    place: Any = table
    for name in names[:-1]:
        if isinstance(place, list) and name.isdigit() and int(name) < len(place):
            place = place[int(name)]
        elif isinstance(place, dict):
            if not isinstance(place.get(name), dict | list):
                place[name] = {}
            place = place[name]
        else:
            raise ConfigError(f"--set {override}: there is no table {name!r} to change")
    if not isinstance(place, dict):
        raise ConfigError(f"--set {override}: {'.'.join(names[:-1])} is not a table")
    place[names[-1]] = value


def _fault(detail: Any) -> str:
    """Say in one line what is wrong with a key and what is allowed."""
    place = [str(part) for part in detail["loc"] if part not in GRID_TAGS]
    key = ".".join(place)
    kind, context, value = detail["type"], detail.get("ctx", {}), detail["input"]
    if kind == "extra_forbidden":
        return f"key '{key}' is unknown{_nearest(place)}"
    if kind == "missing":
        return f"key '{key}' is missing: {_describe(place)}"
    message = str(context["error"]) if kind == "value_error" else _rule(kind, context, detail["msg"])
    if message.startswith("key '"):
        return message
    shown = "" if isinstance(value, dict) else f" = {value!r}"
    return f"key '{key}'{shown}: {message}{_meaning(place)}"


def _rule(kind: str, context: Mapping[str, Any], message: str) -> str:
    """Turn the kind of a fault into what is allowed."""
    rules = {
        "greater_than": "must be greater than {gt}",
        "greater_than_equal": "must be at least {ge}",
        "less_than_equal": "must be at most {le}",
        "literal_error": "must be {expected}",
        "finite_number": "must be a finite number",
        "float_type": "must be a number",
        "int_type": "must be a whole number",
        "string_type": "must be a text",
        "string_too_short": "must not be empty",
        "string_too_long": "must have at most {max_length} characters",
        "tuple_type": "must be a list of tables, written [[thermometers]]",
        "model_type": "must be a table",
        "union_tag_not_found": 'must be "auto" or a table',
        "model_attributes_type": "must be a table",
        "string_pattern_mismatch": "must begin with a letter and hold letters, digits and _ only",
    }
    return rules[kind].format(**context) if kind in rules else message.lower()


def _meaning(place: Sequence[str]) -> str:
    text = _describe(place)
    return f" ({text})" if text else ""


def _describe(place: Sequence[str]) -> str:
    """Return the description of a key."""
    model: Any = Case
    text = ""
    for name in place:
        if name.isdigit():
            continue
        fields = model.model_fields if _is_model(model) else {}
        if name not in fields:
            return ""
        text, model = fields[name].description or "", _inner(fields[name].annotation)
    return text


def _nearest(place: Sequence[str]) -> str:
    """Suggest the known key that looks most like the unknown one, or list what is allowed."""
    model: Any = Case
    for name in place[:-1]:
        if not name.isdigit():
            model = _inner(model.model_fields[name].annotation)
    known = list(model.model_fields)
    near = difflib.get_close_matches(place[-1], known, n=1, cutoff=0.5)
    return f"; did you mean '{near[0]}'?" if near else f"; allowed here: {', '.join(known)}"


def _inner(annotation: Any) -> Any:
    """Find the section inside an annotation."""
    if _is_model(annotation):
        return annotation
    if typing.get_origin(annotation) in (typing.Union, types.UnionType, tuple, typing.Annotated):
        for part in typing.get_args(annotation):
            inner = _inner(part)
            if _is_model(inner):
                return inner
    return annotation


def _is_model(thing: Any) -> bool:
    return isinstance(thing, type) and issubclass(thing, BaseModel)
