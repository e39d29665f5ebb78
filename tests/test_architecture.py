"""The plan of the house: imports point one way, heavy packages have one home, only commands print."""

from __future__ import annotations

import ast
import subprocess
import sys
from pathlib import Path

import pytest

PACKAGE = Path(__file__).parents[1] / "rbsim"
MODULES = sorted(PACKAGE.rglob("*.py"))

#: Rooms from the ground up; a room may import those of lower floors, and itself.
FLOORS = (
    ("errors",),
    ("config", "series", "spectral"),
    ("dynamics",),
    ("diagnostics", "probes", "stability"),
    ("files",),
    ("simulation",),
    ("report",),
    ("commands",),
)
FLOOR_OF = {room: floor for floor, rooms in enumerate(FLOORS) for room in rooms}

#: Packages with one home.
HOMES = {
    "h5py": {"files"},
    "matplotlib": {"report"},
    "argparse": {"commands"},
    "pydantic": {"config"},
    "ducc0": {"spectral"},
    "numba": {"spectral", "dynamics", "stability"},
    "concurrent": {"spectral"},
}


def room_of(path: Path) -> str:
    """Room of a file: its folder, or its own name at the top."""
    parts = path.relative_to(PACKAGE).parts
    return parts[0] if len(parts) > 1 else path.stem


def imported(path: Path) -> set[str]:
    """All modules a file imports, anywhere in it."""
    names: set[str] = set()
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            names |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom) and node.module:
            names |= {node.module, *(f"{node.module}.{alias.name}" for alias in node.names)}
    return names


def rooms_imported(path: Path) -> set[str]:
    parts = [name.split(".") for name in imported(path) if name.split(".")[0] == "rbsim"]
    return {p[1] for p in parts if len(p) > 1 and p[1] in FLOOR_OF}


@pytest.mark.parametrize("path", MODULES, ids=lambda p: str(p.relative_to(PACKAGE)))
def test_imports_point_up_the_page_only(path: Path) -> None:
    room = room_of(path)
    if room in ("__init__", "__main__"):
        return
    assert room in FLOOR_OF, f"{room} has no floor in the plan"
    for other in rooms_imported(path) - {room}:
        assert FLOOR_OF[other] < FLOOR_OF[room], f"{room} must not import {other}"


@pytest.mark.parametrize("path", MODULES, ids=lambda p: str(p.relative_to(PACKAGE)))
def test_heavy_packages_stay_in_their_homes(path: Path) -> None:
    for package in {name.split(".")[0] for name in imported(path)} & set(HOMES):
        assert room_of(path) in HOMES[package], f"{package} belongs in {HOMES[package]}"


def test_transform_libraries_are_used_by_the_transforms_alone() -> None:
    users = {path.name for path in MODULES if {"scipy.fft", "ducc0.fft"} & imported(path)}
    assert users == {"transforms.py"}


@pytest.mark.parametrize("path", MODULES, ids=lambda p: str(p.relative_to(PACKAGE)))
def test_modules_are_one_idea_long_and_do_not_print(path: Path) -> None:
    text = path.read_text(encoding="utf-8")
    assert len(text.splitlines()) <= 350
    assert path.stem not in {"utils", "helpers", "misc", "common", "core"}
    calls = [n.func for n in ast.walk(ast.parse(text)) if isinstance(n, ast.Call)]
    printing = any(isinstance(f, ast.Name) and f.id == "print" for f in calls)
    assert not printing or room_of(path) == "commands"


@pytest.mark.parametrize("path", MODULES, ids=lambda p: str(p.relative_to(PACKAGE)))
def test_functions_are_short_and_take_few_arguments(path: Path) -> None:
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef):
            body = (node.end_lineno or 0) - node.body[0].lineno
            has_docstring = ast.get_docstring(node) is not None
            if has_docstring:
                body = (node.end_lineno or 0) - (node.body[0].end_lineno or 0)
            assert body <= 60, f"{node.name} has {body} lines"
            arguments = node.args.posonlyargs + node.args.args
            count = len([a for a in arguments if a.arg not in ("self", "cls")])
            limit = 9 if path.stem == "kernels" else 7  # kernels carry the share they work on
            assert count <= limit, f"{node.name} takes {count} arguments"


def _python(code: str) -> str:
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    return done.stdout


def test_every_module_imports_alone() -> None:
    names = [
        ".".join(("rbsim", *path.relative_to(PACKAGE).with_suffix("").parts))
        for path in MODULES
        if path.stem not in ("__init__", "__main__")
    ]
    code = (
        "import importlib, sys\n"
        f"for name in {names!r}:\n"
        "    for loaded in [m for m in sys.modules if m.startswith('rbsim')]:\n"
        "        del sys.modules[loaded]\n"
        "    importlib.import_module(name)\n"
        "print('done')\n"
    )
    assert _python(code).strip() == "done"


def test_importing_rbsim_and_its_command_loads_nothing_heavy() -> None:
    code = "import sys, rbsim, rbsim.commands.entry\nprint(sorted(sys.modules))"
    loaded = _python(code)
    for package in ("numpy", "scipy", "numba", "h5py", "matplotlib", "pydantic"):
        assert f"'{package}'" not in loaded
