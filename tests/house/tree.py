"""The package as files: modules, the rooms they belong to, and what they import."""

from __future__ import annotations

import ast
import importlib.util
from collections.abc import Iterator
from pathlib import Path

import realize

PACKAGE = Path(realize.__file__).parent
TESTS = Path(__file__).parent.parent

#: The rooms from the ground up; a module belongs to the one that its first part names. "" is the
#: package itself, the public names, which only what is made for people may use.
ROOMS: tuple[tuple[str, ...], ...] = (
    ("entries", "tolerance", "errors", "polynomials", "checker"),
    ("model",),
    ("results", "stability"),
    ("arithmetic",),
    ("forms",),
    ("exact", "floating", "multiprecision", "dispatch"),
    ("convert",),
    ("nearness",),
    ("examination", "proof"),
    ("",),
    ("testing",),
    ("cli", "demo", "__main__"),
)
FLOOR = {name: floor for floor, names in enumerate(ROOMS) for name in names}


def modules() -> dict[str, Path]:
    """Dotted name -> file, for every module of the package."""
    found = {}
    for path in sorted(PACKAGE.rglob("*.py")):
        parts = ["realize", *path.relative_to(PACKAGE).with_suffix("").parts]
        if parts[-1] == "__init__":
            del parts[-1]
        found[".".join(parts)] = path
    return found


def room(module: str) -> str:
    """The name of the room: the first part below the package, or "" for the package itself."""
    return module.partition(".")[2].partition(".")[0]


def imports(module: str, path: Path) -> Iterator[tuple[int, str]]:
    """Line and dotted name of everything of the package that a module imports, anywhere in it."""
    known = modules()
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            for alias in node.names:
                if alias.name.split(".")[0] == "realize":
                    yield node.lineno, alias.name
        elif isinstance(node, ast.ImportFrom):
            base = node.module or ""
            if node.level:
                package = module if path.name == "__init__.py" else module.rpartition(".")[0]
                base = importlib.util.resolve_name("." * node.level + base, package)
            if base.split(".")[0] != "realize":
                continue
            for alias in node.names:
                whole = f"{base}.{alias.name}"
                yield node.lineno, whole if whole in known else base
