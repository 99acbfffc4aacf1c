"""What may cross the boundary of the library, and what it must leave as it was."""

from __future__ import annotations

import decimal
import os
import pickle
import random
import subprocess
import sys
import warnings
from collections.abc import Iterator
from fractions import Fraction
from types import ModuleType
from typing import Any

import flint
import mpmath
import numpy as np
import pytest

import realize
from realize import errors, exact, floating, multiprecision
from tests.helpers import walk
from tests.house.everything import answers, hidden_in_every_part

FOREIGN = ("flint", "mpmath", "sympy", "scipy")


def assert_plain(thing: Any, name: str, *, rational: bool) -> int:
    """Nothing foreign in a result; and on the exact path no array of doubles in a model."""
    count = 0
    for where, value in walk(thing, name):
        count += 1
        module = type(value).__module__.split(".")[0]
        assert module not in FOREIGN, (
            f"{where} is a {type(value).__module__}.{type(value).__name__}"
        )
        if isinstance(value, np.ndarray) and value.dtype == object:
            kinds = {type(x) for x in value.ravel()}
            assert kinds <= {Fraction}, f"{where} holds {kinds}"
        if rational and isinstance(value, np.ndarray) and value.size:
            assert value.dtype == object, f"{where} holds {value.dtype}"
        if isinstance(value, Fraction):
            assert {type(value.numerator), type(value.denominator)} == {int}, where
    return count


@pytest.mark.parametrize(
    "place", [exact, floating, multiprecision], ids=["exact", "floating", "multiprecision"]
)
def test_results_hold_plain_values(place: ModuleType) -> None:
    """No FLINT, mpmath or sympy object is reachable from a result, nor after pickling."""
    model = hidden_in_every_part()
    for name, result in answers(place, model).items():
        rational = place is not floating
        assert_plain(result, name, rational=rational)
        assert_plain(pickle.loads(pickle.dumps(result)), name, rational=rational)


@pytest.mark.parametrize("rational", [True, False], ids=["rational", "floats"])
def test_examinations_hold_plain_values(rational: bool) -> None:
    """The same for an examination, before and after pickling, and for its dictionary."""
    model = hidden_in_every_part()
    found = realize.examine(model if rational else model.to_float())
    assert assert_plain(found, "examination", rational=False) > 100
    assert_plain(pickle.loads(pickle.dumps(found)), "examination", rational=False)
    for where, value in walk(found.to_dict()):
        assert value is None or type(value) in (dict, list, str, int, float, bool), (
            f"{where} is a {type(value).__name__}, which JSON does not have"
        )


def test_the_walk_finds_what_leaks() -> None:
    """The walk sees through records, dicts, tuples and object arrays."""
    hidden = np.array([{"a": (1, [flint.fmpq(1, 2)])}], dtype=object)
    with pytest.raises(AssertionError):
        assert_plain((hidden,), "planted", rational=False)


@pytest.fixture
def odd_precision() -> Iterator[None]:
    """Global precisions that nobody sets by chance, put back afterwards."""
    before = flint.ctx.prec, mpmath.mp.prec, mpmath.iv.prec
    flint.ctx.prec, mpmath.mp.prec, mpmath.iv.prec = 77, 91, 83
    yield
    flint.ctx.prec, mpmath.mp.prec, mpmath.iv.prec = before


def everything() -> None:
    """Ask every question, and fail in a few ways."""
    model = hidden_in_every_part()
    for place in (exact, floating, multiprecision):
        for result in answers(place, model).values():
            for _ in walk(result):
                pass
    for subject in (model, model.to_float()):
        found = realize.examine(subject)
        str(found)
        found.to_dict()
    with pytest.raises(errors.InexactInputError):
        exact.minimal(model.to_float())
    with pytest.raises(errors.UnknownWordError):
        exact.staircase(model, side="sideways")


@pytest.mark.usefixtures("odd_precision")
def test_global_precision_is_left_alone() -> None:
    """FLINT's and mpmath's working precisions are what they were, also after errors."""
    everything()
    assert (flint.ctx.prec, mpmath.mp.prec, mpmath.iv.prec) == (77, 91, 83)


def test_other_global_state_is_left_alone() -> None:
    """Random states, numpy's error state, the decimal context and warning filters stay."""
    state = (
        random.getstate(),
        pickle.dumps(np.random.get_state()),  # the global state is the point
        np.geterr(),
        str(decimal.getcontext()),
        list(warnings.filters),
    )
    everything()
    assert state == (
        random.getstate(),
        pickle.dumps(np.random.get_state()),
        np.geterr(),
        str(decimal.getcontext()),
        list(warnings.filters),
    )


def test_answers_do_not_depend_on_the_precision_set() -> None:
    """Modes and their enclosures are the same bits under another global precision."""
    model = hidden_in_every_part()
    before = realize.examine(model).to_dict()["modes"]
    kept = flint.ctx.prec
    flint.ctx.prec = 24
    try:
        after = realize.examine(model).to_dict()["modes"]
    finally:
        flint.ctx.prec = kept
    assert after == before


def test_the_exact_path_is_reproducible() -> None:
    """Fresh processes with different hash seeds give the same bytes."""
    code = (
        "from tests.house.everything import answers, hidden_in_every_part\n"
        "from tests.helpers import walk\n"
        "from realize import exact\n"
        "from fractions import Fraction\n"
        "for name, result in answers(exact, hidden_in_every_part()).items():\n"
        "    for where, value in walk(result, name):\n"
        "        if isinstance(value, (str, int, float, complex, Fraction)):\n"
        "            print(where, repr(value))\n"
    )
    texts = [
        subprocess.run(
            [sys.executable, "-c", code],
            capture_output=True,
            text=True,
            check=True,
            timeout=60,
            env=os.environ
            | {
                "PYTHONHASHSEED": seed,
                "PYTHONPATH": os.pathsep.join(p for p in sys.path if p),
            },
        ).stdout
        for seed in ("1", "2")
    ]
    assert len(texts[0]) > 1000
    assert texts[0] == texts[1]
