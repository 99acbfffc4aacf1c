"""Bad input, case by case: each gets its own error, with the place and what to do."""

from __future__ import annotations

import io
import json
import pickle
from decimal import Decimal
from typing import Any

import numpy as np
import pytest
import scipy.sparse

import realize
from realize import errors
from realize.errors import (
    EntryError,
    ImproperError,
    LimitError,
    ModelFileError,
    NotBuiltError,
    RealizeError,
    RealizeWarning,
    SamplingPeriodError,
    ShapeError,
    UnknownWordError,
    UnsupportedEntryError,
    ZeroDenominatorError,
)
from realize.model import files
from realize.model.files import load
from realize.model.realization import Realization
from realize.model.transfer import TransferMatrix

# Entries of matrices


@pytest.mark.parametrize("matrix", ["A", "B", "C", "D"])
@pytest.mark.parametrize("bad", [float("nan"), float("inf"), float("-inf")])
@pytest.mark.parametrize("as_array", [True, False])
def test_not_finite(matrix: str, bad: float, as_array: bool) -> None:
    """NaN and infinities are refused in every matrix, in arrays and in lists, with the place."""
    tables: dict[str, Any] = {letter: [[1.0, 2.0], [3.0, 4.0]] for letter in "ABCD"}
    tables[matrix][1][0] = bad
    if as_array:
        tables = {letter: np.array(table) for letter, table in tables.items()}
    with pytest.raises(EntryError, match="finite") as caught:
        Realization(**tables)
    assert caught.value.where == f"{matrix}, row 2, column 1"


@pytest.mark.parametrize("bad", ["one", "", "1,5", "0x1", "1 0", "٣", "1_000", "1/0", "k"])
def test_text_that_is_no_number(bad: str) -> None:
    """Text outside the grammar, and a division by zero, are refused with the place."""
    with pytest.raises(EntryError) as caught:
        Realization([[1, 0], [0, bad]], [1, 1], [1, 1])
    assert caught.value.where == "A, row 2, column 2"
    assert caught.value.found == bad


@pytest.mark.parametrize("bad", ["1e999999999", "-1e-999999999", Decimal("1e999999999")])
def test_enormous_exponents(bad: Any) -> None:
    """An exponent beyond the limit is refused before it is expanded."""
    with pytest.raises(LimitError) as caught:
        Realization([[bad]], [1], [1])
    assert caught.value.where == "A, row 1, column 1"


@pytest.mark.parametrize(
    ("bad", "name"),
    [(1j, "complex"), (True, "bool"), (None, "NoneType"), (object(), "object"), ({}, "dict")],
)
@pytest.mark.parametrize("neighbour", [1, 1.0])
def test_other_kinds_of_entry(bad: Any, name: str, neighbour: Any) -> None:
    """Complex, bool, None and objects are refused, whatever stands beside them."""
    with pytest.raises(UnsupportedEntryError) as caught:
        Realization([[neighbour, bad], [0, 0]], [1, 1], [1, 1])
    assert caught.value.where == "A, row 1, column 2"
    assert caught.value.found == name


@pytest.mark.parametrize(
    "array",
    [
        np.eye(1, dtype=complex),
        np.eye(1, dtype=bool),
        np.eye(1, dtype=np.longdouble),
        np.array([[None]]),
        np.array([[b"1"]]),
    ],
    ids=lambda array: str(array.dtype),
)
def test_arrays_of_other_kinds(array: np.ndarray[Any, Any]) -> None:
    """Arrays of complex numbers, bools, extended floats, None and bytes are refused."""
    with pytest.raises(UnsupportedEntryError) as caught:
        Realization(array, [1], [1])
    assert caught.value.where == "A, row 1, column 1"


def test_masked_arrays() -> None:
    """A masked entry has no value; an array with nothing masked is an array."""
    with pytest.raises(EntryError, match="masked"):
        Realization(np.ma.masked_array([[1.0]], mask=[[True]]), [1.0], [1.0])
    with pytest.raises(EntryError, match="masked"):
        TransferMatrix(np.ma.masked_array([1.0, 2.0], mask=[True, False]), [1, 1])
    assert Realization(np.ma.masked_array([[1.0]]), [1.0], [1.0]).order == 1


