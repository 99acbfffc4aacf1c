"""Every test that the checker makes is needed: without it a false claim would pass.

Each weakness below is planted in the checker's own text. The forgery that belongs to it is refused
by the checker as it is and accepted by the weakened one, so none of the safeguards is idle, and
the forgeries are good ones.
"""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from types import ModuleType
from typing import Any

import pytest

from realize import checker
from tests.house.oracle import truth
from tests.house.test_forgeries import Document, forgeable, seal

SOURCE = Path(checker.__file__).read_text("utf-8")
ONE = [["1", "0"], ["0", "1"]]


def weakened(sound: str, weak: str) -> ModuleType:
    """The checker with one piece of its text replaced."""
    assert SOURCE.count(sound) == 1, f"{SOURCE.count(sound)} places for {sound!r}"
    module = ModuleType("weakened")
    exec(compile(SOURCE.replace(sound, weak), "weakened", "exec"), module.__dict__)
    return module


def models(document: Document, *keys: str, **changes: Any) -> None:
    """Change models of a claim."""
    for key in keys:
        document["claim"][key] |= changes


def reduction(A: Any, B: Any, C: Any, D: Any = "0") -> Document:
    """One input, one output, two states: a "reduction" of a model to itself."""
    document = forgeable("minimal, nothing hidden")
    models(document, "model", "reduced", A=A, B=B, C=C, D=[[D]], input_count=1)
    models(document, "model", "reduced", input_names=["u1"])
    document["evidence"] = {
        "reduction": {"reached": ONE, "pivots": [0, 1], "seen": ONE},
        "modulus": 101,
    }
    return document


SOUND = ([["0", "1"], ["-2", "-3"]], [["0"], ["1"]], [["1", "0"]])


def other_reached() -> Document:
    """V reaches one state only, and the reduced model is that of one state."""
    document = reduction([["-1", "0"], ["1", "-2"]], [["1"], ["0"]], [["1", "1"]])
    document["claim"]["reduced"] |= {"A": [["-1"]], "B": [["1"]], "C": [["1"]], "order": 1}
    document["evidence"]["reduction"] = {"reached": [["1"], ["0"]], "pivots": [0], "seen": [["1"]]}
    return document


def input_outside() -> Document:
    """B lies outside the span of V."""
    document = reduction([["-1", "0"], ["0", "-2"]], [["1"], ["1"]], [["1", "1"]])
    document["claim"]["reduced"] |= {"A": [["-1"]], "B": [["1"]], "C": [["1"]], "order": 1}
    document["evidence"]["reduction"] = {"reached": [["1"], ["0"]], "pivots": [0], "seen": [["1"]]}
    return document


def other(**reduced: Any) -> Callable[[], Document]:
    """A reduced model with one matrix of another one."""

    def forge() -> Document:
        document = reduction(*SOUND)
        models(document, "reduced", **reduced)
        return document

    return forge


def not_reached(modulus: int = 101) -> Document:
    """A reduced model that its input does not reach."""
    document = reduction([["-1", "0"], ["0", "-2"]], [["1"], ["0"]], [["1", "1"]])
    document["evidence"]["modulus"] = modulus
    return document


def not_seen() -> Document:
    """A reduced model that its output does not see."""
    return reduction([["-1", "0"], ["0", "-2"]], [["1"], ["1"]], [["1", "0"]])


def names() -> Document:
    """Other names for the ports of the reduced model."""
    document = forgeable("minimal, nothing hidden")
    models(document, "reduced", input_names=["u2", "u1"])
    return document


def period() -> Document:
    """Another sampling period for the reduced model."""
    document = forgeable("minimal, nothing hidden")
    models(document, "reduced", sampling_period="1")
    return document


def negative_period() -> Document:
    """A sampling period below zero."""
    document = forgeable("minimal, nothing hidden")
    models(document, "model", "reduced", sampling_period="-1")
    return document


def fractions(numerator: list[str], denominator: list[str]) -> Callable[[], Document]:
    """Other fractions beside a model."""

    def forge() -> Document:
        document = forgeable("minimal, fractions")
        document["claim"]["model"]["transfer"] = {
            "numerators": [[numerator]],
            "denominators": [[denominator]],
        }
        return document

    return forge


def far_away() -> Document:
    """Doubles farther from the reduced model than is said."""
    document = forgeable("floating")
    document["claim"]["delivered"]["A"] = [["17"]]
    return document


def singular() -> Document:
    """T that satisfies the equations and has no inverse."""
    document = forgeable("same, coordinates")
    models(document, "first", "second", A=ONE, B=[["0"], ["0"]], C=[["0", "0"]])
    document["claim"]["transformation"] = [["1", "0"], ["0", "0"]]
    return document


def wrong_coordinates() -> Document:
    """T that is invertible and satisfies no equation."""
    document = forgeable("same, coordinates")
    document["claim"]["transformation"] = ONE
    return document


