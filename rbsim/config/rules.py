"""Rules across fields: values that are allowed one by one, but not together.

Every rule looks at a whole case and yields its faults. Where a value is known to be wrong already, NaN stands
in its place, so that no comparison finds a second fault.
"""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from rbsim.config.faults import Fault, key_at, shown

#: Keys of [start] that belong to each kind.
START_KEYS = {
    "noise": ("amplitude", "seed"),
    "roll": ("amplitude", "pairs"),
    "state": ("path",),
}

#: Names whose records would be called like profiles and histories of a run file, as `temperature_mean` is.
RESERVED_NAMES = ("mean", "profile", "rms_profile")

#: Shortest interval between recorded samples in free-fall times.
SHORTEST_INTERVAL = 1e-4


def broken_rules(case: Any) -> Iterator[Fault]:
    """Yield every broken rule of a case, or of what is known of one.

    Parameters
    ----------
    case : Case
        Sections as attributes.
    """
    yield from _start_keys_match_its_kind(case.start)
    yield from _rolls_fit_the_grid(case)
    yield from _step_is_shorter_than_the_run(case.time)
    yield from _fields_come_rarely_or_never(case.output)
    yield from _thermometers_are_inside(case)
    yield from _names_are_distinct(case.thermometers)


def _start_keys_match_its_kind(start: Any) -> Iterator[Fault]:
    allowed = START_KEYS.get(start.kind) if isinstance(start.kind, str) else None
    if allowed is None:
        return
    if start.kind == "state" and "path" not in start.model_fields_set:
        yield Fault("start.path", 'missing; kind = "state" needs the path of a run folder or checkpoint')
    for key in sorted(start.model_fields_set - {"kind", *allowed}):
        value = getattr(start, key)
        if value == value:  # not already known to be wrong
            problem = f'does not belong to start.kind = "{start.kind}", which takes {" and ".join(allowed)}'
            yield Fault(f"start.{key}", f"{problem}; remove it", shown(value))


def _rolls_fit_the_grid(case: Any) -> Iterator[Fault]:
    if case.start.kind != "roll" or isinstance(case.grid, str):
        return
    most = (case.grid.nx - 1) // 3  # the highest mode that quadratic products leave free of aliasing errors
    if case.start.pairs > most:
        problem = (
            f"must be a whole number >= 1 and <= {most} on a grid with nx = {case.grid.nx}; use a finer grid"
        )
        yield Fault("start.pairs", problem, shown(case.start.pairs))


def _step_is_shorter_than_the_run(time: Any) -> Iterator[Fault]:
    if time.step is not None and time.step >= time.end:
        problem = f"must be a number > 0 and < {time.end:g} (time.end); shorten it, or raise time.end"
        yield Fault("time.step", problem, shown(time.step))


def _fields_come_rarely_or_never(output: Any) -> Iterator[Fault]:
    if 0 < output.field_interval < SHORTEST_INTERVAL:
        problem = f"must be 0 (no snapshots) or a number >= {SHORTEST_INTERVAL:g}; raise it"
        yield Fault("output.field_interval", problem, shown(output.field_interval))


def _thermometers_are_inside(case: Any) -> Iterator[Fault]:
    width = case.cell.aspect_ratio
    for index, thermometer in enumerate(case.thermometers):
        if thermometer.x >= width:
            key = key_at(("thermometers", index, "x"), {"thermometers": case.thermometers})
            problem = f"must be a number >= 0 and < {width:g} (cell.aspect_ratio)"
            yield Fault(key, f"{problem}; x and x - {width:g} are the same place", shown(thermometer.x))


def _names_are_distinct(thermometers: Any) -> Iterator[Fault]:
    taken: dict[str, str] = {}
    for index, name in enumerate(t.name for t in thermometers):
        if not isinstance(name, str):
            continue
        key = f"thermometers.{index}.name"
        if name in RESERVED_NAMES:
            problem = (
                f"must be none of {', '.join(RESERVED_NAMES)}, which name records of the run file; rename it"
            )
            yield Fault(key, problem, shown(name))
        elif name.casefold() in taken:
            other = taken[name.casefold()]
            problem = f"must differ from all other names, and not in capitals alone; {shown(other)} is taken"
            yield Fault(key, problem, shown(name))
        taken.setdefault(name.casefold(), name)