def test_things_that_are_no_matrices() -> None:
    """Sparse matrices, dicts and generators are refused with the advice to make them dense."""
    for thing in (scipy.sparse.eye_array(1), {1: 2}, (x for x in [1])):
        with pytest.raises(UnsupportedEntryError):
            Realization(thing, [1], [1])


# Shapes


@pytest.mark.parametrize(
    ("A", "where"),
    [
        ([[1, 2], [3]], "A, row 2"),
        ([[1.0, 2.0], [3.0, 4.0, 5.0]], "A, row 2"),
        ([[1, 2], 3], "A, row 2"),
        ([[1, [2]], [3, 4]], "A, row 1"),
        ([[1.0, [2.0, 3.0]], [3.0, 4.0]], "A, row 1"),
        ([[[1.0]]], "A, row 1"),
    ],
)
def test_ragged_rows(A: Any, where: str) -> None:
    """Rows of unequal length are refused by the row that differs."""
    with pytest.raises(ShapeError) as caught:
        Realization(A, [1, 1], [1, 1])
    assert caught.value.where == where


@pytest.mark.parametrize(
    ("tables", "where"),
    [
        (([[1, 2]], [1], [1]), "A"),
        (([1, 2], [1], [1]), "A"),
        ((np.zeros((0, 3)), [], []), "A"),
        ((np.zeros((1, 1, 1)), [1], [1]), "A"),
        (([[1]], [1, 2], [1]), "B"),
        (([[1, 0], [0, 1]], [[1, 2]], [1, 1]), "B"),
        (([[1, 0], [0, 1]], [], [1, 1]), "B"),
        (([[1, 0], [0, 1]], 1, [1, 1]), "B"),
        (([], [1], []), "B"),
        (([[1]], [1], [1, 2]), "C"),
        (([[1, 0], [0, 1]], [1, 1], [[1], [2]]), "C"),
        (([], [], [1]), "C"),
        (([[1]], [1], [1], [[1, 2]]), "D"),
        (([[1]], [1], [1], [1, 2]), "D"),
        (([[1]], [[1, 2]], [[1], [2]], 0), "D"),
        (([[1]], [[1, 2]], [[1], [2]], [1, 2]), "D"),
        (([[1]], [1], [1], []), "D"),
        (([], [], [], [1, 2]), "D"),
        ((np.zeros((0, 0)), np.zeros((0, 2)), [], [[1]]), "D"),
    ],
)
def test_shapes_that_do_not_fit(tables: Any, where: str) -> None:
    """The matrix that does not fit the others is named, with the shape that was wanted."""
    with pytest.raises(ShapeError, match="wanted") as caught:
        Realization(*tables)
    assert caught.value.where == where
    assert caught.value.found is not None


@pytest.mark.parametrize("argument", ["state_names", "input_names", "output_names"])
def test_names(argument: str) -> None:
    """Names of the wrong number, twice the same, unprintable or no texts are refused."""
    cases: list[tuple[Any, type[RealizeError]]] = [
        (["a"], ShapeError),
        (["a", "b", "c"], ShapeError),
        (["a", "a"], EntryError),
        (["a", ""], EntryError),
        (["a", "b\x1b[31m"], EntryError),
        (["a", "b\n"], EntryError),
        (["a", 1], UnsupportedEntryError),
        ("ab", UnsupportedEntryError),
        (2, UnsupportedEntryError),
    ]
    for names, error in cases:
        with pytest.raises(error) as caught:
            Realization(np.eye(2), np.eye(2), np.eye(2), **{argument: names})
        assert caught.value.where == argument  # type: ignore[attr-defined]


def test_generalised_models() -> None:
    """Any E but None says that generalised models are not built."""
    with pytest.raises(NotBuiltError) as caught:
        Realization([[1]], [1], [1], E=[[1]])  # type: ignore[arg-type]
    assert caught.value.feature == "E"
    assert Realization([[1]], [1], [1], E=None).E is None


# Sampling periods and words


