"""No certificate of a false claim is accepted, and nothing in a file does harm.

A forgery is a document whose claim is false, as `tests.house.oracle` judges it from the claim
alone; its digest is made to match. A change that leaves the claim true, such as another modulus,
may be accepted or not. The tests count the forgeries they tried.
"""

from __future__ import annotations

import hashlib
import itertools
import json
import random
import warnings
from collections.abc import Iterator
from functools import cache
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from realize import (
    HiddenInstabilityWarning,
    Realization,
    TransferMatrix,
    certify,
    checker,
    distance_to_uncontrollability,
    distance_to_unobservability,
    exact,
    floating,
    same_transfer,
)
from tests.house.oracle import truth

Document = dict[str, Any]

WANTED = 10_000

NAMES = (
    "minimal",
    "minimal, nothing hidden",
    "minimal, gain",
    "minimal, order 0",
    "minimal, read",
    "minimal, fractions",
    "floating",
    "same",
    "same, coordinates",
    "different",
    "different, fractions",
    "different periods",
    "different sizes",
    "distance",
    "distance, fine",
    "distance, outputs",
    "distance, zero",
)

#: How many forgeries each test makes at least.
FORGERIES = {
    **{f"leaf, {name}": 70 for name in NAMES},
    "leaf, distance": 105,
    "leaf, distance, zero": 60,
    "leaf, minimal, nothing hidden": 350,
    "leaf, different, fractions": 330,
    "leaf, same, coordinates": 300,
    "leaf, minimal, fractions": 290,
    "leaf, floating": 290,
    "leaf, minimal": 270,
    "leaf, same": 250,
    "leaf, different": 240,
    "leaf, minimal, read": 230,
    "word, minimal": 1100,
    "word, floating": 1000,
    "word, same, coordinates": 1200,
    "word, different": 950,
    "word, distance": 400,
    "parts": 600,
    "sizes": 1800,
    "moduli": 530,
    "coordinates": 186,
    "poles": 372,
    "bounds": 640,
    "many": 1150,
}


def enough(test: str, found: int) -> None:
    """Demand that a test made the forgeries that it promises."""
    assert found >= FORGERIES[test], f"{test}: {found} forgeries, promised {FORGERIES[test]}"


def seal(document: Document) -> str:
    """The text of a document with its digest recomputed as the README describes it."""
    body = {"claim": document["claim"], "evidence": document["evidence"]}
    text = json.dumps(body, sort_keys=True, separators=(",", ":"), ensure_ascii=True)
    document = {**document, "digest": hashlib.sha256(text.encode("ascii")).hexdigest()}
    return json.dumps(document)


def accepted(text: str) -> bool:
    """Whether the checker accepts a text; anything but an answer is a failure of the test."""
    try:
        checker.check(text)
    except checker.Refused:
        return False
    return True


def attempt(document: Document) -> int:
    """Try a document; 1 when it was a forgery, which must have been refused."""
    if id(document["claim"]) in SOUND:
        accepted(seal(document))
        return 0
    true = truth(document["claim"])
    assert not accepted(seal(document)) or true, json.dumps(document)[:2000]
    return not true


#: Claims of the originals as they are, by identity: true whatever the evidence beside them.
SOUND: dict[int, Any] = {}


