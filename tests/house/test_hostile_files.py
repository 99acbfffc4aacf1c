"""Files that somebody made to crash the checker, to keep it busy, or to fill the memory."""

from __future__ import annotations

import json
import random
import time
from typing import Any

import pytest

from realize import checker
from tests.house.test_forgeries import accepted, original, originals, put, seal

SECONDS = 10.0
"""A hostile file is refused much sooner; slow machines get what they need."""


@pytest.fixture
def small_allowance(monkeypatch: pytest.MonkeyPatch) -> None:
    """A thirtieth of the work and memory, so that using up all of it takes a second or two."""
    monkeypatch.setattr(checker, "MAX_WORK", checker.MAX_WORK // 30)
    monkeypatch.setattr(checker, "MAX_BITS", checker.MAX_BITS // 30)


def refused(text: str, words: str) -> None:
    """The checker refuses in time, and says why."""
    began = time.process_time()
    with pytest.raises(checker.Refused, match=words):
        checker.check(text)
    assert time.process_time() - began < SECONDS


SMALL = (
    '{"format":"realize-certificate","version":1,"claim":%s,"evidence":{},"digest":"","about":1}'
)


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("", "not JSON"),
        ("[]", "wanted an object"),
        ("1", "wanted an object"),
        ('"realize-certificate"', "wanted an object"),
        ("{", "not JSON"),
        ("\ufeff{}", "ASCII"),
        ('{"format":"réalize"}', "ASCII"),
        ('{"a":1,"a":1}', "a key occurs twice"),
        (SMALL % '{"kind":"x","kind":"x"}', "a key occurs twice"),
        (SMALL % "NaN", "NaN"),
        (SMALL % "-Infinity", "Infinity"),
        (SMALL % "[NaN]", "NaN"),
        (SMALL % "1e999999", "digest"),
        (SMALL % ("9" * 1000), "short integer"),
        (SMALL % ("-" + "9" * 5000), "short integer"),
        (SMALL % "-0", "digest"),
        (SMALL % '"\\ud800"', "digest"),
        ("[" * 100_000, "nested deeper"),
        ("[" * 100_000 + "]" * 100_000, "nested deeper"),
        ('{"a":' * 100_000, "nested deeper"),
        ('"' + "\\" * 100_001, "not JSON"),
        ('"' * 100_001, "not JSON"),
        ('{"a":' + "[" * 100_000 + "]" * 100_000 + "}", "nested deeper"),
        ("[" + "[]," * 1_000_000 + "[]]", "at most"),
        ("[" + "0," * 1_000_001 + "0]", "at most"),
        ("{" * 3, "not JSON"),
        ("nul", "not JSON"),
        ("{}\x00", "not JSON"),
        ("{} {}", "not JSON"),
    ],
    ids=range(29),
)
def test_texts_that_are_no_certificates(text: str, words: str) -> None:
    """Refused with a reason before anything is built from them."""
    refused(text, words)


def test_a_file_that_is_too_long(monkeypatch: pytest.MonkeyPatch) -> None:
    """Length comes first."""
    monkeypatch.setattr(checker, "MAX_BYTES", 1000)
    refused(" " * 1001, "at most 1000")


def test_not_a_number_in_what_is_not_proved() -> None:
    """No token that JSON does not have, anywhere; a float in `about` does no harm."""
    document = original("minimal")
    assert accepted(seal({**document, "about": {"seconds": 0.25, "made": "today"}}))
    assert not accepted(seal({**document, "about": {"seconds": float("nan")}}))
    without = {key: value for key, value in document.items() if key != "about"}
    assert accepted(seal(without))


