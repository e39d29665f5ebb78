"""From a table of values to a checked case, or to every fault at once, one line each."""

from __future__ import annotations

import difflib
from collections.abc import Callable, Collection, Iterator, Mapping, Sequence
from math import nan
from types import UnionType
from typing import Annotated, Any, Literal, TypeVar, Union, get_args, get_origin

from pydantic import BaseModel, ValidationError
from pydantic.fields import FieldInfo

from rbsim.config.faults import Fault, FaultsError, dotted, key_at, shown
from rbsim.config.rules import broken_rules
from rbsim.errors import ConfigError

Model = TypeVar("Model", bound=BaseModel)
Place = tuple[str | int, ...]

#: A known key must look at least this much like an unknown one to be suggested; keys of the same table get a
#: bonus.
LIKENESS, SAME_TABLE = 0.7, 0.1


def checked(
    model: type[Model],
    table: Mapping[str, Any],
    source: Callable[[str], str] = lambda _: "python",
    earlier: Sequence[Fault] = (),
) -> Model:
    """Check a table of values.

    Parameters
    ----------
    model : type
        The case.
    table : mapping
        Sections and keys as in TOML.
    source : callable
        Given a dotted key, names where its value comes from.
    earlier : sequence of Fault
        Faults found before, to be reported with the others.

    Raises
    ------
    ConfigError
        With all faults at once, one line each.
    """
    faults = list(earlier)
    try:
        case = model.model_validate(table)
    except ValidationError as error:
        faults += _faults(error, model, table)
    if not faults:
        return case
    lines = tuple(dict.fromkeys(fault.line(source(fault.key)) for fault in faults))
    raise ConfigError("\n".join(lines), lines)


def allowed(field: FieldInfo) -> str:
    """Say what a key may hold.

    Parameters
    ----------
    field : FieldInfo
        A field of a section.
    """
    extra = field.json_schema_extra
    if isinstance(extra, Mapping) and extra["allowed"]:
        return str(extra["allowed"])
    limits = {name: value for item in field.metadata for name, value in _limits(item)}
    signs = {"gt": ">", "ge": ">=", "lt": "<", "le": "<="}
    bounds = [f"{sign} {_short(limits[name])}" for name, sign in signs.items() if name in limits]
    kind = _kind(field.annotation)
    if limits.get("multiple_of") == 2:
        kind = kind.replace("a whole", "an even whole")
    return f"{kind} {' and '.join(bounds)}".strip()


def meaning(field: FieldInfo) -> str:
    """Say what a key means, with its unit."""
    extra = field.json_schema_extra
    unit = extra["unit"] if isinstance(extra, Mapping) else ""
    return f"{field.description}, in {unit}" if unit not in ("", "1") else str(field.description)


def section_in(annotation: Any) -> type[BaseModel] | None:
    """Return the section that an annotation holds, alone, in a choice or in a list."""
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    return next((found for part in get_args(annotation) if (found := section_in(part))), None)


def _faults(error: ValidationError, model: type[BaseModel], table: Mapping[str, Any]) -> list[Fault]:
    details = error.errors(include_url=False)
    broken = details[0].get("ctx", {}).get("error")
    if isinstance(broken, FaultsError):
        return list(broken.faults)
    unknown = [_place(detail) for detail in details if detail["type"] == "extra_forbidden"]
    misspelt = {_nearest(place, model) for place in unknown}  # what they stand for is not missing as well
    found = [fault for detail in details for fault in _explained(detail, model, table, misspelt)]
    known = _known_part(model, table, {_place(detail) for detail in details})
    return [*found, *broken_rules(known)]


def _explained(
    detail: Any, model: type[BaseModel], table: Mapping[str, Any], misspelt: Collection[Place]
) -> Iterator[Fault]:
    """Say in one line what is wrong with a key and what is allowed."""
    place = _place(detail)
    key, value = key_at(place, table), shown(detail["input"])
    field = _field_at(model, place)
    if detail["type"] == "extra_forbidden":
        yield Fault(key, f"unknown key; {_suggestion(place, model)}", value)
    elif field is None:
        yield Fault(key, detail["msg"], value)
    elif detail["type"] == "missing":
        for leaf, inner in _required(place, field):
            if not {place, leaf} & set(misspelt):
                yield Fault(key_at(leaf, table), f"missing; must be {allowed(inner)}; {meaning(inner)}")
    else:
        wanted = "a table" if isinstance(place[-1], int) else allowed(field)
        yield Fault(key, f"must be {wanted}; {meaning(field)}", value)


