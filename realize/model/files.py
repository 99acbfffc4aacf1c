"""Model files: JSON documents that hold a model exactly.

A document is an object with the keys

``format``, ``version``
    ``"realize-model"`` and 1.
``realization`` or ``transfer``
    The matrices ``A``, ``B``, ``C``, ``D`` as lists of rows (``D`` may be left out), or
    ``numerators`` and ``denominators`` as `TransferMatrix` takes them.
``sampling_period``
    null or left out in continuous time.
``states``, ``inputs``, ``outputs``
    Counts; needed where a matrix is empty.
``state_names``, ``input_names``, ``output_names``
    Optional lists of texts.
``improper``
    true when a transfer matrix may hold improper fractions.

A number with a point or an exponent is a double. An integer, or a string such as ``"-1/3"``, is
exact. The schema, JSON Schema draft 2020-12, is the file model.schema.json beside this module;
whether a number has a point is the one thing it cannot say.

References
----------
RFC 8259, The JavaScript Object Notation Data Interchange Format.
"""

from __future__ import annotations

import json
import os
import re
from collections.abc import Iterator
from fractions import Fraction
from typing import Any, NoReturn, TextIO

import numpy as np

from realize.entries import MAX_DIGITS, Kind, int_from_digits, make_fraction
from realize.errors import LimitError, ModelFileError, ShapeError, UnsupportedEntryError
from realize.model.base import SystemModel, default_names
from realize.model.realization import Realization
from realize.model.transfer import TransferMatrix

__all__ = [
    "MAX_CHARACTERS",
    "MAX_COUNT",
    "MAX_DEPTH",
    "MAX_ENTRIES",
    "MAX_LISTS",
    "load",
    "save",
    "to_document",
]

MAX_CHARACTERS = 32_000_000
"""Longest model file that is read, in characters."""

MAX_ENTRIES = 2_000_000
"""Most commas in a model file, and so about its most entries; also the most that D may have."""

MAX_LISTS = 200_000
"""Most lists and objects in a model file."""

MAX_DEPTH = 10
"""Deepest nesting of lists and objects; a model file needs five levels."""

MAX_COUNT = 10_000
"""Most states, inputs or outputs in a model file."""

_FORMAT = "realize-model"
_VERSION = 1
_COMMON_KEYS = (
    "format",
    "version",
    "sampling_period",
    "inputs",
    "outputs",
    "input_names",
    "output_names",
    "kind",
)
_KEYS = {
    "realization": (*_COMMON_KEYS, "realization", "states", "state_names"),
    "transfer": (*_COMMON_KEYS, "transfer", "improper"),
}
# A whole string, closed or not, or one bracket. The possessive repeat never goes back, so that
# no text, however malformed, takes more than one pass.
_BRACKET_OR_STRING = re.compile(r'"(?:[^"\\]|\\.)*+"?|[\[\]{}]', re.DOTALL)


def to_document(model: SystemModel) -> dict[str, Any]:
    """Return the model as a JSON document: dicts, lists, texts, ints and floats, nothing else.

    Doubles stay floats, rationals become texts. Default names are left out.

    Raises
    ------
    UnsupportedEntryError
        When the model holds irrational constants, which a model file has no numbers for.
    """
    model._refuse_constants(
        "model files hold doubles and rational numbers only. Save to_float(), or keep the model in "
        "a pickle"
    )
    return model._document()


# Writing


