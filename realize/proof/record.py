"""The records of this room: a certificate, and the comparison of two models."""

from __future__ import annotations

import json
import re
from dataclasses import dataclass
from enum import StrEnum
from fractions import Fraction
from typing import Any

import numpy as np

from realize import checker
from realize.entries import spell_fraction
from realize.errors import CertificateError, LimitError
from realize.model.realization import Realization
from realize.model.transfer import TransferMatrix
from realize.results import Reduction, RemovedModes

__all__ = ["Certificate", "Comparison", "Counterexample", "Difference", "Side", "check"]

Array = np.ndarray[Any, Any]


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Certificate:
    """A proof of a statement about exact models, which anyone can check without this package.

    Attributes
    ----------
    kind : str
        What kind of statement, such as ``"minimal realization"``.
    digest : str
        SHA-256 of claim and evidence, in hexadecimal: the same on every machine.
    """

    kind: str
    digest: str
    _text: str

    def to_json(self) -> str:
        """Return the certificate as one line of JSON, for a file, for `check` or the checker."""
        return self._text

    @property
    def claim(self) -> str:
        """The claim in words, as the checker tells it: each access runs the checker."""
        return check(self)

    def __eq__(self, other: object) -> bool:
        if not isinstance(other, Certificate):
            return NotImplemented
        return self.digest == other.digest

    def __hash__(self) -> int:
        return hash(self.digest)

    def __repr__(self) -> str:
        return f"<Certificate: {self.kind}, {self.digest[:12]}>"

    @classmethod
    def _of(
        cls, claim: dict[str, Any], evidence: dict[str, Any], about: dict[str, str]
    ) -> Certificate:
        """Seal a claim and its evidence."""
        body, digest = checker.sealed(claim, evidence)
        text = (
            f'{{"format":"{checker.FORMAT}","version":{checker.VERSION},{body[1:-1]},'
            f'"digest":"{digest}","about":{json.dumps(about, separators=(",", ":"))}}}\n'
        )
        _check_limits(text)
        return cls(kind=claim["kind"], digest=digest, _text=text)


def _check_limits(text: str) -> None:
    """Refuse to hand out what the checker would refuse to read."""
    parts = text.split(",")
    longest = max(map(len, parts))
    if longest > checker.MAX_DIGITS:
        longest = max(map(len, re.findall("[0-9]+", text)))
    for what, found, limit in (
        ("characters", len(text), checker.MAX_BYTES),
        ("items", len(parts) + text.count("[") + text.count("{"), checker.MAX_ITEMS),
        ("digits in a number", longest, checker.MAX_DIGITS),
    ):
        if found > limit:
            raise LimitError(
                f"the certificate would hold {found} {what}, and the checker reads at most {limit};"
                " certify a smaller model, or one with shorter numbers",
                what=what,
                where="certificate",
                found=found,
                limit=limit,
            )


def check(certificate: Certificate | str) -> str:
    """Check a certificate and return its claim in words.

    Parameters
    ----------
    certificate : Certificate or str
        What `certify` returned, or the JSON text of a certificate from anywhere.

    Returns
    -------
    str
        What is proved, in words; it ends with the digest of the certificate.

    Raises
    ------
    CertificateError
        When the claim is not proved, or the text is no certificate; it says what fails.

    Notes
    -----
    Runs the code of `realize.checker`, which uses the standard library alone and can be run as a
    file without this package. The mathematics stands in its docstring. A certificate from someone
    else is about the tables that it holds; compare `Realization.provenance` with the digest of the
    table that it names.

    References
    ----------
    Kalman (1963), Mathematical description of linear dynamical systems, SIAM J. Control 1.

    Examples
    --------
    >>> import realize
    >>> model = realize.Realization([[-1, 0], [0, -2]], [1, 0], [1, 1])
    >>> certificate = realize.certify(realize.minimal(model))
    >>> print(realize.check(certificate).splitlines()[0])
    Proved: these two exact models have the same transfer matrix, and no realization of
    smaller order has it.
    """
    text = certificate.to_json() if isinstance(certificate, Certificate) else certificate
    if not isinstance(text, str):
        raise CertificateError(
            f"found a value of type {type(text).__name__}; give a Certificate or its JSON text"
        )
    try:
        return checker.check(text)
    except checker.Refused as error:
        raise CertificateError(
            f"the certificate does not hold: {error}. Do not rely on what it claims",
            reason=str(error),
        ) from None


class Difference(StrEnum):
    """In what two models differ."""

    TRANSFER_MATRIX = "transfer matrix"
    SAMPLING_PERIOD = "sampling period"
    SIZES = "sizes"


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Counterexample:
    """A point where two transfer matrices differ, and which is a pole of neither model.

    Attributes
    ----------
    point : Fraction
        A value of s, or of z.
    first, second : array (outputs, inputs) of Fraction
        The two values there.
    """

    point: Fraction
    first: Array
    second: Array

    def __repr__(self) -> str:
        i, j = np.argwhere(self.first != self.second)[0].tolist()
        left, right = _short(self.first[i, j]), _short(self.second[i, j])
        at = spell_fraction(self.point)
        return f"<Counterexample: at {at} output {i + 1}, input {j + 1} is {left} and {right}>"


def _short(value: Fraction) -> str:
    text = spell_fraction(value)
    return text if len(text) <= 40 else f"about {float(value):.6g}"


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Side:
    """One side of a comparison: the exact source, its realization, and the reduction of that."""

    source: Realization | TransferMatrix
    model: Realization
    reduction: Reduction


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Comparison:
    """Whether two models have the same transfer matrix, exactly; true when they do.

    Attributes
    ----------
    difference : Difference or None
        None when they have. "sampling period" and "sizes" are differences of their own: nothing
        is then said about values.
    transformation : array (n, n) of Fraction, or None
        When both are minimal and have the same transfer matrix: T with state of the first = T @
        state of the second, so that A2 = T^-1 A1 T. It is unique.
    counterexample : Counterexample or None
        When the transfer matrices differ: a rational point, and the two values there.
    orders : tuple of int
        The minimal orders of the first and of the second.
    reading : str
        The reading of floats.
    """

    difference: Difference | None
    transformation: Array | None
    counterexample: Counterexample | None
    orders: tuple[int, int]
    reading: str
    _sides: tuple[Side, Side]
    # Between the two reductions: state of the first = between @ state of the second.
    _between: Array | None
    # At the counterexample: (z - A)^-1 B of either side.
    _solutions: tuple[Array, Array] | None

    def __bool__(self) -> bool:
        return self.difference is None

    @property
    def first_hides(self) -> RemovedModes:
        """What the first model hides from its transfer matrix."""
        return self._sides[0].reduction.removed

    @property
    def second_hides(self) -> RemovedModes:
        """What the second model hides from its transfer matrix."""
        return self._sides[1].reduction.removed

    def __repr__(self) -> str:
        if self:
            return f"<Comparison: the same transfer matrix, order {self.orders[0]}>"
        if self.counterexample is not None:
            return f"<Comparison: different; {repr(self.counterexample)[1:-1]}>"
        return f"<Comparison: different in {self.difference}>"
