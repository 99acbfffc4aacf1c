"""Certificates: what they hold, what they are made from, and the checker as a program."""

from __future__ import annotations

import ast
import hashlib
import json
import pickle
import subprocess
import sys
import warnings
from fractions import Fraction
from pathlib import Path
from typing import Any

import pytest
import sympy

import realize
from realize import (
    Certificate,
    CertificateError,
    HiddenInstabilityWarning,
    Realization,
    TransferMatrix,
    certify,
    check,
    checker,
    distance_to_uncontrollability,
    distance_to_unobservability,
    exact,
    floating,
    multiprecision,
    same_transfer,
)
from realize.arithmetic import modular
from realize.arithmetic.exact import OpenedExact
from realize.errors import LimitError, UnknownWordError, UnsupportedEntryError
from tests.helpers import assert_same_response, walk
from tests.house.oracle import truth

CHECKER = Path(checker.__file__)


def chamber() -> Realization:
    """Decimals that hide a mode as they were written, and hide nothing as stored."""
    return Realization(
        [[-0.1, -0.2], [0.0, -0.3]],
        [0.1, 0.1],
        [1.0, 0.0],
        state_names=["bed", "air"],
        input_names=["burner"],
        output_names=["bed sensor"],
    )


def hidden() -> Realization:
    """Three states in discrete time, one of them reached and seen."""
    return Realization(
        [["1/2", 2, 0], [0, "1/3", 0], [1, 0, "-1/5"]], [0, 1, 0], [0, 1, 0], sampling_period="1/10"
    )


def read(certificate: Certificate) -> dict[str, Any]:
    """The document of a certificate."""
    document: dict[str, Any] = json.loads(certificate.to_json())
    return document


def standalone(path: Path, script: Path = CHECKER) -> subprocess.CompletedProcess[str]:
    """Run the checker as a file of its own, cut off from every package."""
    return subprocess.run(
        [sys.executable, "-I", "-S", str(script), str(path)],
        capture_output=True,
        text=True,
        timeout=60,
    )


# --------------------------------------------------------------------------- what is in one


def test_the_document() -> None:
    """The keys, the digest of the canonical text, matrices in rows as model files have them."""
    certificate = certify(exact.minimal(hidden()))
    document = read(certificate)
    assert list(document) == ["format", "version", "claim", "evidence", "digest", "about"]
    assert (document["format"], document["version"]) == ("realize-certificate", 1)
    body = {"claim": document["claim"], "evidence": document["evidence"]}
    text = json.dumps(body, sort_keys=True, separators=(",", ":"))
    assert document["digest"] == hashlib.sha256(text.encode()).hexdigest() == certificate.digest
    claim = document["claim"]
    assert claim["model"]["A"] == [["1/2", "2", "0"], ["0", "1/3", "0"], ["1", "0", "-1/5"]]
    assert claim["model"]["sampling_period"] == claim["reduced"]["sampling_period"] == "1/10"
    assert [claim["model"][k] for k in ("order", "input_count", "output_count")] == [3, 1, 1]
    assert [claim["reduced"][k] for k in ("order", "input_count", "output_count")] == [1, 1, 1]
    assert claim["model"]["reading"] == "given"
    assert claim["model"]["table"] == hidden().digest


def test_names_reading_and_table_are_bound() -> None:
    """The reading, the digest of the doubles read, and all names are part of the claim."""
    table = chamber()
    claim = read(certify(exact.minimal(table.read("written"))))["claim"]
    assert claim["model"]["reading"] == "written"
    assert claim["model"]["table"] == table.digest
    assert claim["model"]["state_names"] == ["bed", "air"]
    for part in ("model", "reduced"):
        assert claim[part]["input_names"] == ["burner"]
        assert claim[part]["output_names"] == ["bed sensor"]
    words = check(certify(exact.minimal(table.read("written"))))
    assert f"read as written from table {table.digest}" in words
    assert "not about a plant" in words