def save(model: SystemModel, target: str | os.PathLike[str] | TextIO) -> None:
    """Write a model to a file, so that `load` gives an equal one.

    Parameters
    ----------
    model : Realization or TransferMatrix
        The model.
    target : str, path-like or text stream
        Where to write; a file that exists is replaced.

    Raises
    ------
    LimitError
        When the model exceeds a limit of `load`.
    UnsupportedEntryError
        When `model` is no model or holds irrational constants, or `target` is neither a path nor a
        text stream.
    OSError
        When the file cannot be written.

    Examples
    --------
    >>> import sys
    >>> save(Realization([["-1/2"]], [1], [1.0]), sys.stdout)
    {
      "format": "realize-model",
      "version": 1,
      "realization": {
        "A": [["-1/2"]],
        "B": [["1"]],
        "C": [[1.0]],
        "D": [[0.0]]
      },
      "sampling_period": null
    }
    """
    if not isinstance(model, SystemModel):
        raise UnsupportedEntryError(
            f"model: found a value of type {type(model).__name__}; give a Realization or a "
            "TransferMatrix",
            where="model",
            found=type(model).__name__,
        )
    document = to_document(model)
    for text in _texts(document):
        longest = max(map(len, text.split("/")))
        if longest > MAX_DIGITS:
            raise _limit("digits", longest, MAX_DIGITS, "target", "keep the model in a pickle")
    written = _layout(document) + "\n"
    _check_size(written, "target")
    if isinstance(target, str | os.PathLike):
        with open(target, "w", encoding="ascii", newline="\n") as stream:
            stream.write(written)
    elif hasattr(target, "write"):
        target.write(written)
    else:
        raise _no_stream("target", target)


def _texts(value: Any) -> Iterator[str]:
    """Every text in the values of a document."""
    if isinstance(value, str):
        yield value
    elif isinstance(value, dict | list):
        for item in value.values() if isinstance(value, dict) else value:
            yield from _texts(item)


def _layout(value: Any, indent: str = "") -> str:
    """JSON with one line for each matrix row and each key."""
    inner = indent + "  "
    if isinstance(value, dict):
        pairs = (f"{json.dumps(key)}: {_layout(item, inner)}" for key, item in value.items())
        return "{\n" + ",\n".join(inner + pair for pair in pairs) + f"\n{indent}}}"
    if isinstance(value, list) and len(value) > 1 and any(isinstance(v, list) for v in value):
        return "[\n" + ",\n".join(inner + _layout(v, inner) for v in value) + f"\n{indent}]"
    return json.dumps(value, ensure_ascii=True, allow_nan=False)


# Reading


def load(source: str | os.PathLike[str] | TextIO) -> Realization | TransferMatrix:
    """Read a model from a file.

    Parameters
    ----------
    source : str, path-like or text stream
        A path, or an open stream of text.

    Returns
    -------
    Realization or TransferMatrix
        Whichever the document holds.

    Raises
    ------
    ModelFileError
        When the text is not JSON, repeats a key, or is not a model document.
    LimitError
        When the document is too long, too deep or too large, or a number has too many digits.
    ShapeError, EntryError, UnsupportedEntryError, ImproperError, ...
        As `Realization` and `TransferMatrix` raise them.
    OSError
        When the file cannot be read.

    Notes
    -----
    Nothing in the file is evaluated. The limits are the constants of this module and of
    `realize.entries`; they are applied before the document is built.
    """
    if isinstance(source, str | os.PathLike):
        name = os.fspath(source)
        with open(source, encoding="utf-8-sig") as stream:
            text = _read(stream, name)
    elif hasattr(source, "read"):
        name = str(getattr(source, "name", "stream"))
        text = _read(source, name)
    else:
        raise _no_stream("source", source)
    return _Reader(name).model(text)


def _read(stream: TextIO, name: str) -> str:
    try:
        text = stream.read(MAX_CHARACTERS + 1)
    except UnicodeDecodeError as error:
        raise ModelFileError(
            f"{name}: not text in UTF-8 ({error.reason} at byte {error.start}); give a model file",
            source=name,
        ) from None
    if not isinstance(text, str):
        raise ModelFileError(
            f"{name}: found a stream of {type(text).__name__}; open it in text mode", source=name
        )
    _check_size(text, name)
    return text


