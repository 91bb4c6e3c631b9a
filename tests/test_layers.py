"""Which room may import which: read from the source, so that no import can hide in a function."""

import ast
from collections.abc import Iterator
from pathlib import Path

import pytest

PACKAGE = Path(__file__).parents[1] / "harmonic_planner"

ROOMS = ("model", "physics", "parts", "filters", "chain", "planning", "export", "report", "scenario", "cli")
"""A room imports only from rooms earlier in this list, and from itself."""

ROOM_OF_MODULE = {
    "__main__": "cli",
    "applying": "scenario",
    "column_files": "scenario",
    "measured_files": "scenario",
    "measured_lines": "scenario",
    "quantities": "scenario",
    "rules": "scenario",
    "scenario_checks": "scenario",
    "scenario_defaults": "scenario",
    "scenario_problems": "scenario",
    "scenario_rules": "scenario",
    "scenario_tables": "scenario",
    "bench_options": "scenario",
    "shipped": "cli",
    "stopping": "cli",
    "template": "scenario",
}
"""Modules at the top of the package that belong to a room of another name."""

ALLOWED_OUTSIDE = {
    "typer": {"cli"},
    "click": set(),
    "rich": {"report"},
    "matplotlib": {"report"},
    "pandas": {"export"},
    "pydantic": {"parts", "scenario"},
    "quantiphy": {"parts", "scenario"},
    "skrf": {"export", "scenario"},
    "tomlkit": {"scenario"},
}
"""Libraries for people's side of the program, and the rooms that may use them."""

SILENT_ROOMS = ("model", "physics", "filters", "chain", "planning")
"""Rooms that neither print nor touch files."""
FORBIDDEN_CALLS = {"print", "input", "open", "read_text", "write_text", "read_bytes", "write_bytes"}


def imports(source: str, package: tuple[str, ...]) -> Iterator[str]:
    """Full names of what a module imports; `package` holds the names above it."""
    for node in ast.walk(ast.parse(source)):
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            base = ".".join(package[: len(package) - node.level + 1]) + "." if node.level else ""
            name = (base + (node.module or "")).rstrip(".")
            if name == "harmonic_planner":
                yield from (f"{name}.{alias.name}" for alias in node.names)
            else:
                yield name


def room_of(name: str) -> str | None:
    """Room of a module of the package; None for the package itself, whose version everybody may read."""
    parts = name.split(".")
    if len(parts) == 1 or parts[1] in ("__init__", "__version__"):
        return None
    return ROOM_OF_MODULE.get(parts[1], parts[1])


def faults(source: str, name: str, *, is_package: bool = False) -> list[str]:
    """What a module of the given full name does that its room may not."""
    room = room_of(name)
    found = []
    path = tuple(name.split("."))
    for target in imports(source, path if is_package else path[:-1]):
        top = target.split(".")[0]
        if top == "harmonic_planner":
            other = room_of(target)
            if other is None:
                continue
            if not {room, other} <= set(ROOMS) or ROOMS.index(str(other)) > ROOMS.index(str(room)):
                found.append(f"{name} imports {target}")
        elif room not in ALLOWED_OUTSIDE.get(top, {room}):
            found.append(f"{name} imports {target}")
    if room in SILENT_ROOMS:
        for node in ast.walk(ast.parse(source)):
            if isinstance(node, ast.Call):
                called = getattr(node.func, "id", getattr(node.func, "attr", ""))
                if called in FORBIDDEN_CALLS:
                    found.append(f"{name} calls {called}")
    return found


def modules() -> dict[str, Path]:
    """Every module of the package by its full name."""
    found = {}
    for path in sorted(PACKAGE.rglob("*.py")):
        parts = path.relative_to(PACKAGE.parent).with_suffix("").parts
        found[".".join(parts[:-1] if parts[-1] == "__init__" else parts)] = path
    return found


@pytest.mark.parametrize("name", modules())
def test_a_module_keeps_to_its_room(name):
    path = modules()[name]
    assert faults(path.read_text(encoding="utf-8"), name, is_package=path.name == "__init__.py") == []


def test_every_module_has_a_room():
    assert {room for name in modules() if (room := room_of(name))} <= set(ROOMS)


@pytest.mark.parametrize(
    ("name", "source"),
    [
        ("harmonic_planner.physics.noise", "import harmonic_planner.chain.budget"),
        ("harmonic_planner.physics.noise", "from harmonic_planner import report"),
        ("harmonic_planner.physics.noise", "from ..chain import budget"),
        ("harmonic_planner.physics.noise", "from .. import chain"),
        ("harmonic_planner.model", "def f():\n    from harmonic_planner.physics import noise"),
        ("harmonic_planner.planning.plan", "import matplotlib.pyplot as plt"),
        ("harmonic_planner.chain.budget", "from rich.table import Table"),
        ("harmonic_planner.export.tables", "import typer"),
        ("harmonic_planner.scenario", "import harmonic_planner.cli"),
        ("harmonic_planner.chain.budget", "def f(path):\n    return path.read_text()"),
        ("harmonic_planner.physics.noise", "print(1)"),
    ],
)
def test_a_breach_is_seen(name, source):
    assert faults(source, name)


@pytest.mark.parametrize(
    ("name", "source"),
    [
        ("harmonic_planner.planning.plan", "from harmonic_planner.filters import windows"),
        ("harmonic_planner.planning.plan", "from .proposals import propose"),
        ("harmonic_planner.report.terminal", "from rich.table import Table"),
        ("harmonic_planner.cli", "from harmonic_planner import __version__"),
        ("harmonic_planner.__main__", "from harmonic_planner.cli import main"),
    ],
)
def test_what_is_allowed_passes(name, source):
    assert faults(source, name) == []
