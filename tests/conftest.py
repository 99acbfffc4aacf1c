"""Profiles, the version header, and the list of faces."""

from __future__ import annotations

import importlib
import os
import platform
from importlib.metadata import version
from types import ModuleType

import pytest
from hypothesis import HealthCheck, settings

#: REALIZE_TESTS=deep draws many more models, and other ones at every run.
settings.register_profile(
    "quick",
    max_examples=25,
    deadline=None,
    derandomize=True,
    suppress_health_check=[HealthCheck.too_slow],
)
settings.register_profile(
    "deep",
    max_examples=500,
    deadline=None,
    print_blob=True,
    suppress_health_check=[HealthCheck.too_slow],
)
PROFILE = os.environ.get("REALIZE_TESTS", "quick")
settings.load_profile(PROFILE)

LIBRARIES = ("numpy", "scipy", "sympy", "mpmath", "python-flint", "hypothesis")


def pytest_report_header() -> list[str]:
    """What ran: a rank near a cutoff can depend on any of these."""
    libraries = ", ".join(f"{name} {version(name)}" for name in LIBRARIES)
    threads = os.environ.get("OPENBLAS_NUM_THREADS", "not set")
    return [
        f"realize on Python {platform.python_version()}, {platform.machine()}: {libraries}",
        f"Hypothesis profile: {PROFILE}; OPENBLAS_NUM_THREADS: {threads}",
    ]


@pytest.fixture(params=["exact", "floating", "multiprecision"])
def face(request: pytest.FixtureRequest) -> ModuleType:
    """Each face in turn."""
    return importlib.import_module(f"realize.{request.param}")