def _check_size(text: str, name: str) -> None:
    """Refuse what would take much memory once parsed, before it is."""
    advice = "give a smaller model"
    if len(text) > MAX_CHARACTERS:
        raise _limit("characters", len(text), MAX_CHARACTERS, name, advice)
    if text.count(",") > MAX_ENTRIES:
        raise _limit("entries", text.count(","), MAX_ENTRIES, name, advice)
    lists = text.count("[") + text.count("{")
    if lists > MAX_LISTS:
        raise _limit("lists", lists, MAX_LISTS, name, advice)
    depth = 0
    for match in _BRACKET_OR_STRING.finditer(text):
        character = match[0][0]
        if character in "[{":
            depth += 1
            if depth > MAX_DEPTH:
                raise _limit("levels of nesting", depth, MAX_DEPTH, name, "give a model file")
        elif character in "]}":
            depth -= 1


def _limit(what: str, found: int, limit: int, name: str, advice: str) -> LimitError:
    return LimitError(
        f"{name}: found {found} {what}, at most {limit} are allowed in a model file; {advice}",
        what=what,
        where=name,
        found=found,
        limit=limit,
    )


def _no_stream(argument: str, value: object) -> UnsupportedEntryError:
    return UnsupportedEntryError(
        f"{argument}: found a value of type {type(value).__name__}; give a path or a text stream",
        where=argument,
        found=type(value).__name__,
    )