def at_a_pole() -> Document:
    """Two equal transfer matrices said to differ at a hidden mode."""
    document = forgeable("different")
    models(document, "first", "second", A=[["2"]], B=[["0"]], C=[["1"]], D=[["0"]], order=1)
    models(document, "first", "second", state_names=["x1"])
    document["claim"] |= {"point": "2", "values": {"first": [["1"]], "second": [["5"]]}}
    document["evidence"] |= {"first": [["1"]], "second": [["5"]]}
    return document


def no_solution() -> Document:
    """A value that is not taken: X solves nothing."""
    document = forgeable("different")
    document["claim"]["values"]["second"] = document["claim"]["values"]["first"]
    model = document["claim"]["first"]
    document["claim"]["second"] = model
    document["evidence"]["second"] = [["0"], ["0"]]
    document["claim"]["values"]["second"] = [["0"]]
    return document


def wrong_value() -> Document:
    """A value that is not C X + D."""
    document = forgeable("different")
    document["claim"]["values"]["second"] = [["1000"]]
    return document


def equal_values() -> Document:
    """One model twice, with one value twice."""
    document = forgeable("different")
    for part in (document["claim"], document["claim"]["values"], document["evidence"]):
        part["second"] = part["first"]
    return document


def equal_periods() -> Document:
    """Two models with one sampling period."""
    document = forgeable("different periods")
    models(document, "second", sampling_period=document["claim"]["first"]["sampling_period"])
    return document


IDENTITY = 'demand(self.equal(*sides), f"{where}: {what} does not hold")'


def without(what: str) -> tuple[str, str]:
    """Leave one identity of the first paragraph out."""
    return IDENTITY, f"demand(what == {what!r} or self.equal(*sides), what)"


WEAKNESSES: list[tuple[str, tuple[str, str], Callable[[], Document]]] = [
    ("A V = V A1", without("A V = V A1"), other_reached),
    ("B = V B1", without("B = V B1"), input_outside),
    ("U A1 = Ar U", without("U A1 = Ar U"), other(A=[["0", "1"], ["-2", "-7"]])),
    ("Br = U B1", without("Br = U B1"), other(B=[["0"], ["5"]])),
    ("C V = Cr U", without("C V = Cr U"), other(C=[["1", "3"]])),
    ("D = Dr", without("D = Dr"), other(D=[["9"]])),
    ("reached", ("self.rank(inputs, A, model.n", "self.rank(A, A, model.n"), not_reached),
    ("seen", ("self.rank(C, list(", "self.rank(A, list("), not_seen),
    (
        "modulus 1",
        ('demand(value >= 2, "evidence.modulus: wanted at least 2")', ""),
        lambda: not_reached(1),
    ),
    ("names", ("demand(ports == (reduced.inputs, reduced.outputs)", "demand(True"), names),
    ("period", (" and self.same_time(other)", ""), period),
    (
        "negative period",
        ("positive = self.period is None or", "positive = True or"),
        negative_period,
    ),
    (
        "fractions",
        ("holds = total * a == n[top - e] * b * c", "holds = True"),
        fractions(["1", "2"], ["1", "3"]),
    ),
    (
        "fractions, what vanishes",
        ("for e in range(top, -model.n - 1, -1)", "for e in range(top, -1, -1)"),
        fractions(["1"], ["1", "5"]),
    ),
    (
        "fractions, leading zero",
        ("demand(d[0] != 0 and ", "demand("),
        fractions(["0"], ["0"]),
    ),
    ("distance", ("sum(squares_over) * q**2 <= p**2 * below", "True"), far_away),
    (
        "singular",
        ("arithmetic.rank(arithmetic.modulo(T, N, where), [], n, N, where)", ""),
        singular,
    ),
    (
        "coordinates",
        (
            'demand(arithmetic.equal(left, right), f"{where}: an identity',
            'demand(True, f"{where}: an',
        ),
        wrong_coordinates,
    ),
    (
        "pole",
        ('arithmetic.rank(rows, [], n, N, f"{model.where}: z - A")', ""),
        at_a_pole,
    ),
    (
        "solution",
        ('demand(holds, f"evidence.{key}: A X', 'demand(True, f"evidence.{key}: A X'),
        no_solution,
    ),
    ("value", ("demand(arithmetic.equal(found, value)", "demand(True"), wrong_value),
    ("equal values", ("demand(not arithmetic.equal(*values)", "demand(True"), equal_values),
    ("equal periods", ('demand(not equal, f"claim: it', 'demand(True, f"claim: it'), equal_periods),
]


@pytest.mark.parametrize(
    ("replacement", "forge"),
    [pytest.param(replacement, forge, id=name) for name, replacement, forge in WEAKNESSES],
)
def test_no_safeguard_is_idle(replacement: tuple[str, str], forge: Callable[[], Document]) -> None:
    """The forgery is refused, and passes without the one test that is made against it."""
    document = forge()
    assert not truth(document["claim"])
    with pytest.raises(checker.Refused):
        checker.check(seal(document))
    assert weakened(*replacement).check(seal(document)).startswith("Proved")
