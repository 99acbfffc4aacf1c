"""The faces offer the same names with the same signatures, and everything public is documented."""

from __future__ import annotations

import ast
import importlib
import inspect
from collections.abc import Callable
from typing import Any

import pytest

import realize
from realize import exact, floating, multiprecision
from tests.house.tree import TESTS, modules

#: The forms that every face and the top level offer.
FORMS = (
    "cancel",
    "companion",
    "from_markov_parameters",
    "kalman_parts",
    "markov_parameters",
    "minimal",
    "staircase",
    "transfer_matrix",
)
#: Forms that decide no rank, and so take no tolerance.
WITHOUT_TOLERANCE = {"companion", "markov_parameters", "transfer_matrix"}


def parameters(function: Callable[..., Any]) -> list[tuple[str, Any, Any]]:
    """Name, kind and default of every parameter."""
    return [(p.name, p.kind, p.default) for p in inspect.signature(function).parameters.values()]


def test_the_faces_offer_the_same_names() -> None:
    """The faces list one set of names, and the forms are among them."""
    assert set(exact.__all__) == set(floating.__all__) == set(multiprecision.__all__)
    assert set(FORMS) <= set(exact.__all__)
    assert set(FORMS) <= set(realize.__all__)


@pytest.mark.parametrize("name", FORMS)
def test_signatures_are_equal_but_for_the_tolerance(name: str) -> None:
    """Only the floating face has a tolerance, keyword-only, with None for the default."""
    proved, computed = getattr(exact, name), getattr(floating, name)
    tolerance = ("tolerance", inspect.Parameter.KEYWORD_ONLY, None)
    assert tolerance not in parameters(proved)
    assert [p for p in parameters(computed) if p != tolerance] == parameters(proved)
    if name not in WITHOUT_TOLERANCE:
        assert tolerance in parameters(computed)


@pytest.mark.parametrize("name", FORMS)
def test_multiprecision_takes_digits_and_a_tolerance(name: str) -> None:
    """That face has the signature of the exact one, and both of these, keyword-only."""
    keyword = inspect.Parameter.KEYWORD_ONLY
    added = [("digits", keyword, 50), ("tolerance", keyword, None)]
    found = parameters(getattr(multiprecision, name))
    assert [p for p in found if p in added] == added
    assert [p for p in found if p not in added] == parameters(getattr(exact, name))


@pytest.mark.parametrize("name", FORMS)
def test_the_top_level_has_the_signature_of_the_faces(name: str) -> None:
    """A program can change between a face and the top level without touching its calls."""
    top = [p for p in parameters(getattr(realize, name)) if p[0] != "tolerance"]
    assert top == parameters(getattr(exact, name))


@pytest.mark.parametrize("name", FORMS)
def test_only_the_source_is_positional(name: str) -> None:
    """Everything with a default is keyword-only; what comes first is the source."""
    for place in (exact, floating, multiprecision, realize):
        for _, kind, default in parameters(getattr(place, name)):
            if default is not inspect.Parameter.empty:
                assert kind is inspect.Parameter.KEYWORD_ONLY


def public_functions() -> list[tuple[str, Any]]:
    """Every public function, at the top level and on the faces."""
    found = []
    for module in ("realize", "realize.exact", "realize.floating", "realize.multiprecision"):
        place = importlib.import_module(module)
        for name in place.__all__:
            thing = getattr(place, name)
            if inspect.isfunction(thing):
                found.append((f"{module}.{name}", thing))
    return found


def test_every_public_function_is_documented() -> None:
    """A one-sentence summary; sections for parameters and result, or a pointer to the twin."""
    bad = []
    for name, function in public_functions():
        text = inspect.getdoc(function) or ""
        if not text.split("\n\n")[0].rstrip().endswith("."):
            bad.append(f"{name}: no summary")
        # The text of a form stands once, at the top level; a face may point there.
        twin = f"See `realize.{function.__name__}`"
        if twin in text and name != f"realize.{function.__name__}":
            continue
        if function.__code__.co_argcount and "Parameters\n---" not in text:
            bad.append(f"{name}: no Parameters section")
        returns = inspect.signature(function).return_annotation
        if returns not in (None, "None") and "Returns\n---" not in text:
            bad.append(f"{name}: no Returns section")
        for parameter in inspect.signature(function).parameters:
            if parameter not in text:
                bad.append(f"{name}: {parameter} is not described")
    assert bad == []


def test_every_public_class_is_documented() -> None:
    """Classes, their public methods and their properties each say what they are."""
    bad = []
    for name in realize.__all__:
        thing = getattr(realize, name)
        if not inspect.isclass(thing):
            continue
        # A dataclass without a docstring of its own gets its signature for one.
        if not thing.__dict__.get("__doc__") or thing.__doc__.startswith(f"{name}("):
            bad.append(name)
        for base in thing.__mro__:
            if not base.__module__.startswith("realize"):
                continue
            for member, value in vars(base).items():
                documented = isinstance(value, (property, classmethod, staticmethod))
                if member.startswith("_") or not (documented or inspect.isfunction(value)):
                    continue
                if not inspect.getdoc(value):
                    bad.append(f"{name}.{member}")
    assert bad == []


def test_every_module_says_what_it_is_for() -> None:
    """Each module of the package opens with a docstring."""
    silent = [
        name
        for name, path in modules().items()
        if not ast.get_docstring(ast.parse(path.read_text(encoding="utf-8")))
    ]
    assert silent == []


def test_every_test_says_what_it_holds() -> None:
    """Every test function has a docstring, and no two test functions in a file share a name."""
    bad = []
    for path in sorted(TESTS.rglob("test_*.py")):
        seen: set[str] = set()
        for node in ast.parse(path.read_text(encoding="utf-8")).body:
            inner = node.body if isinstance(node, ast.ClassDef) else [node]
            scope = f"{node.name}." if isinstance(node, ast.ClassDef) else ""
            for item in inner:
                if not isinstance(item, ast.FunctionDef) or not item.name.startswith("test_"):
                    continue
                if not ast.get_docstring(item) or scope + item.name in seen:
                    bad.append(f"{path.relative_to(TESTS)}: {scope}{item.name}")
                seen.add(scope + item.name)
    assert bad == []
