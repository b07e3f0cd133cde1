"""The house rules that a reader relies on: which room may know which, and how rooms look.

The order is that of the table in DEVELOPERS.md ("Rooms, and which way the doors open").
"""

from __future__ import annotations

import ast
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

PACKAGE = Path(__file__).parents[1] / "gridcool"
FILES = sorted(PACKAGE.rglob("*.py"))
#: Room -> the other rooms it may import.
MAY_KNOW = {
    "physics": set(),
    "variables": set(),
    "grid": set(),
    "errors": set(),
    "sections": {"variables"},
    "planning_sections": {"sections"},
    "config": {"errors", "variables", "sections", "planning_sections"},
    "inputs": {"grid", "errors", "variables"},
    "engine": {"physics", "errors", "variables"},
    "planning": {"engine", "physics", "grid", "errors", "variables"},
    "products": {"grid", "errors", "variables"},
    "release": {"grid", "errors", "variables"},
    "computing": {"errors", "gridcool"},
    "parts": {"variables", "grid", "errors", "config", "inputs", "engine", "planning"},
    "planned": {"variables", "grid", "config", "parts", "planning"},
    "place": {"grid", "errors", "config", "inputs", "engine", "planning", "parts"},
    "presenting": {
        *("variables", "grid", "config", "parts", "planned", "gridcool"),
        *("inputs", "planning", "products", "release"),
    },
    "renewal": {"config", "errors", "presenting", "release"},
    "pipeline": {
        *("physics", "variables", "grid", "errors", "config", "parts", "computing", "planned"),
        *("inputs", "engine", "planning", "products", "release", "gridcool"),
        *("presenting", "renewal"),
    },
    "comparing": {
        *("config", "errors", "grid", "inputs", "parts", "pipeline", "planned", "presenting"),
        *("products", "release", "variables"),
    },
    "reporting": set(),
    "starter": {"errors"},
    "cli": {
        *("config", "pipeline", "place", "products", "errors", "gridcool"),
        *("comparing", "reporting", "starter"),
    },
    "gridcool": {"config", "parts"},  # its __init__, on first use only
    "__main__": {"cli"},
}
PHYSICS_MAY_IMPORT = {
    "__future__",
    "collections.abc",
    "dataclasses",
    "functools",
    "math",
    "numpy",
    "numpy.typing",
    "typing",
}
HEAVY = {"xarray", "dask", "pandas", "scipy", "rasterio", "netCDF4", "geopandas", "pydantic"}
MOST_LINES = 330
Definition = ast.FunctionDef | ast.AsyncFunctionDef | ast.ClassDef


def name_of(path: Path) -> str:
    return path.relative_to(PACKAGE).as_posix()


def room_of(path: Path) -> str:
    first = path.relative_to(PACKAGE).parts[0]
    return "gridcool" if first == "__init__.py" else first.removesuffix(".py")


def imports(tree: ast.AST) -> Iterator[str]:
    """Dotted names of everything imported below a node, also by `importlib`."""
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, "imports are written in full"
            for alias in node.names:
                whole = f"{node.module}.{alias.name}"
                place = PACKAGE.parent / whole.replace(".", "/")
                is_module = place.is_dir() or place.with_suffix(".py").exists()
                yield whole if is_module else str(node.module)
        elif isinstance(node, ast.Call) and ast.unparse(node.func).endswith("import_module"):
            yield from (arg.value for arg in node.args if isinstance(arg, ast.Constant))


def own_rooms(tree: ast.AST) -> set[str]:
    """Rooms of this package that are imported below a node."""
    parts = [name.split(".") for name in imports(tree)]
    return {"gridcool" if len(p) == 1 else p[1] for p in parts if p[0] == "gridcool"}


def parse(path: Path) -> ast.Module:
    return ast.parse(path.read_text(encoding="utf-8"))


def test_every_room_is_declared() -> None:
    assert {room_of(path) for path in FILES} == set(MAY_KNOW)


@pytest.mark.parametrize("path", FILES, ids=name_of)
def test_doors_open_one_way(path: Path) -> None:
    room = room_of(path)
    assert own_rooms(parse(path)) - {room} <= MAY_KNOW[room]