class _Reader:
    """From the text of one file, whose name goes into every message, to a model."""

    def __init__(self, name: str) -> None:
        self.name = name

    def fail(self, what: str, where: str | None = None) -> NoReturn:
        place = f"{self.name}, {where}" if where else self.name
        raise ModelFileError(f"{place}: {what}", source=self.name, where=where)

    def model(self, text: str) -> Realization | TransferMatrix:
        document = self.parse(text)
        if not isinstance(document, dict) or document.get("format") != _FORMAT:
            self.fail(
                f'not a model file; wanted a JSON object with "format": "{_FORMAT}"', "format"
            )
        version = document.get("version")
        if not isinstance(version, Fraction) or version != _VERSION:
            found = "none" if version is None else str(version)
            self.fail(f"found version {found[:40]}, wanted {_VERSION}", "version")
        bodies = [key for key in _KEYS if key in document]
        if len(bodies) != 1:
            self.fail(
                f"found {' and '.join(bodies) or 'no model'}; wanted one of {' and '.join(_KEYS)}"
            )
        key = bodies[0]
        self.check_keys(document, _KEYS[key], None)
        counts = {count: self.count(document, count) for count in ("states", "inputs", "outputs")}
        for names in ("state_names", "input_names", "output_names"):
            if document.get(names) is not None and not isinstance(document[names], list):
                self.fail("wanted a list of texts", names)
        if document.get("kind") not in (None, str(Kind.FLOATING)):
            self.fail(f'wanted "{Kind.FLOATING}" or nothing', "kind")
        body = document[key]
        if not isinstance(body, dict):
            self.fail("wanted an object", key)
        read = self.realization if key == "realization" else self.transfer
        model = read(document, body, counts)
        self.check_counts(model, counts)
        # A model without a single entry cannot show by its entries that it is floating.
        return model.to_float() if document.get("kind") else model

    def parse(self, text: str) -> Any:
        """Return the JSON value, exact: integers as Fractions, all other numbers as doubles."""
        try:
            return json.loads(
                text,
                parse_int=self.integer,
                parse_float=self.double,
                parse_constant=self.constant,
                object_pairs_hook=self.object,
            )
        except json.JSONDecodeError as error:
            self.fail(
                f"not JSON ({error.msg}); give a model file, whole",
                f"line {error.lineno}, column {error.colno}",
            )

    def integer(self, digits: str) -> Fraction:
        self.check_digits(digits)
        if digits[0] == "-":
            return make_fraction(-int_from_digits(digits[1:]), 1)
        return make_fraction(int_from_digits(digits), 1)

    def double(self, digits: str) -> float:
        self.check_digits(digits)
        return float(digits)

    def check_digits(self, digits: str) -> None:
        if len(digits) > MAX_DIGITS:
            raise _limit(
                "digits in a number", len(digits), MAX_DIGITS, self.name, "round the number"
            )

    def constant(self, word: str) -> NoReturn:
        self.fail(f"found {word}, which is not JSON and no number; give finite numbers")

    def object(self, pairs: list[tuple[str, Any]]) -> dict[str, Any]:
        result: dict[str, Any] = {}
        for key, value in pairs:
            if key in result:
                self.fail("the key occurs twice; keep one of the two", _quoted(key))
            result[key] = value
        return result

    def check_keys(self, found: dict[str, Any], known: tuple[str, ...], where: str | None) -> None:
        for key in found:
            if key not in known:
                self.fail(f"found the key {_quoted(key)}; known here are {', '.join(known)}", where)

    def count(self, document: dict[str, Any], key: str) -> int | None:
        value = document.get(key)
        if value is None:
            return None
        if not isinstance(value, Fraction) or value.denominator != 1 or value < 0:
            self.fail("wanted an integer that is not negative", key)
        if value > MAX_COUNT:
            raise LimitError(
                f"{self.name}, {key}: at most {MAX_COUNT} are allowed in a model file; give a "
                "smaller model",
                what=key,
                where=self.name,
                limit=MAX_COUNT,
            )
        return int(value)

    def check_counts(
        self, model: Realization | TransferMatrix, counts: dict[str, int | None]
    ) -> None:
        found = {"inputs": model.input_count, "outputs": model.output_count}
        if isinstance(model, Realization):
            found["states"] = model.order
        for key, number in found.items():
            count = counts[key]
            if count not in (None, number):
                raise ShapeError(
                    f"{self.name}, {key}: says {count}, but the matrices have {number}; "
                    "correct one of the two",
                    where=key,
                    found=count,
                    wanted=number,
                )

    def realization(
        self, document: dict[str, Any], body: dict[str, Any], counts: dict[str, int | None]
    ) -> Realization:
        self.check_keys(body, ("A", "B", "C", "D"), "realization")
        n, m, p = counts["states"], counts["inputs"], counts["outputs"]
        # With no D the product of the counts is allocated, however short the file.
        outputs = p if p is not None else _length(body.get("C"))
        inputs = m if m is not None else _row_length(body.get("B"))
        if outputs * inputs > MAX_ENTRIES:
            raise _limit(
                "entries in D", outputs * inputs, MAX_ENTRIES, self.name, "give a smaller model"
            )
        matrices = []
        for letter, rows, columns in (("A", n, n), ("B", n, m), ("C", p, n), ("D", p, m)):
            matrix = body.get(letter)
            if letter not in body and letter != "D":
                self.fail("the matrix is missing", letter)
            if matrix is not None and not isinstance(matrix, list):
                self.fail("wanted a list of rows", letter)
            if matrix == [] and rows is not None and columns is not None and not rows * columns:
                matrix = np.empty((rows, columns), dtype=object)
            matrices.append(matrix)
        return Realization(
            *matrices,
            sampling_period=document.get("sampling_period"),
            state_names=document.get("state_names"),
            input_names=document.get("input_names"),
            output_names=document.get("output_names"),
        )

    def transfer(
        self, document: dict[str, Any], body: dict[str, Any], counts: dict[str, int | None]
    ) -> TransferMatrix:
        self.check_keys(body, ("numerators", "denominators"), "transfer")
        for key in ("numerators", "denominators"):
            if not isinstance(body.get(key), list):
                self.fail("wanted lists of coefficients", key)
        if document.get("improper", False) not in (False, True):
            self.fail("wanted true or false", "improper")
        input_names = document.get("input_names")
        if input_names is None and body["numerators"] == []:
            # Without outputs there is no row to count inputs in; names can tell.
            input_names = default_names("u", counts["inputs"] or 0)
        return TransferMatrix(
            body["numerators"],
            body["denominators"],
            sampling_period=document.get("sampling_period"),
            improper=document.get("improper", False),
            input_names=input_names,
            output_names=document.get("output_names"),
        )


def _length(value: Any) -> int:
    return len(value) if isinstance(value, list) else 0


def _row_length(value: Any) -> int:
    return _length(value[0]) if isinstance(value, list) and value else 0


def _quoted(key: str) -> str:
    return repr(key if len(key) <= 40 else key[:37] + "...")
