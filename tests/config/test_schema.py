"""Every key of a case is described, limited and frozen."""

from __future__ import annotations

from collections.abc import Iterator

import pytest
from pydantic import BaseModel, ValidationError
from pydantic.fields import FieldInfo

from rbsim.config.checking import allowed, section_in
from rbsim.config.loading import build_case
from rbsim.config.schema import Case
from rbsim.diagnostics.quantities import HISTORY, PROFILES, READINGS
from rbsim.errors import ConfigError


def _fields(model: type[BaseModel], prefix: str = "") -> Iterator[tuple[str, FieldInfo]]:
    for name, field in model.model_fields.items():
        yield f"{prefix}{name}", field
        section = section_in(field.annotation)
        if section is not None:
            yield from _fields(section, f"{prefix}{name}.")


FIELDS = dict(_fields(Case))


@pytest.mark.parametrize("key", FIELDS)
def test_every_key_says_what_it_means_and_what_it_takes(key: str) -> None:
    field = FIELDS[key]
    assert field.description
    assert allowed(field)
    if allowed(field).split(" >")[0].endswith(("a number", "whole number")):
        assert isinstance(field.json_schema_extra, dict)
        assert field.json_schema_extra["unit"]
        assert "<= " in allowed(field)


def test_every_section_forbids_other_keys_and_later_changes() -> None:
    sections = {section_in(field.annotation) for field in FIELDS.values()} - {None}
    assert len(sections) >= 9
    for section in (Case, *sections):
        assert section is not None
        assert section.model_config["extra"] == "forbid"
        assert section.model_config["frozen"]
    with pytest.raises(ValidationError):
        build_case(rayleigh=1e5).numbers.rayleigh = 2e5


def test_a_case_made_directly_obeys_the_rules_too() -> None:
    with pytest.raises(ValidationError, match=r"time\.step.*must be a number > 0 and < 0.1"):
        Case.model_validate({"numbers": {"rayleigh": 1e5}, "time": {"end": 0.1, "step": 0.2}})


def test_a_case_can_be_a_key() -> None:
    assert len({build_case(rayleigh=1e5), build_case(rayleigh=1e5), build_case(rayleigh=2e5)}) == 2


def test_names_of_thermometers_never_name_other_records() -> None:
    """Every name under which a reading could hide a history or a profile is refused."""
    for record in (*HISTORY, *PROFILES):
        for reading in READINGS:
            name = record.name.removeprefix(f"{reading.name}_")
            if name != record.name:
                with pytest.raises(ConfigError, match="name records of the run file"):
                    build_case(rayleigh=1e5).with_thermometer(name, x=0.0, z=0.5)
