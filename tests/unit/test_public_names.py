"""The lazy names of the package: each is there, and said in the same way in all three places."""

from __future__ import annotations

import ast
from pathlib import Path

import pytest

import realize


def imports_for_type_checkers() -> dict[str, str]:
    """Return the name and module of every import that only type checkers read."""
    tree = ast.parse(Path(realize.__file__).read_text("utf-8"))
    guarded = next(node for node in tree.body if isinstance(node, ast.If))
    found = {}
    for node in guarded.body:
        assert isinstance(node, ast.ImportFrom)
        assert node.module is not None
        for alias in node.names:
            found[alias.name] = node.module
    return found


def test_one_list_of_names() -> None:
    """Type checkers, the table of homes and __all__ know the same names from the same places."""
    submodules = dict.fromkeys(realize._SUBMODULES, "realize")
    assert imports_for_type_checkers() == {**realize._HOME_OF, **submodules}
    assert set(realize.__all__) == set(imports_for_type_checkers())


@pytest.mark.parametrize("name", realize.__all__)
def test_every_name_is_there(name: str) -> None:
    """Each public name can be had, and is listed."""
    assert getattr(realize, name) is not None
    assert name in dir(realize)


def test_other_names_are_not() -> None:
    """A name that the package does not have is an AttributeError, as for any module."""
    with pytest.raises(AttributeError, match="no attribute 'minimise'"):
        _ = realize.minimise  # type: ignore[attr-defined]