def test_where_a_model_comes_from_survives() -> None:
    """A pickled reading still knows its table; a model of its own is read as given."""
    table = chamber()
    for model in (table.read("written"), pickle.loads(pickle.dumps(table.read("written")))):
        assert model.provenance == ("written", table.digest)
        assert model == table.read("written")
    assert table.provenance == ("given", table.digest)
    transfer = TransferMatrix([0.5], [1.0, 0.25])
    again = pickle.loads(pickle.dumps(transfer.read("stored")))
    assert again.provenance == ("stored", transfer.digest)


def test_a_certificate_is_the_same_everywhere() -> None:
    """Its digest does not depend on when it was made, nor on a pickle in between."""
    reduction = exact.minimal(hidden())
    first = certify(reduction)
    second = certify(pickle.loads(pickle.dumps(reduction)))
    assert first == second
    assert hash(first) == hash(second)
    assert first.digest == second.digest
    assert pickle.loads(pickle.dumps(first)).to_json() == first.to_json()
    assert first != certify(exact.minimal(Realization([[1]], [1], [1])))
    assert first.digest[:12] in repr(first)


def test_certify_repeats_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    """No subspace is looked for again: the evidence stayed with the reduction."""
    reduction = exact.minimal(hidden())

    def again(*_: Any) -> Any:
        raise AssertionError("the work was done already")

    monkeypatch.setattr(modular, "lift", again)
    monkeypatch.setattr(OpenedExact, "lift_reached", again)
    check(certify(reduction))


@pytest.mark.parametrize(
    "model",
    [
        Realization([], [], [], [[1, "2/3"]]),
        Realization([[1]], [0], [1]),
        Realization([[1]], [1], [0]),
        Realization([[0, 1], [0, 0]], [[0, 0], [1, 0]], [[1, 0], [0, 0], [2, 0]]),
        Realization([[1, 0], [0, 2]], [1, 1], [1, 1], [["-7/3"]]),
    ],
    ids=["gain", "not reached", "not seen", "dead ports", "minimal"],
)
def test_corner_cases(model: Realization) -> None:
    """No states, nothing left, ports that do nothing, nothing to remove."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", HiddenInstabilityWarning)
        reduction = exact.minimal(model)
    certificate = certify(reduction)
    assert certificate.claim == check(certificate) == check(certificate.to_json())
    assert truth(read(certificate)["claim"])


def test_fractions_are_bound() -> None:
    """Of a transfer matrix the claim holds the fractions, and the checker compares them."""
    transfer = TransferMatrix(
        [[["1", "1"], ["2"]], [["0"], ["1", "0", "3"]]],
        [[["1", "3", "2"], ["3"]], [["1", "5"], ["1", "1", "1/7"]]],
        sampling_period=1,
    )
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", HiddenInstabilityWarning)
        certificate = certify(exact.minimal(transfer))
    claim = read(certificate)["claim"]
    assert claim["model"]["transfer"]["denominators"][0][0] == ["1", "3", "2"]
    assert "claim.model.transfer" in check(certificate)
    assert truth(claim)


# --------------------------------------------------------------------------- floating


def test_a_floating_reduction_is_certified_through_a_reading() -> None:
    """The doubles delivered are in the claim, and lie near an exact minimal realization."""
    reduction = floating.minimal(chamber())
    certificate = certify(reduction)
    claim = read(certificate)["claim"]
    assert claim["model"]["reading"] == "written"
    assert claim["reduced"]["order"] == reduction.order == 1
    assert [[float(Fraction(x)) for x in row] for row in claim["delivered"]["A"]] == (
        reduction.model.A.tolist()
    )
    assert 0 < Fraction(claim["distance"]) < Fraction(1, 10**14)
    assert truth(claim)
    assert "claim.delivered, in doubles, differs" in check(certificate)
    reduced = Realization(*(claim["reduced"][key] for key in "ABCD"))
    assert_same_response(reduced, chamber().read("written"))


def test_a_reading_that_does_not_confirm_the_order() -> None:
    """As stored nothing is hidden, so that reading proves nothing of order 1."""
    reduction = floating.minimal(chamber())
    with pytest.raises(CertificateError, match=r"order 1; .* 2 as stored") as caught:
        certify(reduction, reading="stored")
    assert caught.value.reason is None
    rotated = Realization([[-1.0, 0.1 + 0.2], [1e-17, -2.0]], [[1.0], [1e-18]], [[1.0, 1.0]])
    with pytest.raises(CertificateError, match="2 as stored, 2 as written"):
        certify(floating.minimal(rotated))


@pytest.mark.parametrize("order", [3, 8])
def test_a_floating_transfer_function(order: int) -> None:
    """Fractions in doubles: companion forms on both paths share their coordinates."""
    poles = [-1.0 - k / 4 for k in range(order)]
    denominator = [1.0]
    for pole in poles:
        denominator = [
            a - pole * b for a, b in zip([*denominator, 0.0], [0.0, *denominator], strict=True)
        ]
    certificate = certify(floating.minimal(TransferMatrix([1.0, 0.5], denominator)))
    claim = read(certificate)["claim"]
    assert claim["reduced"]["order"] == order
    assert Fraction(claim["distance"]) < Fraction(1, 10**9)
    assert truth(claim)
    check(certificate)


# --------------------------------------------------------------------------- distances


def gao_neumann() -> Realization:
    """A pair whose distance is 0.03923843 (Gao and Neumann 1993; value recomputed)."""
    return Realization([[1, 1, 1], ["1/10", 3, 5], [0, -1, -1]], [[1], ["1/10"], [0]], [[1, 0, 0]])


@pytest.mark.parametrize("rtol", [0.1, 1e-6])
def test_both_bounds_of_a_distance(rtol: float) -> None:
    """They hold the value of the literature, and are hardly farther apart than the result's."""
    found = distance_to_uncontrollability(gao_neumann(), rtol=rtol)
    certificate = certify(found)
    claim = read(certificate)["claim"]
    lower, upper = Fraction(claim["lower"]), Fraction(claim["upper"])
    assert lower < Fraction("0.0392384302187") < upper
    assert lower <= Fraction(found.lower) < Fraction(found.upper) <= upper
    assert 1 - lower / upper < 1.03 * rtol
    assert certificate.kind == "distance to uncontrollability"
    assert f"{claim['lower']} and {claim['upper']}" in check(certificate)
    assert "lower" not in read(certificate)["about"]
    assert truth(claim)


