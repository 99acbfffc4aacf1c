"""Imports point down: a module uses its own room and the rooms below it."""

from __future__ import annotations

import ast
import sys

from tests.house.tree import FLOOR, PACKAGE, imports, modules, room


def test_every_module_has_a_room() -> None:
    """A new module must be given its place in the list of rooms."""
    homeless = [name for name in modules() if room(name) not in FLOOR]
    assert homeless == []


def test_the_list_of_rooms_is_not_longer_than_the_house() -> None:
    """Every room listed exists."""
    assert {room(name) for name in modules()} == set(FLOOR)


def test_imports_point_down() -> None:
    """No module imports from a room above its own, at the top of the file or inside functions."""
    upward = [
        f"{name}, line {line}: imports {target}"
        for name, path in modules().items()
        for line, target in imports(name, path)
        if FLOOR[room(target)] > FLOOR[room(name)]
    ]
    assert upward == []


def test_the_walk_sees_imports() -> None:
    """The test above has something to look at: known arrows are found."""
    known = modules()
    found = {target for _, target in imports("realize.results", known["realize.results"])}
    assert "realize.model.realization" in found
    assert sum(1 for name, path in known.items() for _ in imports(name, path)) > 50


def test_foreign_imports_are_declared() -> None:
    """Only the standard library and the declared dependencies are imported."""
    allowed = {"realize", "numpy", "scipy", "sympy", "mpmath", "flint"}
    only_in = {"click": {"cli", "demo"}, "rich": {"cli", "demo"}}
    only_in |= {"hypothesis": {"testing"}, "matplotlib": {"testing"}}
    foreign = set()
    for name, path in modules().items():
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            names = []
            if isinstance(node, ast.Import):
                names = [alias.name for alias in node.names]
            elif isinstance(node, ast.ImportFrom) and not node.level:
                names = [node.module or ""]
            for found in names:
                top = found.split(".")[0]
                if top not in {*allowed, *only_in} and top not in sys.stdlib_module_names:
                    foreign.add((name, found))
                if found.startswith("scipy.signal"):
                    foreign.add((name, found))
                if room(name) not in only_in.get(top, {room(name)}):
                    foreign.add((name, found))
    assert foreign == set()


def test_no_exception_is_swallowed() -> None:
    """No handler catches everything, and none does nothing."""
    bad = []
    for path in sorted(PACKAGE.rglob("*.py")):
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            if not isinstance(node, ast.ExceptHandler):
                continue
            names = (
                {n.id for n in ast.walk(node.type) if isinstance(n, ast.Name)}
                if (node.type)
                else {"BaseException"}
            )
            empty = all(isinstance(x, ast.Pass) for x in node.body)
            if names & {"Exception", "BaseException"} or empty:
                bad.append(f"{path.relative_to(PACKAGE)}, line {node.lineno}")
    assert bad == []
