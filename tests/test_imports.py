"""Imports go down only, files are touched from level 4 upwards, modules stay short."""

import ast
from collections.abc import Iterator
from pathlib import Path

import pytest

PACKAGE = Path(__file__).parents[1] / "planner"
MODULES = sorted(path for path in PACKAGE.rglob("*.py") if "demo_sites" not in path.parts)
LONGEST_MODULE = 400

# The rooms, as in DEVELOPERS.md. A room may import rooms of a lower level, and itself.
LEVELS = {
    "errors": 0,
    "units": 0,
    "physics": 1,
    "antenna": 1,
    "terrain": 1,
    "geodesy": 1,
    "network": 1,
    "sweep": 2,
    "coverage": 3,
    "customers": 3,
    "aim": 3,
    "io": 4,
    "handout": 4.5,
    "plan": 5,
    "report": 5.5,
    "report_antenna": 5.75,
    "cli": 6,
}
# Within level 1: one place for compile options, plain data, and a grid that knows true north.
SIDEWAYS = {
    ("antenna", "planner.physics._jit"),
    ("antenna", "planner.network"),
    ("geodesy", "planner.physics._jit"),
    ("geodesy", "planner.network"),
    ("physics", "planner.network"),
    ("terrain", "planner.physics._jit"),
    ("terrain", "planner.network"),
    ("terrain", "planner.geodesy"),
}
LOWEST_LEVEL_WITH_FILES = 4
FORBIDDEN_MODULES = {"rasterio", "click", "typer", "pathlib"}
FORBIDDEN_CALLS = {"open", "print"}


def room_of(module: str) -> str:
    """Room of a module: "planner.io.geotiff" is in "io"; the package itself in ""."""
    return [*module.split("."), ""][1]


def module_name(path: Path) -> str:
    parts = path.relative_to(PACKAGE.parent).with_suffix("").parts
    return ".".join(parts[:-1] if parts[-1] == "__init__" else parts)


def imported_modules(module: str, tree: ast.AST, *, is_package: bool) -> Iterator[tuple[int, str]]:
    """(line, module) of every import, also inside functions, relative ones resolved."""
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            for alias in node.names:
                yield node.lineno, alias.name
        elif isinstance(node, ast.ImportFrom):
            base = node.module or ""
            if node.level:
                up = node.level - 1 if is_package else node.level
                parts = module.split(".")
                base = ".".join([*parts[: len(parts) - up], *filter(None, [base])])
            if base == "planner":  # from planner import errors
                for alias in node.names:
                    yield node.lineno, f"planner.{alias.name}"
            else:
                yield node.lineno, base


def wrong_imports(module: str, source: str, *, is_package: bool = False) -> list[str]:
    """What a module may not import or call, in words."""
    room = room_of(module)
    if room not in LEVELS and module != "planner":
        return [f"{module}: the room {room!r} has no level"]
    level = LEVELS.get(room, 0)
    tree = ast.parse(source)
    wrong = []
    for line, name in imported_modules(module, tree, is_package=is_package):
        if level < LOWEST_LEVEL_WITH_FILES and name.split(".")[0] in FORBIDDEN_MODULES:
            wrong.append(f"{module}:{line} imports {name}")
        target = room_of(name)
        if name.split(".")[0] != "planner" or target in (room, "", "__version__"):
            continue
        if target not in LEVELS:
            wrong.append(f"{module}:{line} imports {name}, a room without a level")
        elif LEVELS[target] >= level and (room, name) not in SIDEWAYS:
            wrong.append(
                f"{module}:{line} imports {name} (level {LEVELS[target]}, not below {level})"
            )
    for node in ast.walk(tree):
        called = node.func if isinstance(node, ast.Call) else None
        if not isinstance(called, ast.Name) or called.id not in FORBIDDEN_CALLS:
            continue
        if level < LOWEST_LEVEL_WITH_FILES:
            wrong.append(f"{module}:{called.lineno} calls {called.id}()")
    return wrong


@pytest.mark.parametrize("path", MODULES, ids=[module_name(path) for path in MODULES])
def test_imports_go_down(path: Path) -> None:
    """Every import of every module leads to a lower level or stays in its room."""
    source = path.read_text(encoding="utf-8")
    is_package = path.name == "__init__.py"
    assert wrong_imports(module_name(path), source, is_package=is_package) == []


@pytest.mark.parametrize("path", MODULES, ids=[module_name(path) for path in MODULES])
def test_modules_are_short(path: Path) -> None:
    """A module that a person can read in one go: under 400 lines."""
    assert len(path.read_text(encoding="utf-8").splitlines()) < LONGEST_MODULE


@pytest.mark.parametrize(
    ("module", "source", "wrong"),
    [
        ("planner.physics.link", "from planner.sweep import path_field", True),
        ("planner.physics.link", "import planner.io.geotiff", True),
        ("planner.physics.link", "from planner import sweep", True),
        ("planner.physics.link", "from ..sweep.field import path_field", True),
        ("planner.physics.link", "def f():\n    from planner.cli import app", True),
        ("planner.physics.link", "from planner.units import EARTH_RADIUS_KM", False),
        ("planner.physics.link", "from .free_space import loss", False),
        ("planner.antenna.f1336", "from planner.physics._jit import scalar", False),
        ("planner.antenna.f1336", "from planner.physics.link import eirp_dbm", True),
        ("planner.antenna.f1336", "from planner.network import Sector", False),
        ("planner.geodesy", "from planner.terrain import Grid", True),
        ("planner.terrain", "from planner.geodesy import local_frame", False),
        ("planner.coverage", "from planner.customers import check_customers", True),
        ("planner.coverage", "from planner.sweep import PathField", False),
        ("planner.io.geotiff", "from planner.handout import colours", True),
        ("planner.handout.offline_map", "from planner.io.atomic import replaced", False),
        ("planner.io.geotiff", "from planner.plan.read import Plan", True),
        ("planner.plan.run", "from planner import __version__", False),
        ("planner.plan.run", "from planner.report import run_text", True),
        ("planner.units", "from planner.errors import Problem", True),
        ("planner.sweep.field", "from pathlib import Path", True),
        ("planner.sweep.field", "import rasterio.warp", True),
        ("planner.sweep.field", "import typer", True),
        ("planner.sweep.field", "print('here')", True),
        ("planner.sweep.field", "with open('x') as file: pass", True),
        ("planner.io.geotiff", "import rasterio\nopen('x')", False),
        ("planner.cellar.wine", "import math", True),
    ],
)
def test_the_check_itself(module: str, source: str, wrong: bool) -> None:
    """A wrong import is found, in whatever form, and a right one is not held against it."""
    assert bool(wrong_imports(module, source)) == wrong