def test_a_distance_to_unobservability_is_about_the_model_itself() -> None:
    """Not about its dual; floats are read as stored."""
    model = Realization([[0.1, 1.0], [0.0, -0.3]], [[0.0], [1.0]], [[1.0, 0.7]])
    certificate = certify(distance_to_unobservability(model))
    claim = read(certificate)["claim"]
    assert claim["kind"] == certificate.kind == "distance to unobservability"
    assert (claim["model"]["reading"], claim["model"]["table"]) == ("stored", model.digest)
    assert claim["model"]["C"][0][0] == "1"
    assert truth(claim)
    check(certificate)


@pytest.mark.parametrize("B", [[[0], [1], [0], [0]], [[0], [0], [0], [0]]], ids=["radial", "none"])
def test_a_distance_of_zero(B: list[list[int]]) -> None:
    """A satellite with radial thrust alone (Brockett 1970; value recomputed), and with none."""
    A = [[0, 1, 0, 0], [3, 0, 0, 2], [0, 0, 0, 1], [0, -2, 0, 0]]
    certificate = certify(distance_to_uncontrollability(Realization(A, B, [[1, 0, 0, 0]])))
    assert "of this exact model is 0." in check(certificate)
    assert truth(read(certificate)["claim"])


def test_where_the_squares_are_too_many(monkeypatch: pytest.MonkeyPatch) -> None:
    """First half of the upper bound, then a quarter is tried, and said; then it is refused."""
    found = distance_to_uncontrollability(gao_neumann(), rtol=1e-6)
    for most, share in ((400, 2), (300, 4)):
        monkeypatch.setattr("realize.proof.certify._MOST", most)
        certificate = certify(found)
        document = read(certificate)
        assert "the squares were too many" in document["about"]["lower"]
        assert 1 < found.upper / share / float(Fraction(document["claim"]["lower"])) < 1.01
        assert truth(document["claim"])
        check(certificate)
    monkeypatch.setattr("realize.proof.certify._MOST", 20)
    with pytest.raises(LimitError, match="Certify a model with fewer states") as caught:
        certify(found)
    assert caught.value.limit == 20


