"""Imports run one way, and each outside package has one home."""

from __future__ import annotations

import ast
from pathlib import Path

import pytest

PACKAGE = Path(__file__).parent.parent / "pairmc"

# A module may import from its own room and from those before it.
ROOMS = ("ground", "physics", "runfile", "running", "results", "figures", "cli")

# Where each outside package may be imported; what is not named here may not be imported at all.
HOMES = {
    "click": {"cli"},
    "llvmlite": {"pairmc/compiled.py"},
    "matplotlib": {"figures"},
    "netCDF4": {"results"},
    "numba": {"pairmc/compiled.py"},
    "numpy": {"ground", "physics", "running", "results", "figures", "cli"},
    "pint": {"pairmc/units.py"},
    "pydantic": {"runfile"},
    "pydantic_core": {"runfile"},
    "rich": {"cli"},
    "scipy": {"ground", "physics", "running", "results"},
    "threadpoolctl": {"running"},
    "xarray": {"results", "figures"},
}

# Physics is numbers to numbers: no files, clock, environment.
PHYSICS_MAY_USE = {
    "__future__",
    "collections",
    "dataclasses",
    "functools",
    "importlib",
    "itertools",
    "math",
    "types",
    "typing",
}


def room_of(name: str) -> str:
    """Return the room of a module ``pairmc.…``; modules at the top are the ground floor."""
    parts = name.split(".")
    return parts[1] if len(parts) > 1 and parts[1] in ROOMS else "ground"


def imports(source: str) -> list[str]:
    """Return the full names of all modules that a source imports, wherever it does."""
    found = []
    for node in ast.walk(ast.parse(source)):
        if isinstance(node, ast.Import):
            found += [alias.name for alias in node.names]
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, "imports are absolute"
            found.append(node.module or "")
            if node.module == "pairmc":
                found += [f"pairmc.{alias.name}" for alias in node.names]
    return found


def forbidden(source: str, path: str) -> list[str]:
    """Return what a module imports although its room may not."""
    name = path.removesuffix(".py").removesuffix("/__init__").replace("/", ".")
    room = room_of(name)
    wrong = []
    for module in imports(source):
        top = module.split(".")[0]
        if top == "pairmc":
            if ROOMS.index(room_of(module)) > ROOMS.index(room):
                wrong.append(module)
        elif top in HOMES:
            if room not in HOMES[top] and path not in HOMES[top]:
                wrong.append(module)
        elif (room == "physics" and top not in PHYSICS_MAY_USE) or top not in STANDARD:
            wrong.append(module)
    return wrong


def calls(source: str) -> set[str]:
    """Return the names of all functions that a source calls, dotted as written."""
    return {
        ast.unparse(node.func) for node in ast.walk(ast.parse(source)) if isinstance(node, ast.Call)
    }


STANDARD = __import__("sys").stdlib_module_names

SOURCES = {
    str(path.relative_to(PACKAGE.parent)): path.read_text()
    for path in sorted(PACKAGE.rglob("*.py"))
}

# These two give the names of all rooms.
DOORS = {"pairmc/__init__.py", "pairmc/__main__.py"}


@pytest.mark.parametrize("path", sorted(set(SOURCES) - DOORS))
def test_a_module_imports_only_from_its_own_and_earlier_rooms(path: str) -> None:
    assert forbidden(SOURCES[path], path) == []


@pytest.mark.parametrize(
    ("path", "source", "wrong"),
    [
        ("pairmc/physics/gas.py", "import os", ["os"]),
        ("pairmc/physics/gas.py", "from pairmc.runfile import read", ["pairmc.runfile"]),
        ("pairmc/units.py", "def f():\n    from pairmc.physics import gas", ["pairmc.physics"]),
        ("pairmc/running/parts.py", "import xarray as xr", ["xarray"]),
        ("pairmc/results/load.py", "import matplotlib.figure", ["matplotlib.figure"]),
        ("pairmc/physics/sampling/chain.py", "import numba", ["numba"]),
        ("pairmc/figures/draw.py", "import pandas", ["pandas"]),
        ("pairmc/results/load.py", "from pairmc import cli", ["pairmc.cli"]),
    ],
)
def test_the_check_sees_a_forbidden_import(path: str, source: str, wrong: list[str]) -> None:
    assert forbidden(source, path) == wrong


@pytest.mark.parametrize(
    "path", sorted(path for path in SOURCES if room_of(path.replace("/", ".")) == "physics")
)
def test_physics_prints_nothing_opens_nothing_and_uses_no_global_random_numbers(path: str) -> None:
    used = calls(SOURCES[path])
    assert not {"print", "open", "input"} & used
    assert not [name for name in used if name.startswith("np.random.")]


@pytest.mark.parametrize("path", sorted(path for path in SOURCES if "/cli/" not in path))
def test_only_the_command_line_prints(path: str) -> None:
    assert "print" not in calls(SOURCES[path])


def test_no_package_file_does_anything_heavy() -> None:
    light = {"__future__", "importlib", "importlib.metadata", "typing"}
    for path, source in SOURCES.items():
        if path.endswith("/__init__.py") and path != "pairmc/__init__.py":
            assert set(imports(source)) <= light, path
