"""The order of the rooms: imports run downwards, stand at the top of a file, and every module says what it offers."""

from __future__ import annotations

import ast
from collections.abc import Iterator
from functools import cache
from pathlib import Path

import networkx as nx
import pytest

PACKAGE = Path(__file__).parent.parent / "netpart"
FLOORS = (
    ("netlist",),
    ("formats",),
    ("expand",),
    ("spectral",),
    ("refine", "bounds", "coarsen"),
    ("solve",),
    ("trials", "report"),
    ("cli",),
)
FLOOR_OF_ROOM = {room: floor for floor, rooms in enumerate(FLOORS) for room in rooms}
LOADED_LATE = {"numba", "matplotlib", "distributed", "shtab"}
"""Heavy libraries that may be imported where they are used; files of kernels load numba and count as such."""

MODULES = {
    ".".join(path.relative_to(PACKAGE.parent).with_suffix("").parts).removesuffix(".__init__"): path
    for path in sorted(PACKAGE.rglob("*.py"))
}


@cache
def tree_of(module: str) -> ast.Module:
    return ast.parse(MODULES[module].read_text(encoding="utf-8"))


def imported(statement: ast.AST) -> Iterator[str]:
    """The modules that an import statement loads, as far as they are ours; others by their full name."""
    if isinstance(statement, ast.Import):
        yield from (alias.name for alias in statement.names)
    elif isinstance(statement, ast.ImportFrom):
        assert statement.level == 0, "relative import"
        assert statement.module is not None
        for alias in statement.names:
            below = f"{statement.module}.{alias.name}"
            yield below if below in MODULES else statement.module


def top_imports(module: str) -> set[str]:
    return {name for statement in tree_of(module).body for name in imported(statement)}


def late_imports(module: str) -> set[str]:
    """Imports within functions, classes and conditions."""
    tree = tree_of(module)
    return {name for statement in ast.walk(tree) if statement not in tree.body for name in imported(statement)}


def room_of(module: str) -> str | None:
    parts = module.split(".")
    return parts[1] if parts[0] == "netpart" and len(parts) > 1 else None


def test_every_room_has_its_floor() -> None:
    rooms = {path.parent.name for path in PACKAGE.glob("*/__init__.py")}
    assert rooms <= set(FLOOR_OF_ROOM)
    assert {"netlist", "formats", "expand", "spectral", "refine", "bounds", "coarsen", "solve", "report", "cli"} <= rooms
    assert {path.name for path in PACKAGE.glob("*.py")} == {"__init__.py", "__main__.py"}


@pytest.mark.parametrize("module", [module for module in MODULES if room_of(module) in FLOOR_OF_ROOM])
def test_imports_run_downwards(module: str) -> None:
    room = room_of(module)
    assert room is not None
    for other in top_imports(module) | late_imports(module):
        target = room_of(other)
        if other.split(".")[0] == "netpart" and target != room:
            assert target in FLOOR_OF_ROOM, f"{module} imports {other}"
            assert FLOOR_OF_ROOM[target] < FLOOR_OF_ROOM[room], f"{module} imports {other}"


def test_no_module_imports_itself_in_a_circle() -> None:
    graph = nx.DiGraph((module, other) for module in MODULES for other in top_imports(module) if other in MODULES)
    assert graph.number_of_edges() > len(MODULES)
    assert list(nx.simple_cycles(graph)) == []


@pytest.mark.parametrize("module", MODULES)
def test_imports_stand_at_the_top(module: str) -> None:
    for name in late_imports(module):
        assert name.split(".")[0] in LOADED_LATE or name.endswith("kernels"), f"{module} imports {name} late"


def kind_then_name(name: str) -> tuple[int, str]:
    """Constants, then classes, then functions; each by name."""
    return (0 if name.isupper() else 1 if name[0].isupper() else 2, name)


@pytest.mark.parametrize("module", [module for module in MODULES if not module.endswith("__main__")])
def test_every_module_says_what_it_offers(module: str) -> None:
    defined: set[str] = set()
    offered: list[str] | None = None
    for statement in tree_of(module).body:
        if isinstance(statement, ast.FunctionDef | ast.ClassDef):
            defined.add(statement.name)
        elif isinstance(statement, ast.Import | ast.ImportFrom):
            defined.update(alias.asname or alias.name for alias in statement.names)
        elif isinstance(statement, ast.Assign | ast.AnnAssign):
            targets = statement.targets if isinstance(statement, ast.Assign) else [statement.target]
            names = {node.id for target in targets for node in ast.walk(target) if isinstance(node, ast.Name)}
            defined |= names
            if "__all__" in names:
                assert statement.value is not None
                offered = ast.literal_eval(statement.value)
    assert offered is not None, f"{module} has no __all__"
    assert offered == sorted(set(offered), key=kind_then_name)
    assert set(offered) <= defined


@pytest.mark.parametrize("module", MODULES)
def test_every_module_has_a_docstring(module: str) -> None:
    assert ast.get_docstring(tree_of(module))