def test_the_checker_has_the_last_word(monkeypatch: pytest.MonkeyPatch) -> None:
    """Squares that do not show the bound are never handed out."""
    found = distance_to_uncontrollability(gao_neumann())
    monkeypatch.setattr("realize.proof.certify.squares", lambda *_: [".."])
    with pytest.raises(LimitError, match="squares"):
        certify(found)


def test_distances_that_cannot_be_certified() -> None:
    """Without states there are no bounds; a sampling period that is a float is no exact number."""
    with pytest.raises(CertificateError, match="without states"):
        certify(distance_to_uncontrollability(Realization([], [], [], [[1]])))
    timed = Realization([["1/2"]], [1], [1], sampling_period=0.1)
    with pytest.raises(CertificateError, match=r"sampling period is the float 0\.1"):
        certify(distance_to_uncontrollability(timed))
    check(certify(distance_to_uncontrollability(timed.read("written"))))


def test_a_pair_of_numbers_of_every_size() -> None:
    """The squares and the unit follow the size of the entries."""
    for size in (Fraction(1, 10**30), Fraction(1), Fraction(10**30)):
        model = Realization([[size, 2 * size], [0, -size]], [[size / 3], [size]], [[1, 1]])
        check(certify(distance_to_uncontrollability(model)))


# --------------------------------------------------------------------------- what cannot be


def test_results_that_prove_nothing() -> None:
    """Other arithmetics, sequences, float periods and other things are refused with advice."""
    root = Realization([[sympy.sqrt(2)]], [1], [1])
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", HiddenInstabilityWarning)
        with pytest.raises(CertificateError, match="arithmetic, which proves nothing"):
            certify(multiprecision.minimal(root))
    with pytest.raises(CertificateError, match="not made of a model"):
        certify(exact.from_markov_parameters([0, 1, "1/2", "1/4"]))
    timed = Realization([["1/2"]], [1], [1], sampling_period=0.1)
    with pytest.raises(CertificateError, match=r"sampling period is the float 0\.1"):
        certify(exact.minimal(timed))
    check(certify(exact.minimal(timed.read("written"))))
    with pytest.raises(UnsupportedEntryError, match="Realization"):
        certify(hidden())  # type: ignore[arg-type]
    with pytest.raises(UnknownWordError):
        certify(exact.minimal(hidden()), reading="rounded")


def test_what_is_no_certificate() -> None:
    """Text that proves nothing raises, and says what fails."""
    text = certify(exact.minimal(hidden())).to_json()
    forged = text.replace('"1/2"', '"1/7"')
    assert forged != text
    with pytest.raises(CertificateError, match="digest") as caught:
        check(forged)
    assert caught.value.reason
    assert caught.value.reason.startswith("digest")
    with pytest.raises(CertificateError, match="not JSON"):
        check("no")
    with pytest.raises(CertificateError, match="type bytes"):
        check(text.encode())  # type: ignore[arg-type]
    copied = pickle.loads(pickle.dumps(caught.value))
    assert (copied.reason, str(copied)) == (caught.value.reason, str(caught.value))


# --------------------------------------------------------------------------- the program


def test_the_checker_stands_alone(tmp_path: Path) -> None:
    """A copy of the one file, in isolated mode and without site packages, is enough."""
    script = tmp_path / "anything.py"
    script.write_bytes(CHECKER.read_bytes())
    file = tmp_path / "certificate.json"
    certificate = certify(exact.minimal(hidden()))
    file.write_text(certificate.to_json(), "ascii")
    done = standalone(file, script)
    assert (done.returncode, done.stderr) == (0, "")
    assert done.stdout == certificate.claim + "\n"
    file.write_text(certificate.to_json().replace('"1/2"', '"1/7"'), "ascii")
    done = standalone(file, script)
    assert (done.returncode, done.stdout) == (1, "")
    assert done.stderr.startswith("Not proved: digest")


