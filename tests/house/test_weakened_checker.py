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


def bounds(lower: str, upper: str, **evidence: Any) -> Callable[[], Document]:
    """Other bounds for a distance of 1/2, and other evidence for them."""

    def forge() -> Document:
        document = forgeable("distance")
        document["claim"] |= {"lower": lower, "upper": upper}
        document["evidence"] |= evidence
        return document

    return forge


def other_side() -> Document:
    """What is said of the inputs, said of the outputs, which see less."""
    document = forgeable("distance")
    document["claim"]["kind"] = "distance to unobservability"
    document["claim"]["model"]["C"] = [["1", "0"]]
    return document


def all_is_reached() -> Document:
    """A basis of everything, which holds B and is kept by A."""
    document = forgeable("distance, zero")
    document["claim"]["model"]["B"] = [["0"], ["1"]]
    document["evidence"] = {"reached": ONE, "pivots": [0, 1]}
    return document


def one_column(A: Any, B: Any) -> Callable[[], Document]:
    """A controllable pair with V = e_1."""

    def forge() -> Document:
        document = forgeable("distance, zero")
        document["claim"]["model"] |= {"A": A, "B": B}
        document["evidence"] = {"reached": [["1"], ["0"]], "pivots": [0]}
        return document

    return forge


IDENTITY = 'demand(not any(map(any, self.minus(left, right)[0])), f"{what} does not hold")'


def without(what: str) -> tuple[str, str]:
    """Leave one identity out; the name says where and which."""
    return (
        IDENTITY,
        f"demand({what!r} in what or not any(map(any, self.minus(left, right)[0])), what)",
    )


WEAKNESSES: list[tuple[str, tuple[str, str], Callable[[], Document]]] = [
    ("A V = V A1", without("reached: A V = V A1"), other_reached),
    ("B = V B1", without("reached: B = V B1"), input_outside),
    ("Ar U = U A1", without("seen: A V = V A1"), other(A=[["0", "1"], ["-2", "-7"]])),
    ("Br = U B1", without("seen: B = V B1"), other(B=[["0"], ["5"]])),
    ("Cr U = C V", without("seen: C V = C1"), other(C=[["1", "3"]])),
    ("Dr = D", without("seen: D = D1"), other(D=[["9"]])),
    ("reached", ('[B, A B, ...]", N, turned(B, m)', '[B, A B, ...]", N, A'), not_reached),
    ("seen", ('[C; C A; ...]", N, C, n', '[C; C A; ...]", N, A, n'), not_seen),
    (
        "modulus 1",
        ("whole(N, 2, MAX_MODULUS", "whole(N, 1, MAX_MODULUS"),
        lambda: not_reached(1),
    ),
    ("names", ("demand(model.names == reduced.names", "demand(True"), names),
    (
        "period",
        ("demand(model.ports == reduced.ports", "demand(model.ports[:2] == reduced.ports[:2]"),
        period,
    ),
    ("negative period", ("demand(above > 0,", "demand(True,"), negative_period),
    (
        "fractions",
        ("demand(found == wanted * last", "demand(True"),
        fractions(["1", "2"], ["1", "3"]),
    ),
    (
        "fractions, what vanishes",
        ("enumerate(t + [0] * model.n)", "enumerate(t)"),
        fractions(["1"], ["1", "5"]),
    ),
    (
        "fractions, leading zero",
        ('demand(f[0], f"{where}: not', 'demand(True, f"{where}: not'),
        fractions(["0"], ["0"]),
    ),
    (
        "distance of doubles",
        ("fits = far >= 0 and squares * under**2 <= (far * below) ** 2", "fits = True"),
        far_away,
    ),
    ("singular", ("self.rank(where, N, T, n)", ""), singular),
    ("coordinates", without("claim.transformation: "), wrong_coordinates),
    ("pole", ('self.rank(f"{where}: z - A", N, Z, n)', ""), at_a_pole),
    ("solution", without(": (z - A) X = B"), no_solution),
    ("value", without(": value = C X + D"), wrong_value),
    (
        "equal values",
        ("demand(any(map(any, self.minus(*values)[0]))", "demand(True"),
        equal_values,
    ),
    (
        "equal periods",
        ("demand(first.ports[part] != second.ports[part]", "demand(True"),
        equal_periods,
    ),
    ("upper", ("squares <= U * U * length", "True"), bounds("1/100000", "1/10000")),
    (
        "no vector",
        ("length > 0 and ", ""),
        bounds("1/100000", "1/10000", vector=[["0", "0"], ["0", "0"]]),
    ),
    (
        "radius",
        ("demand(inside,", "demand(True,"),
        bounds("3/5", "2", radius="7/10", squares=["xx", "........"]),
    ),
    (
        "half diagonal",
        ("- low - side * side // 2", "- low"),
        bounds("3/5", "2", radius="3", squares=[".."]),
    ),
    (
        "squares left",
        ("demand(not squares", "demand(True"),
        bounds("3/5", "2", radius="3", squares=["xx"]),
    ),
    ("corners", ("demand(proved,", "demand(True,"), bounds("3/5", "2", radius="3")),
    ("outputs", ("A, B = turned(A, n), turned(C, n)", "pass"), other_side),
    ("all columns", ('"evidence")[1][0]) < n', '"evidence")[1][0]) <= n'), all_is_reached),
    (
        "kept by A",
        without("evidence.reached: A V = V A1"),
        one_column([["-1", "0"], ["1", "-2"]], [["1"], ["0"]]),
    ),
    (
        "holds B",
        without("evidence.reached: B = V B1"),
        one_column([["-1", "1"], ["0", "-2"]], [["0"], ["1"]]),
    ),
]


def test_rounding_is_made_up_for() -> None:
    """An indefinite matrix whose factor, rounded down, leaves something on the diagonal."""
    indefinite = 2, [9, 5, 2], [0, 0, 0], 10**6
    assert 9 * 2 < 5**2
    assert not checker.semidefinite(*indefinite)
    assert weakened("- give", "").semidefinite(*indefinite)
    assert checker.semidefinite(2, [9 * 10**8, 5 * 10**8, 3 * 10**8], [0, 0, 0], 10**6)
    assert not checker.semidefinite(2, [9 * 10**8, 0, 1 * 10**8], [0, 4 * 10**8, 0], 10**6)


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
