"""The exception tree: every error the library raises on purpose, and every warning it gives.

Each class derives from `RealizeError` and from the builtin that a caller would guess. The
message says what was found, where, what was wanted and what to do; the same facts are kept as
attributes, so that a program need not read the text. All classes pickle with their facts.

References
----------
The Python Language Reference, section 8.4 (exceptions), for the builtins that are extended.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

__all__ = [
    "AlgebraicLoopError",
    "AlgebraicLoopWarning",
    "ArithmeticMismatchError",
    "BudgetError",
    "CertificateError",
    "DisagreementError",
    "EntryError",
    "HiddenInstabilityWarning",
    "ImproperError",
    "InexactInputError",
    "LimitError",
    "ModelFileError",
    "NotBuiltError",
    "PrecisionError",
    "RealizeError",
    "RealizeWarning",
    "SamplingPeriodError",
    "ShapeError",
    "ToleranceError",
    "UnknownWordError",
    "UnsupportedEntryError",
    "VerificationError",
    "ZeroDenominatorError",
]


class RealizeError(Exception):
    """Root of everything that the library raises on purpose.

    Attributes
    ----------
    message : str
        The whole text of the error.
    """

    # Pickling calls the class with the message alone and then restores the attributes, so
    # every fact of a subclass must have a default.
    def __init__(self, message: str) -> None:
        super().__init__(message)
        self.message = message


class ShapeError(RealizeError, ValueError):
    """Matrices, rows, names or coefficient lists of sizes that do not fit together.

    Attributes
    ----------
    where : str or None
        The argument, and the row where one is at fault: ``"A, row 2"``.
    found, wanted : tuple of int, int or None
        The shape, or the length, that came and the one that fits.
    """

    def __init__(
        self,
        message: str,
        *,
        where: str | None = None,
        found: tuple[int, ...] | int | None = None,
        wanted: tuple[int, ...] | int | None = None,
    ) -> None:
        super().__init__(message)
        self.where = where
        self.found = found
        self.wanted = wanted


class EntryError(RealizeError, ValueError):
    """A value of a kind that is accepted, but that is no usable number.

    NaN, an infinity, text that spells no number, ``"1/0"``, a number too large for a double,
    a transfer matrix evaluated at one of its poles.

    Attributes
    ----------
    where : str or None
        The place: ``"A, row 1, column 3"``.
    found : str or None
        The value as it came, in text.
    """

    def __init__(self, message: str, *, where: str | None = None, found: str | None = None) -> None:
        super().__init__(message)
        self.where = where
        self.found = found


class UnsupportedEntryError(RealizeError, TypeError):
    """A value of a kind that is not accepted: complex, bool, None, an object, a symbol.

    Attributes
    ----------
    where : str or None
        The place: ``"A, row 1, column 3"``.
    found : str or None
        The name of the type that came.
    """

    def __init__(self, message: str, *, where: str | None = None, found: str | None = None) -> None:
        super().__init__(message)
        self.where = where
        self.found = found


class ImproperError(RealizeError, ValueError):
    """A fraction whose numerator has a higher degree than its denominator.

    Attributes
    ----------
    where : str or None
        The entry of the transfer matrix: ``"output 1, input 2"``.
    numerator_degree, denominator_degree : int or None
        The two degrees.
    """

    def __init__(
        self,
        message: str,
        *,
        where: str | None = None,
        numerator_degree: int | None = None,
        denominator_degree: int | None = None,
    ) -> None:
        super().__init__(message)
        self.where = where
        self.numerator_degree = numerator_degree
        self.denominator_degree = denominator_degree


class ZeroDenominatorError(RealizeError, ValueError):
    """A fraction whose denominator is the zero polynomial.

    Attributes
    ----------
    where : str or None
        The entry of the transfer matrix: ``"output 1, input 2"``.
    """

    def __init__(self, message: str, *, where: str | None = None) -> None:
        super().__init__(message)
        self.where = where


class SamplingPeriodError(RealizeError, ValueError):
    """A sampling period that is not positive and finite, or two that do not agree.

    Attributes
    ----------
    found : str or None
        The period, or the periods, in text.
    """

    def __init__(self, message: str, *, found: str | None = None) -> None:
        super().__init__(message)
        self.found = found


class UnknownWordError(RealizeError, ValueError):
    """A word that the argument does not know: ``side="left"``, ``reading="rounded"``.

    Attributes
    ----------
    argument : str or None
        The name of the argument.
    found : str or None
        The word that came.
    allowed : tuple of str
        The words that the argument knows.
    """

    def __init__(
        self,
        message: str,
        *,
        argument: str | None = None,
        found: str | None = None,
        allowed: Sequence[str] = (),
    ) -> None:
        super().__init__(message)
        self.argument = argument
        self.found = found
        self.allowed = tuple(allowed)


class AlgebraicLoopError(RealizeError, ValueError):
    """Blocks wired so that direct feedthroughs run in a circle without a unique solution.

    Attributes
    ----------
    ports : tuple of str
        The ports around the loop: ``"plant.u1"``, ``"plant.y1"``, ...
    """

    def __init__(self, message: str, *, ports: Sequence[str] = ()) -> None:
        super().__init__(message)
        self.ports = tuple(ports)


class ToleranceError(RealizeError, ValueError):
    """A tolerance or uncertainty that is negative, not finite or not a number.

    Attributes
    ----------
    argument : str or None
        The name of the argument.
    found : str or None
        The value that came, in text.
    """

    def __init__(
        self, message: str, *, argument: str | None = None, found: str | None = None
    ) -> None:
        super().__init__(message)
        self.argument = argument
        self.found = found


class InexactInputError(RealizeError, TypeError):
    """Floats handed to the exact face, which does not guess what they stand for.

    Attributes
    ----------
    where : str or None
        The argument that holds the floats.
    """

    def __init__(self, message: str, *, where: str | None = None) -> None:
        super().__init__(message)
        self.where = where


class ArithmeticMismatchError(RealizeError, TypeError):
    """Things of two arithmetics, or of the wrong one, used together.

    Attributes
    ----------
    kinds : tuple of str
        The kinds that met.
    """

    def __init__(self, message: str, *, kinds: Sequence[str] = ()) -> None:
        super().__init__(message)
        self.kinds = tuple(kinds)


class ModelFileError(RealizeError, ValueError):
    """A document that is not a model file, or that is damaged.

    Attributes
    ----------
    source : str or None
        The name of the file or stream.
    where : str or None
        The place in it: a line and column, or a key.
    """

    def __init__(
        self, message: str, *, source: str | None = None, where: str | None = None
    ) -> None:
        super().__init__(message)
        self.source = source
        self.where = where


class LimitError(RealizeError, ValueError):
    """A documented limit on size, digits, exponents or nesting is exceeded.

    Attributes
    ----------
    what : str or None
        The limited quantity.
    where : str or None
        The place: ``"A, row 1, column 3"``.
    found, limit : int or None
        The amount that came (None when it was not worth counting) and the largest allowed.
    """

    def __init__(
        self,
        message: str,
        *,
        what: str | None = None,
        where: str | None = None,
        found: int | None = None,
        limit: int | None = None,
    ) -> None:
        super().__init__(message)
        self.what = what
        self.where = where
        self.found = found
        self.limit = limit


class PrecisionError(RealizeError, ArithmeticError):
    """The precision that was asked for, or that is needed, could not be reached.

    Attributes
    ----------
    wanted, reached : float or None
        The accuracy wanted and the one reached.
    """

    def __init__(
        self, message: str, *, wanted: float | None = None, reached: float | None = None
    ) -> None:
        super().__init__(message)
        self.wanted = wanted
        self.reached = reached


class VerificationError(RealizeError, ArithmeticError):
    """An exact result failed the identity that must prove it: a fault of the library.

    Attributes
    ----------
    identity : str or None
        The identity that does not hold.
    """

    def __init__(self, message: str, *, identity: str | None = None) -> None:
        super().__init__(message)
        self.identity = identity


class DisagreementError(RealizeError, ArithmeticError):
    """Independent methods gave different answers to one question: a fault of the library.

    Attributes
    ----------
    answers : dict of str to int
        The answer of each method.
    """

    def __init__(self, message: str, *, answers: Mapping[str, int] | None = None) -> None:
        super().__init__(message)
        self.answers = dict(answers or {})


class BudgetError(RealizeError, RuntimeError):
    """A computation was given up because its budget of time was spent.

    Attributes
    ----------
    budget, spent : float or None
        Seconds allowed and seconds used.
    lower, upper : float or None
        The bounds of a distance that were reached, both proved; None where there are none.
    point : complex or None
        Where the upper bound is attained.
    """

    def __init__(
        self,
        message: str,
        *,
        budget: float | None = None,
        spent: float | None = None,
        lower: float | None = None,
        upper: float | None = None,
        point: complex | None = None,
    ) -> None:
        super().__init__(message)
        self.budget = budget
        self.spent = spent
        self.lower = lower
        self.upper = upper
        self.point = point


class CertificateError(RealizeError, ValueError):
    """A certificate that does not prove what it claims, or a result that none can be made of.

    Attributes
    ----------
    reason : str or None
        What fails, as the checker tells it.
    """

    def __init__(self, message: str, *, reason: str | None = None) -> None:
        super().__init__(message)
        self.reason = reason


class NotBuiltError(RealizeError, NotImplementedError):
    """Something that the interface reserves and the library does not do yet.

    Attributes
    ----------
    feature : str or None
        What is missing.
    """

    def __init__(self, message: str, *, feature: str | None = None) -> None:
        super().__init__(message)
        self.feature = feature


class RealizeWarning(UserWarning):
    """Root of the warnings that the library gives."""


class AlgebraicLoopWarning(RealizeWarning):
    """A connection has an algebraic loop that is nearly ill-posed."""


class HiddenInstabilityWarning(RealizeWarning):
    """A reduction removed a hidden mode that is not stable."""