def _place(detail: Any) -> Place:
    """Return the place of a fault without the word that tells the two forms of the grid apart."""
    place = tuple(detail["loc"])
    return (place[0], *place[2:]) if place[:1] == ("grid",) else place


def _field_at(model: type[BaseModel], place: Place) -> FieldInfo | None:
    field, section = None, model
    for part in place:
        if isinstance(part, int):
            continue
        field = section.model_fields.get(part)
        if field is None:
            return None
        section = section_in(field.annotation) or section
    return field


def _required(place: Place, field: FieldInfo) -> Iterator[tuple[Place, FieldInfo]]:
    """Yield the keys without default that a missing key stands for: itself, or those of its section."""
    section = section_in(field.annotation)
    if section is None:
        yield place, field
        return
    for name, inner in section.model_fields.items():
        if inner.is_required():
            yield from _required((*place, name), inner)


def _kind(annotation: Any) -> str:
    if get_origin(annotation) is Literal:
        return " or ".join(f'"{choice}"' for choice in get_args(annotation))
    if get_origin(annotation) is tuple:
        return "a list of tables"
    if get_origin(annotation) in (Union, UnionType, Annotated):
        return _kind(get_args(annotation)[0])
    return {int: "a whole number", float: "a number"}.get(annotation, "a table")


def _limits(constraint: Any) -> Iterator[tuple[str, Any]]:
    for name in ("gt", "ge", "lt", "le", "multiple_of"):
        if (value := getattr(constraint, name, None)) is not None:
            yield name, value


def _short(limit: float) -> str:
    return str(limit) if isinstance(limit, int) else f"{limit:g}".replace("e+0", "e").replace("e+", "e")


def _suggestion(place: Place, model: type[BaseModel]) -> str:
    near = _nearest(place, model)
    if near:
        return f"did you mean '{dotted(near)}'?"
    siblings = [str(known[-1]) for known in _known_places(model, place) if known[:-1] == place[:-1]]
    return f"known keys here: {', '.join(siblings)}"


def _nearest(place: Place, model: type[BaseModel]) -> Place:
    """Return the place of the known key that looks most like an unknown one; empty if none does."""
    scores = {known: _likeness(place, known) for known in _known_places(model, place)}
    best = max(scores, key=lambda known: scores[known])
    return best if scores[best] >= LIKENESS else ()


def _likeness(place: Place, known: Place) -> float:
    ratio = difflib.SequenceMatcher(None, str(place[-1]).lower(), str(known[-1])).ratio()
    return ratio + SAME_TABLE * (known[:-1] == place[:-1])


def _known_places(model: type[BaseModel], near: Place, parent: Place = ()) -> Iterator[Place]:
    """Yield the places of all keys; of a list, those of the entry that holds the place `near`."""
    for name, field in model.model_fields.items():
        place: Place = (*parent, name)
        yield place
        section = section_in(field.annotation)
        if section is not None:
            index = [part for part in near[len(place) :][:1] if isinstance(part, int)]
            yield from _known_places(
                section, near, (*place, *index) if near[: len(place)] == place else place
            )


def _known_part(model: type[BaseModel], value: Any, wrong: Collection[Place], here: Place = ()) -> Any:
    """Return an unchecked section with its defaults, and NaN for whatever is wrong."""
    table = value if isinstance(value, Mapping) else {}
    known = {
        name: _known_value(
            field, table.get(name, nan if here in wrong else field.get_default()), wrong, (*here, name)
        )
        for name, field in model.model_fields.items()
    }
    return model.model_construct(_fields_set=set(table) & set(known), **known)


def _known_value(field: FieldInfo, given: Any, wrong: Collection[Place], place: Place) -> Any:
    section = section_in(field.annotation)
    if isinstance(given, BaseModel):  # checked when it was made
        return given
    if section is None:
        return nan if place in wrong else given
    if get_origin(field.annotation) is tuple:
        entries = given if isinstance(given, list | tuple) else ()
        return tuple(_known_part(section, entry, wrong, (*place, i)) for i, entry in enumerate(entries))
    if isinstance(given, str) and place not in wrong:
        return given
    return _known_part(section, given, wrong, place)
