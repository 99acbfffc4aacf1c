"""A kit for the test suites of other projects: assertions, strategies, problems, scores.

Nothing of a test runner is imported until it is used: `strategies` needs Hypothesis, the picture of
a scorecard needs matplotlib, and the rest needs neither.
"""

from __future__ import annotations

import importlib
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from realize.testing import strategies
    from realize.testing.assertions import assert_minimal, assert_same_transfer
    from realize.testing.problems import Family, Problem, families, problem
    from realize.testing.scoring import Outcome, Result, Scorecard, score

__all__ = [
    "Family",
    "Outcome",
    "Problem",
    "Result",
    "Scorecard",
    "assert_minimal",
    "assert_same_transfer",
    "families",
    "problem",
    "score",
    "strategies",
]

_HOMES = {
    "realize.testing.assertions": ("assert_minimal", "assert_same_transfer"),
    "realize.testing.problems": ("Family", "Problem", "families", "problem"),
    "realize.testing.scoring": ("Outcome", "Result", "Scorecard", "score"),
}
_HOME_OF = {name: module for module, names in _HOMES.items() for name in names}


def __getattr__(name: str) -> Any:
    if name in _HOME_OF:
        value = getattr(importlib.import_module(_HOME_OF[name]), name)
    elif name == "strategies":
        value = importlib.import_module("realize.testing.strategies")
    else:
        raise AttributeError(f"module 'realize.testing' has no attribute {name!r}")
    globals()[name] = value
    return value


def __dir__() -> list[str]:
    return sorted({*globals(), *__all__})