def test_the_declared_order_has_no_cycle_and_keeps_neighbours_apart() -> None:
    """Of what a room imports while it is loaded; the package itself loads nothing then."""
    known: set[str] = {"gridcool"}
    waiting = {room: set(others) for room, others in MAY_KNOW.items() if room not in known}
    while waiting:
        ready = {room for room, others in waiting.items() if others <= known}
        assert ready, f"a cycle among {sorted(waiting)}"
        known |= ready
        waiting = {room: others for room, others in waiting.items() if room not in ready}
    side_by_side = {"inputs", "products", "release"}
    for room in side_by_side:
        assert not MAY_KNOW[room] & side_by_side
    for room in ("engine", "planning"):
        assert not MAY_KNOW[room] & side_by_side
    assert {room for room, others in MAY_KNOW.items() if "config" in others} == {
        *(
            "cli",
            "pipeline",
            "parts",
            "planned",
            "place",
            "gridcool",
            "presenting",
            "renewal",
            "comparing",
        )
    }


def test_this_check_would_see_a_wrong_door() -> None:
    for line in (
        "import gridcool.config",
        "from gridcool import config",
        "from gridcool.config import Settings",
        "def f():\n    from gridcool.config import Settings",
        "importlib.import_module('gridcool.config')",
    ):
        assert own_rooms(ast.parse(line)) == {"config"}
    assert own_rooms(ast.parse("from gridcool import inputs")) == {"inputs"}
    assert own_rooms(ast.parse("from gridcool import __version__")) == {"gridcool"}


@pytest.mark.parametrize(
    "path", [each for each in FILES if room_of(each) == "physics"], ids=lambda p: p.name
)
def test_physics_is_numpy_only(path: Path) -> None:
    foreign = {name for name in imports(parse(path)) if not name.startswith("gridcool.physics")}
    assert foreign <= PHYSICS_MAY_IMPORT


@pytest.mark.parametrize("path", FILES, ids=name_of)
def test_no_own_imports_inside_functions(path: Path) -> None:
    """They hide cycles. Exceptions: the package's lazy door, commands' late loading."""
    for node in ast.walk(parse(path)):
        if not isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef):
            continue
        allowed: set[str] = set()
        if name_of(path) == "__init__.py" and node.name == "__getattr__":
            allowed = {"config", "parts"}
        if name_of(path) == "cli.py":
            statements = (ast.Import, ast.ImportFrom)
            assert not any(isinstance(each, statements) for each in ast.walk(node)), node.name
            allowed = MAY_KNOW["cli"]
        assert own_rooms(node) <= allowed, node.name


def test_modules_are_named_after_what_they_know() -> None:
    banned = {"utils", "util", "helpers", "helper", "misc", "common", "tools"}
    assert not [name_of(path) for path in FILES if set(path.with_suffix("").parts) & banned]


@pytest.mark.parametrize("path", FILES, ids=name_of)
def test_files_stay_short(path: Path) -> None:
    assert len(path.read_text(encoding="utf-8").splitlines()) <= MOST_LINES


def public(body: list[ast.stmt]) -> Iterator[Definition]:
    """Public functions and classes, and the public methods of the latter."""
    for node in body:
        if isinstance(node, Definition) and not node.name.startswith("_"):
            yield node
            if isinstance(node, ast.ClassDef):
                yield from public(node.body)


@pytest.mark.parametrize("path", FILES, ids=name_of)
def test_public_things_say_what_they_are(path: Path) -> None:
    tree = parse(path)
    assert ast.get_docstring(tree)
    assert not [node.name for node in public(tree.body) if not ast.get_docstring(node)]


@pytest.mark.parametrize("module", ["gridcool", "gridcool.cli"])
def test_importing_is_light(module: str) -> None:
    loaded = python("-c", f"import sys, {module}; print(*sys.modules)").split()
    assert module in loaded
    assert not HEAVY & set(loaded)


def test_help_is_light() -> None:
    code = (
        "import sys; from gridcool.cli import main\n"
        "try: main(['--help'])\n"
        "except SystemExit as end: assert end.code == 0\n"
        "print(*sys.modules, file=sys.stderr)"
    )
    outcome = subprocess.run(
        [sys.executable, "-c", code], check=True, capture_output=True, text=True, timeout=60
    )
    assert outcome.stdout.startswith("usage: gridcool")
    assert not HEAVY & set(outcome.stderr.split())


def test_the_package_answers_as_a_module() -> None:
    assert "screen" in python("-m", "gridcool", "--help")


def python(*arguments: str) -> str:
    return subprocess.run(
        [sys.executable, *arguments], check=True, capture_output=True, text=True, timeout=60
    ).stdout
