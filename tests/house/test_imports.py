"""What an import costs, in fresh processes."""

from __future__ import annotations

import os
import subprocess
import sys
from concurrent.futures import ThreadPoolExecutor

import pytest

import realize
from tests.house.tree import modules

HEAVY = ("scipy", "sympy", "mpmath", "flint", "click", "rich", "matplotlib")


def run(code: str) -> subprocess.CompletedProcess[str]:
    """Run a line of Python in a fresh process, warnings being errors."""
    return subprocess.run(
        [sys.executable, "-W", "error", "-c", code],
        capture_output=True,
        text=True,
        timeout=60,
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


def test_every_module_can_be_imported_first() -> None:
    """Each module imports alone in a fresh process, so no import depends on an earlier one."""
    # __main__ runs the command line when it is imported.
    names = [name for name in modules() if not name.endswith("__main__")]
    with ThreadPoolExecutor(2) as pool:
        done = dict(zip(names, pool.map(lambda n: run(f"import {n}"), names), strict=True))
    failed = {name: result.stderr for name, result in done.items() if result.returncode}
    assert failed == {}


@pytest.mark.parametrize("name", sorted(realize.__all__))
def test_every_public_name_exists(name: str) -> None:
    """What the package lists it has, and `dir` shows it."""
    assert getattr(realize, name) is not None
    assert name in dir(realize)


def test_an_unknown_name_is_an_attribute_error() -> None:
    """Lazy names do not hide typing mistakes."""
    with pytest.raises(AttributeError, match="no_such_name"):
        realize.no_such_name  # noqa: B018
