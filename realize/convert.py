"""Models from what people hold: tuples, arrays, and the systems of other libraries.

Nothing is imported to recognise a foreign object; its attributes tell what it is.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from typing import Any

import numpy as np

from realize.entries import parse_entry, round_fraction
from realize.errors import EntryError, SamplingPeriodError, ShapeError, UnsupportedEntryError
from realize.model.realization import Realization
from realize.model.transfer import TransferMatrix

__all__ = ["PAIRING", "as_realization", "as_transfer_matrix"]

PAIRING = 2.0**-26
"""How far, relative to its size, a complex root may lie from real, or from its partner.

Programs that compute roots leave rounding noise on them. At the square root of the unit roundoff
the noise of a pair changes its product by no more than a rounding error.
"""

_ACCEPTED = (
    "give a Realization, a TransferMatrix, a tuple (A, B, C, D), a tuple (numerator, denominator), "
    "an array for a static gain, an object with the attributes A, B, C, D, or num, den, or zeros, "
    "poles, gain, or one with a method __realization__()"
)


def as_realization(thing: Any) -> Realization:
    """Return the state-space model that a thing is, or stands for.

    Parameters
    ----------
    thing : Realization, TransferMatrix, tuple, array_like or object
        A tuple (A, B, C, D), or (numerator, denominator) as `TransferMatrix` takes them; a
        two-dimensional array, a list of rows or a matrix of sympy, which is a static gain; an
        object with a method ``__realization__()``; an object such as those of scipy.signal,
        with the attributes A, B, C, D, or num, den, or zeros, poles, gain, and ``dt``, which is
        None in continuous time.

    Returns
    -------
    Realization
        A transfer matrix is realized as given, common factors included, in companion form
        column by column or row by row.

    Raises
    ------
    UnsupportedEntryError
        When the thing is of no kind that is known.
    SamplingPeriodError
        When an object is in discrete time but names no sampling period.
    EntryError
        When complex zeros or poles do not come in conjugate pairs.
    ShapeError, ImproperError, ...
        As `Realization` and `TransferMatrix` raise them.

    Notes
    -----
    Zeros, poles and gain are multiplied out in rational arithmetic from the doubles given and
    rounded once, so the coefficients are those of the roots given, correctly rounded.

    References
    ----------
    Kailath (1980), Linear Systems, sections 2.1 and 6.1.

    Examples
    --------
    >>> as_realization(([1], [1, 3, 2]))
    <Realization: 2 states, 1 input, 1 output, continuous time, rational>
    >>> as_realization(([[0.5]], [[1.0]], [[1.0]], [[0.0]]))
    <Realization: 1 state, 1 input, 1 output, continuous time, floating>
    """
    model = _model(thing)
    if isinstance(model, Realization):
        return model
    # The one place where this module reaches into the forms, at first use.
    from realize import dispatch, forms

    return forms.realize_transfer(dispatch.path_for(model), model)


def as_transfer_matrix(thing: Any) -> TransferMatrix:
    """Return the transfer matrix that a thing is, or has.

    Parameters
    ----------
    thing : Realization, TransferMatrix, tuple, array_like or object
        Whatever `as_realization` takes.

    Returns
    -------
    TransferMatrix
        Of a state-space model, with its characteristic polynomial as every denominator; nothing
        is cancelled.

    Raises
    ------
    UnsupportedEntryError, SamplingPeriodError, EntryError, ShapeError, ImproperError, ...
        As `as_realization`.

    References
    ----------
    Kailath (1980), Linear Systems, section 6.1.

    Examples
    --------
    >>> as_transfer_matrix(([-1], [1], [1], [0])).denominators
    (((Fraction(1, 1), Fraction(1, 1)),),)
    """
    model = _model(thing)
    if isinstance(model, TransferMatrix):
        return model
    from realize import dispatch

    return dispatch.transfer_matrix(model)


def _model(thing: Any) -> Realization | TransferMatrix:
    """Return the model in whichever form the thing holds it."""
    if isinstance(thing, Realization | TransferMatrix):
        return thing
    method = getattr(type(thing), "__realization__", None)
    if method is not None:
        model = method(thing)
        if not isinstance(model, Realization):
            raise UnsupportedEntryError(
                f"{type(thing).__name__}.__realization__() returned a value of type "
                f"{type(model).__name__}, wanted a Realization",
                where="__realization__",
                found=type(model).__name__,
            )
        return model
    if isinstance(thing, tuple):
        return _from_tuple(thing)
    if isinstance(thing, str):
        raise UnsupportedEntryError(
            "found a text; to read a model file use realize.load", found="str"
        )
    if isinstance(thing, list) or hasattr(thing, "__array__"):
        return Realization([], [], [], thing)
    if _has(thing, "A", "B", "C", "D"):
        return Realization(thing.A, thing.B, thing.C, thing.D, sampling_period=_period(thing))
    if _has(thing, "num", "den"):
        return TransferMatrix(_numerators(thing.num), thing.den, sampling_period=_period(thing))
    if _has(thing, "zeros", "poles", "gain"):
        return _from_roots(thing.zeros, thing.poles, thing.gain, _period(thing))
    raise UnsupportedEntryError(
        f"found a value of type {type(thing).__name__}; {_ACCEPTED}", found=type(thing).__name__
    )


def _has(thing: Any, *names: str) -> bool:
    return all(hasattr(thing, name) for name in names)


def _from_tuple(thing: tuple[Any, ...]) -> Realization | TransferMatrix:
    if len(thing) == 4:
        return Realization(*thing)
    if len(thing) == 2:
        return TransferMatrix(*thing)
    raise ShapeError(
        f"found a tuple of {len(thing)}; give (A, B, C, D) or (numerator, denominator), and a "
        "sampling period by way of Realization or TransferMatrix",
        found=len(thing),
    )


def _numerators(num: Any) -> Any:
    """Numerators nested by output and input; rows of coefficients are outputs of one input."""
    if np.ndim(num) == 2:
        return [[row] for row in num]
    return num


def _period(thing: Any) -> Any:
    """Return the sampling period of an object, None in continuous time."""
    period = getattr(thing, "dt", None)
    if period is True:
        raise SamplingPeriodError(
            f"{type(thing).__name__}.dt is True: discrete time without a sampling period; "
            "give the object its period, 1 if it has no unit",
            found="True",
        )
    return period


# Zeros, poles and gain


def _from_roots(zeros: Any, poles: Any, gain: Any, period: Any) -> TransferMatrix:
    """Multiply out exactly; round once if any number given is a float."""
    factor = parse_entry(gain[()] if isinstance(gain, np.ndarray) else gain, "gain")
    above, zeros_exact = _product(zeros, "zeros")
    below, poles_exact = _product(poles, "poles")
    numerator: Sequence[Any] = [Fraction(factor) * coefficient for coefficient in above]
    denominator: Sequence[Any] = below
    if not (zeros_exact and poles_exact and isinstance(factor, Fraction)):
        numerator = [round_fraction(number, "numerator") for number in numerator]
        denominator = [round_fraction(number, "denominator") for number in denominator]
    return TransferMatrix(numerator, denominator, sampling_period=period)


def _product(roots: Any, where: str) -> tuple[list[Fraction], bool]:
    """Return (the monic polynomial with these roots, whether all of them are rational)."""
    if np.ndim(roots) != 1:
        raise ShapeError(
            f"{where}: found an array of {np.ndim(roots)} dimensions, wanted a list of roots",
            where=where,
            found=np.shape(roots),
        )
    factors: list[tuple[Fraction, ...]] = []
    exact = True
    pending: list[complex] = []
    for index, root in enumerate(roots):
        place = f"{where}, item {index + 1}"
        if isinstance(root, complex | np.complexfloating):
            exact = False
            parse_entry(float(root.real), place)  # for the error when a part is not finite
            parse_entry(float(root.imag), place)
            pending.append(complex(root))
        else:
            entry = parse_entry(root, place)
            exact = exact and isinstance(entry, Fraction)
            factors.append((Fraction(1), -Fraction(entry)))
    factors += _paired(pending, where)
    polynomial = [Fraction(1)]
    for each in factors:
        polynomial = _multiply(polynomial, each)
    return polynomial, exact


def _paired(pending: list[complex], where: str) -> list[tuple[Fraction, ...]]:
    """Return real factors of roots given as complex numbers, each with its conjugate."""
    factors: list[tuple[Fraction, ...]] = []
    while pending:
        root = pending.pop()
        mirror = root.conjugate()
        allowed = PAIRING * abs(root)
        partner = min(pending, key=lambda other: abs(other - mirror), default=None)
        if root.imag and partner is not None and abs(partner - mirror) <= allowed:
            pending.remove(partner)
            factors.append(_quadratic(root, partner))
        elif abs(root.imag) <= allowed:
            factors.append((Fraction(1), -Fraction(root.real)))
        else:
            raise EntryError(
                f"{where}: {root!r} comes without its conjugate, so the coefficients would not "
                "be real; give both",
                where=where,
                found=repr(root),
            )
    return factors


def _quadratic(first: complex, second: complex) -> tuple[Fraction, ...]:
    """Return the real part of (s - first) (s - second), exactly."""
    a, b = Fraction(first.real), Fraction(first.imag)
    c, d = Fraction(second.real), Fraction(second.imag)
    return Fraction(1), -(a + c), a * c - b * d


def _multiply(first: list[Fraction], second: Sequence[Fraction]) -> list[Fraction]:
    product = [Fraction(0)] * (len(first) + len(second) - 1)
    for i, left in enumerate(first):
        for j, right in enumerate(second):
            product[i + j] += left * right
    return product