@pytest.mark.parametrize("name", ["minimal", "floating", "different, fractions", "same"])
def test_keys_are_exactly_those_known(name: str) -> None:
    """One key more or less in any object but `about`: what is not known is not proved."""
    document = original(name)

    def objects(value: Any, path: tuple[Any, ...]) -> list[tuple[Any, ...]]:
        found = [path] if isinstance(value, dict) else []
        for key, item in value.items() if isinstance(value, dict) else ():
            found += objects(item, (*path, key))
        return found

    tried = 0
    for path in objects({k: document[k] for k in ("claim", "evidence")}, ())[1:]:
        place: Any = document
        for key in path:
            place = place[key]
        for key in place:
            if key == "transfer":
                continue  # without its fractions a claim says less, and is true
            smaller = {k: v for k, v in place.items() if k != key}
            assert not accepted(seal(put(document, path, smaller))), (path, key)
            tried += 1
        assert not accepted(seal(put(document, path, {**place, "stable": "yes"}))), path
    assert not accepted(seal({**document, "note": "proved"}))
    assert tried > 15


def test_truncated_anywhere() -> None:
    """No beginning of a certificate is one."""
    text = originals()["minimal"].rstrip()
    for length in range(len(text)):
        assert not accepted(text[:length])


def test_bytes_changed_anywhere() -> None:
    """One to three characters replaced, dropped or doubled: refused, or the claim is the same."""
    draw = random.Random(7)
    text = originals()["floating"].rstrip()
    claim = json.loads(text)["claim"]
    changed = 0
    for _ in range(1500):
        forged = text
        for _ in range(draw.randint(1, 3)):
            at = draw.randrange(len(forged))
            new = draw.choice(["", forged[at] * 2, chr(draw.randrange(128)), '"', "[", "0", "\\"])
            forged = forged[:at] + new + forged[at + 1 :]
        if accepted(forged):
            assert json.loads(forged)["claim"] == claim
        else:
            changed += 1
    assert changed > 1300


def long_number(k: int, digits: int) -> str:
    """Odd numbers without common factors to speak of."""
    return f"1{2 * k + 1:0{digits}}"


@pytest.mark.usefixtures("small_allowance")
@pytest.mark.parametrize(
    ("size", "digits"), [(60, 3000), (12, 19_000), (120, 300), (400, 4)], ids=str
)
def test_unrelated_denominators(size: int, digits: int) -> None:
    """Common denominators that would be longer than the whole file: paid in advance, refused."""
    count = iter(range(10**9))
    A = [[f"1/{long_number(next(count), digits)}" for _ in range(size)] for _ in range(size)]
    zero = [["0"] for _ in range(size)]
    names = {"input_names": ["u1"], "output_names": ["y1"]}
    ports = {"order": size, "input_count": 1, "output_count": 1, "sampling_period": None, **names}
    tables = {"A": A, "B": zero, "C": [["1"] * size], "D": [["0"]]}
    model = {
        **tables,
        **ports,
        "state_names": [f"x{i}" for i in range(size)],
        "reading": "stored",
        "table": "0" * 64,
    }
    one = [[str(int(i == j)) for j in range(size)] for i in range(size)]
    steps = {"reached": one, "pivots": list(range(size)), "seen": one}
    document = {
        "format": "realize-certificate",
        "version": 1,
        "claim": {
            "kind": "minimal realization",
            "model": model,
            "reduced": {**tables, **ports},
        },
        "evidence": {"reduction": steps, "modulus": 101},
    }
    refused(seal(document), "too much|rank|prime to a denominator")


@pytest.mark.usefixtures("small_allowance")
def test_degrees_without_states() -> None:
    """Fractions of a high degree over many ports cost memory, which is paid for too."""
    ports, degree = 150, 3000
    names = {
        "input_names": [f"u{i}" for i in range(ports)],
        "output_names": [f"y{i}" for i in range(ports)],
    }
    model = {
        "A": [], "B": [], "C": [[]] * ports, "D": [["0"] * ports] * ports, "order": 0,
        "input_count": ports, "output_count": ports, "sampling_period": None, **names,
        "state_names": [], "reading": "stored", "table": "0" * 64,
        "transfer": {
            "numerators": [[["0"]] * ports] * ports,
            "denominators": [[["1"]] * (ports - 1) + [["1"] * degree]] * ports,
        },
    }  # fmt: skip
    document = {
        "format": "realize-certificate",
        "version": 1,
        "claim": {
            "kind": "different sizes",
            "first": model,
            "second": original("same")["claim"]["first"],
        },
        "evidence": {},
    }
    refused(seal(document), "too much")


