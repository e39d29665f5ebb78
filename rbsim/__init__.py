"""Numerical twin of a Rayleigh–Bénard cell: simulate it, read thermometers, cross-check heat transport.

>>> import rbsim
>>> case = rbsim.build_case(rayleigh=1e5, prandtl=1.0, aspect_ratio=2.0, end=60.0)
>>> case = case.with_thermometer("centre", x=1.0, z=0.5, interval=0.1)
>>> run = rbsim.simulate(case, "runs/first")                                  # doctest: +SKIP
>>> print(rbsim.summarise(rbsim.open_run(run.path)).agreement)        # doctest: +SKIP

Names are loaded when they are first used.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from rbsim.config.loading import build_case, load_case
    from rbsim.config.schema import Case
    from rbsim.config.writing import case_to_toml
    from rbsim.errors import ConfigError, RbsimError
    from rbsim.files.reader import RunRecords, open_run
    from rbsim.simulation.loop import Progress, RunOptions
    from rbsim.simulation.running import resume, simulate
    from rbsim.simulation.summary import Summary, summarise

_HOMES = {
    "Case": "rbsim.config.schema",
    "ConfigError": "rbsim.errors",
    "Progress": "rbsim.simulation.loop",
    "RbsimError": "rbsim.errors",
    "RunOptions": "rbsim.simulation.loop",
    "RunRecords": "rbsim.files.reader",
    "Summary": "rbsim.simulation.summary",
    "build_case": "rbsim.config.loading",
    "case_to_toml": "rbsim.config.writing",
    "load_case": "rbsim.config.loading",
    "open_run": "rbsim.files.reader",
    "resume": "rbsim.simulation.running",
    "simulate": "rbsim.simulation.running",
    "summarise": "rbsim.simulation.summary",
}

__all__ = [
    "Case",
    "ConfigError",
    "Progress",
    "RbsimError",
    "RunOptions",
    "RunRecords",
    "Summary",
    "build_case",
    "case_to_toml",
    "load_case",
    "open_run",
    "resume",
    "simulate",
    "summarise",
]


def __getattr__(name: str) -> Any:
    if name in _HOMES:
        return getattr(import_module(_HOMES[name]), name)
    raise AttributeError(f"module 'rbsim' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
