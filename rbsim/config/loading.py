"""Reading a case from TOML with overrides, or building it from Python; every fault becomes one line."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from pydantic import BaseModel

from rbsim.config.checking import checked
from rbsim.config.faults import Fault, on_one_line, shown
from rbsim.config.overrides import apply_overrides
from rbsim.config.schema import Case
from rbsim.errors import ConfigError


def load_case(path: str | Path, overrides: Sequence[str] = ()) -> Case:
    """Read a case from a TOML file.

    Parameters
    ----------
    path : str or Path
        Configuration file. A relative ``start.path`` in it is relative to its folder; one in an override is
        relative to the working folder.
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
    _anchor(table, file.parent)
    changed, refused = apply_overrides(table, overrides)
    _anchor(table, Path())

    def source(key: str) -> str:
        return f"{_called(file)} (--set)" if _covers(changed, key) else _called(file)

    return checked(Case, table, source, refused)


def case_from_table(table: Mapping[str, Any], source: str = "python") -> Case:
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
        With all faults at once, one line for each.
    """
    return checked(Case, dict(table), lambda _: source)


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
    rayleigh, prandtl : float
        Pure numbers.
    aspect_ratio : float
        Horizontal period Γ in cell heights.
    end : float
        Last time in free-fall times.
    **sections
        Further keys and sections as in TOML, for example ``grid={"nx": 256, "nz": 128}``; what they say wins
        over the parameters above. A relative ``start.path`` is relative to the working folder.

    Raises
    ------
    ConfigError
        With all faults at once, one line for each.
    """
    table = {name: _plain(section) for name, section in sections.items()}
    known = {
        "numbers": {"rayleigh": rayleigh, "prandtl": prandtl},
        "cell": {"aspect_ratio": aspect_ratio},
        "time": {"end": end},
    }
    for name, values in known.items():
        section = table.get(name, {})
        table[name] = {**values, **section} if isinstance(section, Mapping) else section
    _anchor(table, Path())
    return case_from_table(table)


def check_start_exists(case: Case, source: str) -> None:
    """Refuse a case whose ``start.path`` does not exist.

    Not part of reading a case: the case of a finished run stays readable when its origin is gone.

    Parameters
    ----------
    case : Case
        The case.
    source : str
        Where it comes from, for the message.

    Raises
    ------
    ConfigError
        If there is neither a file nor a folder at that path.
    """
    path = case.start.path
    if path is not None and not Path(path).exists():
        problem = "must be an existing run folder or checkpoint; none is there"
        fault = Fault("start.path", problem, f'"{on_one_line(path)}"')
        raise ConfigError(fault.line(source))


def _read(file: Path) -> dict[str, Any]:
    name = _called(file)
    try:
        content = file.read_bytes()
    except FileNotFoundError:
        raise ConfigError(f"{name}: no such file; name a configuration in TOML, see configs/") from None
    except IsADirectoryError:
        raise ConfigError(f"{name}: is a folder; name a configuration in TOML, see configs/") from None
    except (OSError, ValueError) as error:  # a ValueError means a null character in the name
        reason = getattr(error, "strerror", None) or str(error)
        raise ConfigError(
            f"{name}: cannot be read ({reason}); name a readable configuration in TOML"
        ) from None
    try:
        return _parsed(content.decode("utf-8-sig"), name)
    except UnicodeDecodeError as error:
        line = content[: error.start].count(b"\n") + 1
        what = f"byte 0x{content[error.start]:02x} is not UTF-8 text"
        raise ConfigError(f"{name}: line {line}: {what}; save the file as UTF-8") from None


def _parsed(text: str, name: str) -> dict[str, Any]:
    try:
        return tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise ConfigError(f"{name}: {_syntax_fault(text, str(error))}") from None
    except ValueError:
        raise ConfigError(f"{name}: not valid TOML: a whole number has too many digits") from None
    except RecursionError:
        raise ConfigError(f"{name}: not valid TOML: brackets are nested too deeply") from None


def _syntax_fault(text: str, message: str) -> str:
    """Say which line is wrong, and how."""
    lines = text.rstrip("\r\n").split("\n")
    found = re.fullmatch(r"(.*) \(at line (\d+), column \d+\)", message, re.DOTALL)
    what, line = (found[1], int(found[2])) if found else (message.split(" (at ")[0], len(lines))
    if what == "Cannot overwrite a value":
        what = "the key is given twice"
    content = lines[min(line, len(lines)) - 1].strip()
    return f"line {line}: {shown(content)} is not valid TOML: {on_one_line(what)}; correct this line"


def _anchor(table: Mapping[str, Any], folder: Path) -> None:
    """Make the path of a start absolute."""
    start = table.get("start")
    if not isinstance(start, dict):
        return
    path = start.get("path")
    if isinstance(path, Path) or (isinstance(path, str) and path):
        start["path"] = str((folder / path).absolute())


def _plain(section: Any) -> Any:
    if isinstance(section, BaseModel):
        return section.model_dump(exclude_unset=True)
    return dict(section) if isinstance(section, Mapping) else section


def _called(file: Path) -> str:
    return on_one_line(str(file))


def _covers(changed: Sequence[str], key: str) -> bool:
    """Return whether a key, its table or a part of it was changed."""
    return any(f"{key}.".startswith(f"{own}.") or own.startswith(f"{key}.") for own in changed)