@pytest.mark.usefixtures("small_allowance")
def test_ports_without_states() -> None:
    """Ten thousand inputs, with neither state nor output: nothing is made of them."""
    document = original("different")
    for key in ("first", "second"):
        document["claim"][key] |= {
            "A": [], "B": [], "C": [], "D": [], "order": 0, "input_count": 10_000,
            "output_count": 0, "state_names": [], "output_names": [],
            "input_names": [f"u{i}" for i in range(10_000)],
        }  # fmt: skip
        document["claim"]["values"][key] = []
        document["evidence"][key] = []
    refused(seal(document), "two values are equal")


@pytest.mark.usefixtures("small_allowance")
def test_squares_without_end() -> None:
    """All squares cut again and again: paid for level by level."""
    document = original("distance")
    document["evidence"]["squares"] = ["x" * (2 * 4**level) for level in range(11)]
    refused(seal(document), "too much")


@pytest.mark.usefixtures("small_allowance")
def test_levels_without_end() -> None:
    """More levels than are read, and as many as are, where numbers grow level by level."""
    document = original("distance")
    document["evidence"]["squares"] = ["xx"] * 201
    refused(seal(document), "wanted levels")
    deep = ["x."] + ["x..."] * 198 + ["...."]
    document["evidence"]["squares"] = deep
    refused(seal(document), "corner|wanted at least")


@pytest.mark.usefixtures("small_allowance")
@pytest.mark.parametrize("key", ["lower", "upper", "radius", "point", "vector", "all"])
def test_long_numbers_in_a_distance(key: str) -> None:
    """Numbers of thousands of digits, and bounds that are nearly equal: every bit is paid for."""
    document = original("distance")
    long = [long_number(k, 19_000) for k in range(12)]
    near = {"lower": f"{long[0]}/{long[1]}", "upper": f"{long[2][:-1]}9/{long[1]}"}
    if key in ("lower", "upper", "all"):
        document["claim"] |= near if key == "all" else {key: near[key]}
    if key in ("radius", "all"):
        document["evidence"]["radius"] = f"1000{long[4]}/{long[5]}"
    if key in ("point", "all"):
        document["evidence"]["point"] = [f"{long[6]}/{long[7]}", f"{long[8]}/{long[9]}"]
    if key in ("vector", "all"):
        document["evidence"]["vector"] = [[long[6], f"{long[7]}/{long[8]}"], ["0", long[9]]]
    refused(seal(document), "upper|too much|wanted|corner")


@pytest.mark.usefixtures("small_allowance")
@pytest.mark.parametrize(("digits", "levels"), [(2, 5), (60, 4), (2000, 1)])
def test_many_states_and_squares(digits: int, levels: int) -> None:
    """Corners of a large model are paid for before the first is looked at."""
    size, count = 60, iter(range(10**9))
    A = [[f"{long_number(next(count), digits)}" for _ in range(size)] for _ in range(size)]
    document = original("distance")
    document["claim"] |= {"lower": "1", "upper": "1" + "0" * (digits + 9)}
    document["claim"]["model"] |= {
        "A": A, "B": [["1"]] * size, "C": [["1"] * size], "order": size,
        "state_names": [f"x{i}" for i in range(size)],
    }  # fmt: skip
    vector = [["1"] + ["0"] * (size - 1), ["0"] * size]
    squares = ["x" * (2 * 4**level) for level in range(levels)] + ["." * (2 * 4**levels)]
    radius = "1" + "0" * (digits + 9)
    document["evidence"] = {
        "vector": vector, "point": ["0", "0"], "radius": radius, "squares": squares,
    }  # fmt: skip
    refused(seal(document), "too much|corner")