@pytest.mark.parametrize(
    "period",
    [0, 0.0, -1, -0.5, "-1/2", "0", float("nan"), float("inf"), "one", "1/0", True, 1j, [1],
     "1e999999999"],
)  # fmt: skip
def test_sampling_periods(period: Any) -> None:
    """A sampling period that is not a positive number is refused for models of both forms."""
    with pytest.raises(SamplingPeriodError, match="positive"):
        Realization([[1]], [1], [1], sampling_period=period)
    with pytest.raises(SamplingPeriodError, match="positive"):
        TransferMatrix([1], [1, 1], sampling_period=period)


def test_unknown_readings() -> None:
    """A reading that is no word of the list is refused with the list."""
    for model in (Realization([[1]], [1], [1]), Realization([[1.0]], [1.0], [1.0])):
        with pytest.raises(UnknownWordError, match="stored") as caught:
            model.read("Stored")
        assert caught.value.argument == "reading"


# Transfer matrices


def test_improper_fractions() -> None:
    """An improper fraction is refused with both degrees, unless it is asked for."""
    with pytest.raises(ImproperError) as caught:
        TransferMatrix([[[1], [1, 0, 0]]], [[[1, 1], [0, 1, 1]]])
    assert caught.value.where == "output 1, input 2"
    assert (caught.value.numerator_degree, caught.value.denominator_degree) == (2, 1)
    assert TransferMatrix([1, 0, 0], [1, 1], improper=True).numerators == (((1, 0, 0),),)
    assert TransferMatrix([0, 0, 1], [1, 1]).numerators == (((1,),),)


@pytest.mark.parametrize("zero", [[0], [0, 0.0], ["0", "0/7"]])
def test_zero_denominators(zero: list[Any]) -> None:
    """A denominator of zeros is refused with its place, improper or not."""
    for improper in (False, True):
        with pytest.raises(ZeroDenominatorError) as caught:
            TransferMatrix([[[1]], [[1]]], [[[1, 1]], [zero]], improper=improper)
        assert caught.value.where == "output 2, input 1"


@pytest.mark.parametrize(
    ("numerators", "denominators"),
    [
        ([], [1]),
        ([1], []),
        (1, [1, 1]),
        ([1], 1),
        ([1], [[[1, 1]]]),
        ([[1], [2]], [1, 1]),
        ([[1, 2]], [1, 1]),
        ([[[1]], [[1], [2]]], [1, 1]),
        ([[[1], [2]]], [[[1, 1]]]),
        ([[[1]]], [[[1, 1]], [[1, 1]]]),
        ([[[]]], [1, 1]),
        ([[[[1]]]], [1, 1]),
        ([1, [2]], [1, 1]),
    ],
)
def test_nesting_of_coefficients(numerators: Any, denominators: Any) -> None:
    """Lists that are empty, ragged or nested to the wrong depth are refused."""
    with pytest.raises(ShapeError):
        TransferMatrix(numerators, denominators)


@pytest.mark.parametrize(
    ("bad", "error"),
    [
        (float("nan"), EntryError),
        ("x", EntryError),
        ("1/0", EntryError),
        ("1e999999999", LimitError),
        (None, UnsupportedEntryError),
        (True, UnsupportedEntryError),
        (1j, UnsupportedEntryError),
    ],
)
def test_coefficients(bad: Any, error: type[RealizeError]) -> None:
    """A coefficient that is no usable number is refused with its place."""
    with pytest.raises(error) as caught:
        TransferMatrix([[[1, bad]]], [1, 2, 3])
    assert caught.value.where == "numerators, output 1, input 1, coefficient 2"  # type: ignore[attr-defined]
    with pytest.raises(error):
        TransferMatrix([1], [bad, 1])


def test_things_that_are_no_coefficients() -> None:
    """Dicts and generators are not lists of coefficients."""
    for thing in ({1: 2}, (x for x in [1])):
        with pytest.raises(UnsupportedEntryError):
            TransferMatrix(thing, [1, 1])


# Files

GOOD: dict[str, Any] = {
    "format": "realize-model",
    "version": 1,
    "realization": {"A": [[1]], "B": [[1]], "C": [[1]], "D": [[0]]},
}


def read(document: Any) -> Any:
    """Load a document, or the text of one."""
    text = document if isinstance(document, str) else json.dumps(document)
    return load(io.StringIO(text))


