"""What an import costs, in fresh processes."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

import realize
from tests.house.tree import modules

HEAVY = ("scipy", "sympy", "mpmath", "flint", "click", "rich", "matplotlib")


def run(code: str, *arguments: str) -> subprocess.CompletedProcess[str]:
    """Run a line of Python in a fresh process, warnings being errors."""
    return subprocess.run(
        [sys.executable, "-W", "error", "-c", code, *arguments],
        capture_output=True,
        text=True,
        timeout=300,
        env=os.environ | {"PYTHONPATH": os.pathsep.join(p for p in sys.path if p)},
    )


def test_importing_the_package_is_light() -> None:
    """After `import realize` none of the heavy libraries is loaded."""
    done = run(f"import realize, sys; print([m for m in {HEAVY} if m in sys.modules])")
    assert done.returncode == 0, done.stderr
    assert done.stdout.strip() == "[]"


def test_models_are_light() -> None:
    """Making and scaling models of numbers needs numpy alone."""
    done = run(
        "import realize, sys;"
        "realize.Realization([[1.0, 2.0], [3.0, 4.0]], [1.0, 2.0], [1.0, 0.0]);"
        "realize.Realization([['1/2']], [[1]], [[1]]).to_float().dual();"
        f"print([m for m in {HEAVY} if m in sys.modules])"
    )
    assert done.returncode == 0, done.stderr
    assert done.stdout.strip() == "[]"


def test_scipy_signal_is_never_loaded() -> None:
    """Not even a whole examination loads scipy.signal."""
    done = run(
        "import realize, sys;"
        "realize.examine(realize.Realization([[-1.5, 1.0], [0.0, -2.0]], [0.0, 1.0], [1.0, 0.0]));"
        "print('scipy.signal' in sys.modules)"
    )
    assert done.returncode == 0, done.stderr
    assert done.stdout.strip() == "False"


FORKED = """
import importlib, json, os, sys, traceback
# Other projects' modules are loaded once; what is asked is the order among our own.
for name in ("numpy", "scipy.linalg", "scipy.sparse.csgraph", "scipy.special", "scipy.optimize",
             "sympy", "mpmath", "flint", "click", "rich.console", "hypothesis"):
    importlib.import_module(name)
# Compiled once, wherever the environment would have it compiled again and again.
sys.dont_write_bytecode, sys.pycache_prefix = False, sys.argv[2]
failed = {}
for name in json.loads(sys.argv[1]):
    reader, writer = os.pipe()
    child = os.fork()
    if child == 0:
        try:
            importlib.import_module(name)
        except BaseException:
            os.write(writer, traceback.format_exc()[-4000:].encode())
        os._exit(0)
    os.close(writer)
    with os.fdopen(reader) as stream:
        text = stream.read()
    os.waitpid(child, 0)
    if text:
        failed[name] = text
print(json.dumps(failed))
"""


@pytest.mark.skipif(not hasattr(os, "fork"), reason="needs a system that forks")
def test_every_module_can_be_imported_first(tmp_path: Path) -> None:
    """Each module imports alone in a process of its own, so no import depends on an earlier one."""
    # __main__ runs the command line when it is imported.
    names = [name for name in modules() if not name.endswith("__main__")]
    done = run(FORKED, json.dumps(names), str(tmp_path))
    assert done.returncode == 0, done.stderr
    assert json.loads(done.stdout) == {}
    planted = run(FORKED, json.dumps(["realize.no_such_module"]), str(tmp_path))
    assert "ModuleNotFoundError" in json.loads(planted.stdout)["realize.no_such_module"]


@pytest.mark.parametrize("name", sorted(realize.__all__))
def test_every_public_name_exists(name: str) -> None:
    """What the package lists it has, and `dir` shows it."""
    assert getattr(realize, name) is not None
    assert name in dir(realize)


def test_an_unknown_name_is_an_attribute_error() -> None:
    """Lazy names do not hide typing mistakes."""
    with pytest.raises(AttributeError, match="no_such_name"):
        realize.no_such_name  # noqa: B018