@cache
def originals() -> dict[str, str]:
    """Small certificates of every kind, as texts."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", HiddenInstabilityWarning)
        hidden = Realization(
            [[-1, 2, 0], [0, -3, 0], ["1/2", 0, "-5/3"]],
            [0, 1, 0],
            [1, 1, 0],
            sampling_period="1/10",
        )
        two = Realization([[0, 1], [-2, -3]], [[1, 0], [0, 1]], [[1, 0]], state_names=["a", "b"])
        other = Realization([[-1, 0], [0, -2]], [1, 1], [1, 2])
        turned = Realization([[0, 1], [-2, -3]], [0, 1], [4, 3])
        drum = TransferMatrix(["1", "-1/4"], ["1", "3/4", "-1/4"])
        chamber = Realization([[-0.1, -0.2], [0.0, -0.3]], [0.1, 0.1], [1.0, 0.0])
        made = {
            "minimal": certify(exact.minimal(hidden)),
            "minimal, nothing hidden": certify(exact.minimal(two)),
            "minimal, gain": certify(exact.minimal(Realization([], [], [], [[1, "2/3"]]))),
            "minimal, order 0": certify(exact.minimal(Realization([[1]], [0], [1], [[3]]))),
            "minimal, read": certify(exact.minimal(chamber.read("written"))),
            "minimal, fractions": certify(exact.minimal(drum)),
            "floating": certify(floating.minimal(chamber), reading="written"),
            "same": certify(same_transfer(hidden, exact.minimal(hidden).model)),
            "same, coordinates": certify(same_transfer(other, turned)),
            "different": certify(same_transfer(other, Realization([[-1]], [1], [2], [[1]]))),
            "different, fractions": certify(same_transfer(drum, TransferMatrix([1], [1, 2]))),
            "different periods": certify(same_transfer(hidden, hidden.read("written").dual())),
            "different sizes": certify(same_transfer(hidden, two)),
            "distance": certify(distance_to_uncontrollability(other)),
            "distance, fine": certify(distance_to_uncontrollability(other, rtol=1e-4)),
            "distance, outputs": certify(distance_to_unobservability(two)),
            "distance, zero": certify(
                distance_to_uncontrollability(Realization([[1, 2], [0, 3]], [1, 0], [1, 1]))
            ),
        }
        made["different periods"] = certify(
            same_transfer(other, Realization(*turned.matrices(), sampling_period=2))
        )
    return {name: certificate.to_json() for name, certificate in made.items()}


def original(name: str) -> Document:
    """A fresh copy."""
    document: Document = json.loads(originals()[name])
    SOUND[id(document["claim"])] = document["claim"]
    return document


def forgeable(name: str) -> Document:
    """A copy that a test changes in place."""
    document = original(name)
    del SOUND[id(document["claim"])]
    return document


def leaves(value: Any, path: tuple[Any, ...] = ()) -> Iterator[tuple[tuple[Any, ...], Any]]:
    """Every leaf of a document, with the way to it."""
    items: Any = ()
    if isinstance(value, dict):
        items = value.items()
    elif isinstance(value, list):
        items = enumerate(value)
    else:
        yield path, value
    for key, item in items:
        yield from leaves(item, (*path, key))


def put(document: Document, path: tuple[Any, ...], value: Any) -> Document:
    """A copy with another value at a place."""
    changed: Any = document.copy()
    place = changed
    for key in path[:-1]:
        place[key] = place[key].copy()
        place = place[key]
    place[path[-1]] = value
    return dict(changed)


def other_values(leaf: Any) -> list[Any]:
    """Values of the same kind, near and far."""
    if isinstance(leaf, bool) or leaf is None:
        return ["1", "1/2", 0, 1]
    if isinstance(leaf, int):
        return [leaf + 1, leaf - 1, 0, 1, 2, 4, 6, 2**31, 2**64, 2**64 + 1, -leaf]
    if checker.RATIONAL.fullmatch(leaf):
        found = ["0", "1", "-1", "2", "1/2", "-1/3", "7", "1000003", "1/1000003", f"{leaf}1"]
        if leaf != "0":
            found += [leaf.removeprefix("-"), "-" + leaf.removeprefix("-"), leaf + "/2"]
        return [value for value in found if value != leaf]
    return [
        "0" * 64, "given", "stored", "minimal realization", "same transfer matrix", "y9",
        "distance to uncontrollability", "distance to unobservability",
        leaf.replace("x", "."), leaf.replace(".", "x"), leaf[1:], leaf + ".", "." * len(leaf),
    ]  # fmt: skip


def test_the_originals_are_accepted() -> None:
    """What is forged below is sound, in the eyes of the checker and of the oracle."""
    for name in NAMES:
        assert accepted(originals()[name]), name
        assert accepted(seal(original(name))), name
        assert truth(original(name)["claim"]), name
    assert set(NAMES) == set(originals())


@pytest.mark.parametrize("name", NAMES)
def test_every_leaf_changed(name: str) -> None:
    """Every number, word and digest of claim and evidence, to each of a dozen other values."""
    document = original(name)
    found = tried = 0
    for path, leaf in leaves({key: document[key] for key in ("claim", "evidence")}):
        for value in other_values(leaf):
            tried += 1
            found += attempt(put(document, path, value))
    assert tried > found
    enough(f"leaf, {name}", found)


WORDS: tuple[Any, ...] = (
    True, False, None, 1.0, 0.5, 1, -1, 10**30, [], {}, ["1"], {"p": 1}, "", " 1", "1 ", "1\n",
    "+1", "-0", "00", "01", "1_0", "1e3", "1.0", "0x1", "1/0", "1/-2", "1//2", "/2", "1/", "-",
    "\u0661", "\uff11", "1\u00a0", "\u00b2", "inf", "NaN", "nan", "1/2/3", "9" * 20_001,
    "1/" + "9" * 20_001, "--1", "1\u0000",
)  # fmt: skip


@pytest.mark.parametrize(
    "name", ["minimal", "floating", "same, coordinates", "different", "distance"]
)
def test_what_is_no_number(name: str) -> None:
    """Every leaf replaced by what `int`, JSON or a careless pattern would let through."""
    document = original(name)
    found = 0
    for path, leaf in leaves({key: document[key] for key in ("claim", "evidence")}):
        if path[-1] in ("kind", "reading", "table") or "names" in str(path):
            continue
        for value in WORDS:
            if value == leaf and type(value) is type(leaf):
                continue
            found += attempt(put(document, path, value))
    enough(f"word, {name}", found)


def test_parts_swapped() -> None:
    """Claims, evidence and every part of both taken from other certificates."""
    found = 0
    documents = [original(name) for name in NAMES]
    for mine, other in itertools.permutations(documents, 2):
        found += attempt({**mine, "evidence": other["evidence"]})
        for key in {*mine["claim"]} & {*other["claim"]}:
            found += attempt(put(mine, ("claim", key), other["claim"][key]))
            if isinstance(mine["claim"][key], dict) and isinstance(other["claim"][key], dict):
                for inside in "ABCD":
                    if inside in other["claim"][key]:
                        value = other["claim"][key][inside]
                        found += attempt(put(mine, ("claim", key, inside), value))
    enough("parts", found)


def test_sizes_that_lie() -> None:
    """Orders and counts off by one, rows and columns dropped, doubled, turned and exchanged."""
    found = 0
    for name in NAMES:
        document = original(name)
        matrices = [
            (path, value)
            for path, value in inner(document)
            if isinstance(value, list) and value and isinstance(value[0], list)
        ]
        for path, rows in matrices:
            for changed in (
                rows[1:],
                rows[:-1],
                [*rows, rows[0]],
                rows[::-1],
                [row[:-1] for row in rows],
                [row[::-1] for row in rows],
                [[*row, "0"] for row in rows],
                [list(column) for column in zip(*rows, strict=False)],
                [rows],
                [],
                [[]],
                {str(i): row for i, row in enumerate(rows)},
            ):
                if changed != rows:
                    found += attempt(put(document, path, changed))
        for (first, one), (second, other) in itertools.combinations(matrices, 2):
            found += attempt(put(put(document, first, other), second, one))
    enough("sizes", found)


def inner(value: Any, path: tuple[Any, ...] = ()) -> Iterator[tuple[tuple[Any, ...], Any]]:
    """Every list and object of claim and evidence, with the way to it."""
    if path and path[0] not in ("claim", "evidence"):
        return
    if isinstance(value, (dict, list)):
        if path:
            yield path, value
        items: Any = value.items() if isinstance(value, dict) else enumerate(value)
        for key, item in items:
            yield from inner(item, (*path, key))


def test_not_minimal_under_any_modulus() -> None:
    """True identities, a reduced model that is not minimal, and every modulus that may help."""
    found = 0
    moduli = [*range(100), 2**31 - 1, 2**61 - 1, 2**64 - 1, 2**64, 561, 6 * 35, 10**6]
    for A, B, C in (
        ([["-1", "0"], ["0", "-2"]], [["1"], ["0"]], [["1", "1"]]),
        ([["-1", "0"], ["0", "-2"]], [["1"], ["1"]], [["1", "0"]]),
        ([["1", "0"], ["0", "1"]], [["1"], ["2"]], [["1", "1"]]),
        ([["0", "0"], ["0", "0"]], [["0"], ["0"]], [["0", "0"]]),
        ([["1/2", "6"], ["0", "1/2"]], [["6"], ["0"]], [["1/6", "1"]]),
    ):
        document = forgeable("minimal, nothing hidden")
        one = [["1", "0"], ["0", "1"]]
        for key in ("model", "reduced"):
            document["claim"][key] |= {"A": A, "B": B, "C": C, "D": [["0"]], "input_count": 1}
            document["claim"][key]["input_names"] = ["u1"]
        document["evidence"]["reduction"] = {"reached": one, "pivots": [0, 1], "seen": one}
        for modulus in moduli:
            document["evidence"]["modulus"] = modulus
            found += attempt(document)
    enough("moduli", found)


def test_coordinates_that_are_none() -> None:
    """T that satisfies every equation and is singular, under every modulus."""
    found = 0
    document = forgeable("same, coordinates")
    dead = {"A": [["1", "0"], ["0", "2"]], "B": [["0"], ["0"]], "C": [["0", "0"]]}
    for key in ("first", "second"):
        document["claim"][key] |= dead
    for T in ([["0", "0"], ["0", "0"]], [["1", "0"], ["0", "0"]], [["6", "0"], ["0", "0"]]):
        document["claim"]["transformation"] = T
        for modulus in (*range(60), 210, 2**61 - 1):
            document["evidence"]["modulus"] = modulus
            found += attempt(document)
    # Invertible, so true: 6 is no unit modulo 2, 3, 4, 6, ..., and the test may fail there.
    document["claim"]["transformation"] = [["6", "0"], ["0", "1"]]
    outcomes = set()
    for modulus in range(2, 12):
        document["evidence"]["modulus"] = modulus
        assert not attempt(document)
        outcomes.add((modulus % 2 and modulus % 3, accepted(seal(document)))[1])
    assert outcomes == {True, False}
    enough("coordinates", found)


def test_points_that_are_poles() -> None:
    """Equal transfer matrices, "different" at a pole where A X + B = z X has many solutions."""
    found = 0
    document = forgeable("different")
    model = {"A": [["2"]], "B": [["0"]], "C": [["1"]], "D": [["0"]], "order": 1}
    for key in ("first", "second"):
        document["claim"][key] |= {**model, "state_names": ["x1"]}
    document["claim"]["point"] = "2"
    for first, second in itertools.permutations(("0", "1", "5", "1/2"), 2):
        document["claim"]["values"] = {"first": [[first]], "second": [[second]]}
        document["evidence"] |= {"first": [[first]], "second": [[second]]}
        for modulus in (*range(30), 2**61 - 1):
            document["evidence"]["modulus"] = modulus
            found += attempt(document)
    enough("poles", found)


def test_bounds_that_do_not_hold() -> None:
    """Bounds moved past a distance of 1/2, by much or little, under coverings fine or rough."""
    document = forgeable("distance")
    whole = document["evidence"]["squares"]
    coverings = [whole, whole[:-1], [".."], ["xx", "........"], ["xx"], [], ["." * 9], [2]]
    found = 0
    for lower, upper in (
        ("50001/100000", "1"), ("51/100", "1"), ("2", "3"), ("1/100", "49999/100000"),
        ("1/3", "2/5"), ("0", "1/1000000"), ("0", "0"), ("-1", "1/4"), ("1", "1/3"), ("1", "1"),
    ):  # fmt: skip
        document["claim"] |= {"lower": lower, "upper": upper}
        for radius in ("1/1000", "1/2", "2", "3", "7/2", "100", "-5", "0"):
            for squares in coverings:
                document["evidence"] |= {"radius": radius, "squares": squares}
                found += attempt(document)
    document["claim"] |= {"lower": "499/1000", "upper": "501/1000"}
    fine = json.loads(originals()["distance, fine"])["evidence"]
    document["evidence"] = fine
    assert not attempt(document)
    assert accepted(seal(document))
    document["claim"]["lower"] = "50001/100000"
    found += attempt(document)
    enough("bounds", found)


def test_many_changes_at_once() -> None:
    """Seeded draws of two to four changes, in claim and evidence together."""
    draw = random.Random(20261201)
    found = 0
    documents = [original(name) for name in NAMES]
    places = [list(leaves({k: d[k] for k in ("claim", "evidence")})) for d in documents]
    for _ in range(1500):
        which = draw.randrange(len(documents))
        forged = documents[which]
        for path, leaf in draw.sample(places[which], draw.randint(2, 4)):
            forged = put(forged, path, draw.choice(other_values(leaf)))
        found += attempt(forged)
    enough("many", found)


@settings(max_examples=60)
@given(st.data())
def test_changes_drawn_by_hypothesis(data: st.DataObject) -> None:
    """Any JSON value at any place of any certificate."""
    document = original(data.draw(st.sampled_from(NAMES)))
    places = [*leaves(document), *inner(document)]
    path, _ = data.draw(st.sampled_from([place for place in places if place[0]]))
    scalars = st.none() | st.booleans() | st.integers() | st.floats() | st.text(max_size=5)
    fractions = st.fractions(max_denominator=9).map(str)
    value = data.draw(
        st.recursive(scalars | fractions, lambda inside: st.lists(inside, max_size=3), max_leaves=5)
    )
    forged = put(document, path, value)
    text = seal(forged) if path[0] != "digest" else json.dumps(forged)
    if accepted(text):
        assert truth(forged["claim"])


def test_enough_forgeries() -> None:
    """Ten thousand in all, by what each test above is held to."""
    assert sum(FORGERIES.values()) >= WANTED