def test_the_good_document_is_good() -> None:
    """The document that the cases below spoil is read."""
    assert read(GOOD) == Realization([[1]], [1], [1])


@pytest.mark.parametrize(
    "text",
    ["", "   ", "hello", "{", "[1, 2", json.dumps(GOOD)[:-1], json.dumps(GOOD)[:40],
     json.dumps(GOOD) + "}", "{'format': 1}", '{"a": 01}', '{"a": .5}', '{"a": 1.}', '"a\nb"'],
)  # fmt: skip
def test_files_that_are_not_json(text: str) -> None:
    """Text that is not JSON, or is cut off, is refused with the line and column."""
    with pytest.raises(ModelFileError, match="not JSON") as caught:
        read(text)
    assert caught.value.where is not None
    assert caught.value.where.startswith("line ")


@pytest.mark.parametrize("cut", range(len(json.dumps(GOOD))))
def test_every_truncation_is_refused(cut: int) -> None:
    """Whatever part of a file is missing at the end, no model comes out."""
    with pytest.raises(ModelFileError):
        read(json.dumps(GOOD)[:cut])


@pytest.mark.parametrize("token", ["NaN", "Infinity", "-Infinity"])
def test_tokens_that_are_not_json(token: str) -> None:
    """The tokens for what is not finite are refused, though many parsers take them."""
    with pytest.raises(ModelFileError, match=token):
        read(json.dumps(GOOD).replace("[[0]]", f"[[{token}]]"))


@pytest.mark.parametrize(
    ("document", "where"),
    [
        ([], "format"),
        (3, "format"),
        ("null", "format"),
        ({}, "format"),
        ({**GOOD, "format": "other"}, "format"),
        ({key: value for key, value in GOOD.items() if key != "version"}, "version"),
        ({**GOOD, "version": 2}, "version"),
        ({**GOOD, "version": "1"}, "version"),
        ({**GOOD, "version": True}, "version"),
        ({"format": "realize-model", "version": 1}, None),
        ({**GOOD, "transfer": {"numerators": [1], "denominators": [1]}}, None),
        ({**GOOD, "colour": "red"}, None),
        ({**GOOD, "improper": True}, None),
        ({**GOOD, "realization": [[1]]}, "realization"),
        ({**GOOD, "realization": {**GOOD["realization"], "F": [[1]]}}, "realization"),
        ({**GOOD, "realization": {"A": [[1]], "B": [[1]]}}, "C"),
        ({**GOOD, "realization": {**GOOD["realization"], "B": 1}}, "B"),
        ({**GOOD, "realization": {**GOOD["realization"], "D": {"1": 1}}}, "D"),
        ({**GOOD, "state_names": "x"}, "state_names"),
        ({**GOOD, "states": -1}, "states"),
        ({**GOOD, "states": "1"}, "states"),
        ({**GOOD, "inputs": 1.0}, "inputs"),
        ({**GOOD, "outputs": True}, "outputs"),
        ({**GOOD, "kind": "exact"}, "kind"),
    ],
)
def test_files_that_are_not_models(document: Any, where: str | None) -> None:
    """JSON that is not a model document is refused by the key at fault."""
    with pytest.raises(ModelFileError) as caught:
        read(document)
    assert caught.value.where == where
    assert caught.value.source == "stream"


@pytest.mark.parametrize(
    "body",
    [
        {"numerators": [1]},
        {"numerators": 1, "denominators": [1]},
        {"numerators": [1], "denominators": [1], "gain": 2},
    ],
)
def test_transfer_documents_that_are_none(body: Any) -> None:
    """A transfer document needs both lists and nothing else."""
    with pytest.raises(ModelFileError):
        read({"format": "realize-model", "version": 1, "transfer": body})


def test_keys_that_occur_twice() -> None:
    """A repeated key is refused, since parsers differ in which of the two they keep."""
    text = json.dumps(GOOD).replace('"C"', '"A"')
    with pytest.raises(ModelFileError, match="twice") as caught:
        read(text)
    assert caught.value.where == "'A'"