@pytest.mark.parametrize("content", [b"", b"\xff\xfe", b"\xef\xbb\xbf{}", b"{", bytes(100)])
def test_the_program_and_files_of_bytes(content: bytes, tmp_path: Path) -> None:
    """Whatever the bytes, status 1 and one line."""
    file = tmp_path / "bytes"
    file.write_bytes(content)
    done = standalone(file)
    assert done.returncode == 1
    assert done.stderr.count("\n") == 1
    assert done.stderr.startswith("Not proved: ")


def test_the_program_without_a_file(tmp_path: Path) -> None:
    """A file that cannot be read is status 2, as is a wrong call."""
    assert standalone(tmp_path / "nothing").returncode == 2
    assert standalone(tmp_path).returncode == 2
    done = subprocess.run(
        [sys.executable, "-I", str(CHECKER)], capture_output=True, text=True, timeout=60
    )
    assert done.returncode == 2
    assert done.stderr.startswith("usage: ")


def test_the_checker_imports_the_standard_library_alone() -> None:
    """Nothing of the package, nothing installed; and nothing inside functions."""
    tree = ast.parse(CHECKER.read_text("utf-8"))
    found = set()
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            found |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0
            found.add(str(node.module))
    assert {name.split(".")[0] for name in found} <= sys.stdlib_module_names
    assert "json" in found


def test_long_numbers_are_read_whatever_python_allows() -> None:
    """Thousands of digits, with the interpreter's own limit at its lowest."""
    long = 10**9000 + 7
    model = Realization([[Fraction(1, long)]], [1], [1])
    text = certify(exact.minimal(model)).to_json()
    kept = sys.get_int_max_str_digits()
    sys.set_int_max_str_digits(640)
    try:
        assert check(text).startswith("Proved")
        assert checker.number("9" * 20_000) == 10**20_000 - 1
    finally:
        sys.set_int_max_str_digits(kept)


@pytest.mark.parametrize(
    ("limit", "value", "what"),
    [("MAX_DIGITS", 20_000, "digits in a number"), ("MAX_ITEMS", 50, "items")],
)
def test_what_the_checker_would_not_read(
    limit: str, value: int, what: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    """No certificate is handed out that exceeds a limit of the checker."""
    model = Realization([[Fraction(1, 10**20_000 + 7)]], [1], [1])
    monkeypatch.setattr(checker, limit, value)
    with pytest.raises(LimitError, match=what) as caught:
        certify(exact.minimal(model))
    assert caught.value.limit == value


def test_results_are_plain_values() -> None:
    """No object of another library is reachable from a certificate or a comparison."""
    comparison = same_transfer(hidden(), TransferMatrix(["1"], ["1", "2"], sampling_period="1/10"))
    for thing in (comparison, certify(comparison), pickle.loads(pickle.dumps(comparison))):
        for where, value in walk(thing):
            library = type(value).__module__.split(".")[0]
            assert library not in ("flint", "sympy", "mpmath"), where


def test_a_comparison_can_be_certified() -> None:
    """All five kinds check, and their claims are true."""
    one = Realization([[-1, 0], [0, -2]], [1, 1], [1, 2])
    other = Realization([[0, 1], [-2, -3]], [0, 1], [4, 3])
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", HiddenInstabilityWarning)
        small = exact.minimal(hidden()).model
    kinds = {
        "same transfer matrix": [(one, other), (hidden(), small), (small, hidden())],
        "different transfer matrices": [(one, Realization([[-1]], [1], [1]))],
        "different sampling periods": [(one, small)],
        "different sizes": [(one, Realization([], [], [], [[1, 2]]))],
    }
    for kind, pairs in kinds.items():
        for pair in pairs:
            certificate = certify(same_transfer(*pair))
            assert certificate.kind == kind
            assert check(certificate).startswith("Proved: ")
            assert truth(read(certificate)["claim"])


def test_public_names() -> None:
    """All names are there at the top level."""
    for name in ("certify", "check", "same_transfer", "Certificate", "Comparison"):
        assert name in realize.__all__