@pytest.mark.parametrize(
    ("change", "error"),
    [
        ({"A": [[None]]}, UnsupportedEntryError),
        ({"A": [[True]]}, UnsupportedEntryError),
        ({"A": [[{}]]}, UnsupportedEntryError),
        ({"A": [["1/0"]]}, EntryError),
        ({"A": [["one"]]}, EntryError),
        ({"A": [["1e999999999"]]}, LimitError),
        ({"A": [[1, 2], [3]]}, ShapeError),
        ({"B": [[1], [2]]}, ShapeError),
    ],
)
def test_entries_in_files(change: dict[str, Any], error: type[RealizeError]) -> None:
    """Entries of a file get the same errors as entries of a call."""
    with pytest.raises(error):
        read({**GOOD, "realization": {**GOOD["realization"], **change}})


def test_floats_in_files_that_overflow() -> None:
    """A float literal beyond the doubles is an infinity, and refused as such."""
    with pytest.raises(EntryError, match="A, row 1, column 1"):
        read(json.dumps(GOOD).replace('"A": [[1]]', '"A": [[1e999]]'))


@pytest.mark.parametrize(
    ("changes", "error"),
    [
        ({"states": 2}, ShapeError),
        ({"inputs": 0}, ShapeError),
        ({"outputs": 3}, ShapeError),
        ({"sampling_period": 0}, SamplingPeriodError),
        ({"sampling_period": [1]}, SamplingPeriodError),
        ({"state_names": ["a", "b"]}, ShapeError),
        ({"state_names": [1]}, UnsupportedEntryError),
        ({"states": 10**9}, LimitError),
    ],
)
def test_counts_names_and_periods_in_files(
    changes: dict[str, Any], error: type[RealizeError]
) -> None:
    """Counts that contradict the matrices, and bad names and periods, are refused."""
    with pytest.raises(error):
        read({**GOOD, **changes})


def test_improper_transfer_in_a_file() -> None:
    """An improper fraction in a file needs the word that says so."""
    document = {
        "format": "realize-model",
        "version": 1,
        "transfer": {"numerators": [1, 0], "denominators": [1]},
    }
    with pytest.raises(ImproperError):
        read(document)


@pytest.mark.parametrize(
    ("text", "what"),
    [
        ("[" * 100_000, "levels of nesting"),
        ('{"a":' * 100_000, "levels of nesting"),
        ("[" * (files.MAX_LISTS + 1), "lists"),
        ("[" + "[]," * files.MAX_LISTS + "[]]", "lists"),
        ("1," * (files.MAX_ENTRIES + 1), "entries"),
        (" " * (files.MAX_CHARACTERS + 1), "characters"),
        ('{"a": ' + "1" * 50_000 + "}", "digits in a number"),
        ('{"a": 0.' + "1" * 50_000 + "}", "digits in a number"),
    ],
    ids=["nested lists", "nested objects", "open lists", "many lists", "many entries",
         "many characters", "long integer", "long float"],
)  # fmt: skip
def test_enormous_files(text: str, what: str) -> None:
    """Files beyond a limit are refused before anything is built from them."""
    with pytest.raises(LimitError) as caught:
        read(text)
    assert caught.value.what == what
    assert caught.value.limit is not None


def test_brackets_inside_texts_do_not_nest() -> None:
    """Brackets in a text, closed or not, and escaped quotes do not count as nesting."""
    names = ["[" * 50 + '"']
    assert read({**GOOD, "state_names": names}).state_names == tuple(names)
    with pytest.raises(ModelFileError, match="not JSON"):
        read('"' + '\\"' * 2_000_000)


def test_empty_matrices_do_not_imply_a_huge_one() -> None:
    """A short file with large counts does not make D large."""
    document = {
        "format": "realize-model",
        "version": 1,
        "realization": {"A": [], "B": [], "C": []},
        "states": 0,
        "inputs": 10_000,
        "outputs": 10_000,
    }
    with pytest.raises(LimitError) as caught:
        read(document)
    assert caught.value.found == 10**8


def test_files_that_are_not_text(tmp_path: Any) -> None:
    """Bytes that are not UTF-8, and streams of bytes, are refused."""
    path = tmp_path / "model.json"
    path.write_bytes(b"\xff\xfe{}")
    with pytest.raises(ModelFileError, match="UTF-8") as caught:
        load(path)
    assert caught.value.source == str(path)
    with pytest.raises(ModelFileError, match="text mode"):
        load(io.BytesIO(b"{}"))  # type: ignore[arg-type]


# The tree of errors


FACTS: dict[str, dict[str, Any]] = {
    "AlgebraicLoopError": {"ports": ("a.u1", "a.y1")},
    "ShapeError": {"where": "A", "found": (1, 2), "wanted": (2, 2)},
    "EntryError": {"where": "A", "found": "nan"},
    "UnsupportedEntryError": {"where": "A", "found": "complex"},
    "ImproperError": {"where": "x", "numerator_degree": 2, "denominator_degree": 1},
    "ZeroDenominatorError": {"where": "output 1, input 1"},
    "SamplingPeriodError": {"found": "-1"},
    "UnknownWordError": {"argument": "side", "found": "left", "allowed": ("input", "output")},
    "ToleranceError": {"argument": "tolerance", "found": "-1"},
    "UncertaintyError": {"argument": "relative", "found": "-1", "where": "A, item 1"},
    "InexactInputError": {"where": "model"},
    "ArithmeticMismatchError": {"kinds": ("floating", "rational")},
    "ModelFileError": {"source": "a.json", "where": "version"},
    "LimitError": {"what": "digits", "where": "A", "found": 2, "limit": 1},
    "PrecisionError": {"wanted": 1e-9, "reached": 1e-3},
    "VerificationError": {"identity": "A V = V A1"},
    "DisagreementError": {"answers": {"state": 3, "hankel": 2}},
    "CertificateError": {"reason": "digest: that of claim and evidence is another"},
    "BudgetError": {"budget": 10.0, "spent": 11.0},
    "NotBuiltError": {"feature": "E"},
}

BUILTINS: dict[str, type[Exception]] = {
    "AlgebraicLoopError": ValueError,
    "ShapeError": ValueError,
    "EntryError": ValueError,
    "UnsupportedEntryError": TypeError,
    "ImproperError": ValueError,
    "ZeroDenominatorError": ValueError,
    "SamplingPeriodError": ValueError,
    "UnknownWordError": ValueError,
    "ToleranceError": ValueError,
    "UncertaintyError": ValueError,
    "InexactInputError": TypeError,
    "ArithmeticMismatchError": TypeError,
    "ModelFileError": ValueError,
    "LimitError": ValueError,
    "PrecisionError": ArithmeticError,
    "VerificationError": ArithmeticError,
    "DisagreementError": ArithmeticError,
    "CertificateError": ValueError,
    "BudgetError": RuntimeError,
    "NotBuiltError": NotImplementedError,
}


def test_every_error_is_in_the_tables() -> None:
    """No error class is left out of the two tests below."""
    classes = {
        name
        for name in errors.__all__
        if issubclass(getattr(errors, name), Exception)
        and not issubclass(getattr(errors, name), Warning)
    }
    assert classes == {"RealizeError", *FACTS} == {"RealizeError", *BUILTINS}


@pytest.mark.parametrize("name", FACTS)
def test_errors_derive_from_what_a_caller_would_catch(name: str) -> None:
    """Each error is a RealizeError and the builtin that a caller would guess, at the top level."""
    cls = getattr(realize, name)
    assert issubclass(cls, RealizeError)
    assert issubclass(cls, BUILTINS[name])


@pytest.mark.parametrize("name", FACTS)
def test_errors_pickle_with_their_facts(name: str) -> None:
    """Text and facts survive pickling, and the text is all that is printed."""
    error = getattr(errors, name)("what happened", **FACTS[name])
    again = pickle.loads(pickle.dumps(error))
    assert type(again) is type(error)
    assert str(again) == again.message == "what happened"
    for fact, value in FACTS[name].items():
        assert getattr(again, fact) == value


def test_warnings() -> None:
    """The library's warnings have a root of their own among user warnings."""
    assert issubclass(RealizeWarning, UserWarning)
    assert issubclass(realize.HiddenInstabilityWarning, RealizeWarning)
