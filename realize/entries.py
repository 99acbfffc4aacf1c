"""Numbers as they enter and leave: what an entry may be, and which number it stands for.

An entry is a float (a double) or an exact rational; a model may also hold irrational constants,
which are real numbers of sympy such as sqrt(2), without symbols. `parse_entry` turns whatever a
caller gives into one of them or refuses it by name; `read_float` says which rational a double
stands for under each reading; `round_fraction` and `round_constant` go to a double with one correct
rounding, and `constant_near` gives any number of digits of a constant.

The grammar of number strings is our own and strict (ASCII, no spaces, no underscores)::

    number   = [sign] (decimal | fraction)
    decimal  = (digits ["." [digits]] | "." digits) [("e" | "E") [sign] digits]
    fraction = digits "/" digits

References
----------
IEEE 754-2019, section 4.3.1 (round to nearest, ties to even).
Graham, Knuth, Patashnik, Concrete Mathematics, section 4.5 (the simplest fraction of an interval).
"""

from __future__ import annotations

import math
import numbers
import re
import sys
from collections.abc import Iterable
from decimal import Decimal
from enum import StrEnum
from fractions import Fraction
from typing import Any, Final, Literal, TypeAlias, TypeVar, overload

import numpy as np
from numpy.typing import NDArray

from realize.errors import EntryError, LimitError, UnknownWordError, UnsupportedEntryError

__all__ = [
    "EXACT_READINGS",
    "MAX_DIGITS",
    "MAX_EXPONENT",
    "SIMPLE_BITS",
    "Constant",
    "Entry",
    "Kind",
    "Place",
    "Reading",
    "constant_near",
    "decided",
    "description_bits",
    "fraction_array",
    "int_from_digits",
    "int_to_digits",
    "is_constant",
    "is_simple",
    "known_word",
    "make_fraction",
    "parse_entry",
    "parse_number",
    "place_text",
    "read_float",
    "round_constant",
    "round_entry",
    "round_fraction",
    "spell_fraction",
]

Entry: TypeAlias = float | Fraction
"""A number inside a model: a double, or an exact rational."""

Constant: TypeAlias = Any
"""An irrational constant: a real number of sympy, without symbols and without floats."""

Place: TypeAlias = str | tuple[str, int, int]
"""Where an entry stands: a text, or (matrix, row, column) counted from zero."""


class Kind(StrEnum):
    """The arithmetic that the entries of a model call for.

    ``floating``: there is a float among them. ``rational``: all are rational. ``parametric``: no
    float, but an irrational constant; every entry is then an expression of sympy.
    """

    FLOATING = "floating"
    RATIONAL = "rational"
    PARAMETRIC = "parametric"


class Reading(StrEnum):
    """Which exact number a double stands for.

    ``stored``: the dyadic rational that the double is. ``written``: its shortest decimal that
    reads back as the same double. ``intended``: the simplest fraction among the reals that round
    to it. ``given``: nothing to read, since every entry is rational.
    """

    STORED = "stored"
    WRITTEN = "written"
    INTENDED = "intended"
    GIVEN = "given"


EXACT_READINGS: tuple[Reading, ...] = (Reading.STORED, Reading.WRITTEN, Reading.INTENDED)
"""The readings that a model with floats has, in the order in which they are shown."""

MAX_DIGITS = 20_000
"""Most decimal digits in one number that is given as text (numerator and denominator each)."""

MAX_EXPONENT = 1_000
"""Largest decimal exponent, up or down, of a number given as text or as a Decimal.

Three times the range of doubles; ``"1e1000"`` costs 400 bytes, ``"1e999999999"`` is refused
before it is expanded.
"""

SIMPLE_BITS = 40
"""A fraction is called simple when it can be described in at most this many bits.

The simplest fraction that rounds to a random double takes about 53 bits, since it must tell that
double from its neighbours. In draws of random doubles fewer than one in a thousand came out
at 40 bits or less, while decimals of up to ten digits and ratios of six-digit integers all do.
"""

_DOUBT_DIGITS: Final = 40
"""Digits to which a constant is computed first: enough for a double, and to know it from zero."""

_MOST_DOUBT_DIGITS: Final = 640
"""Digits after which the middle between two doubles is no accident."""

_LOST_DIGITS: Final = 60
"""Digits that may cancel in a constant before it counts as one that may be zero."""

_SMALLEST_EXPONENT = -1074  # of the last place of a subnormal double
_HIDDEN_BIT = 1 << 52
# int(text) and str(int) refuse more digits than the interpreter's own setting, which can be
# lowered to this number but not below; decimal has no such limit.
_PLAIN_DIGITS = 640
_PLAIN_BITS = 2_000

_ZERO = Fraction(0)

_DECIMAL = re.compile(
    r"(?P<sign>[+-]?)(?:(?P<whole>[0-9]+)(?:\.(?P<part>[0-9]*))?|\.(?P<bare>[0-9]+))"
    r"(?:[eE](?P<exponent>[+-]?[0-9]+))?"
)
_FRACTION = re.compile(r"(?P<sign>[+-]?)(?P<numerator>[0-9]+)/(?P<denominator>[0-9]+)")

_Word = TypeVar("_Word", bound=StrEnum)


def known_word(words: type[_Word], word: str, argument: str) -> _Word:
    """Return the member of an enumeration that a caller named.

    Parameters
    ----------
    words : type of StrEnum
        The enumeration.
    word : str
        What the caller gave.
    argument : str
        The name of the argument, for the message.

    Raises
    ------
    UnknownWordError
        When the enumeration has no such word.
    """
    try:
        return words(word)
    except ValueError:
        allowed = tuple(str(member) for member in words)
        raise UnknownWordError(
            f"{argument}={word!r} is not a word that is known here; "
            f"use one of {', '.join(map(repr, allowed))}",
            argument=argument,
            found=str(word),
            allowed=allowed,
        ) from None


def place_text(where: Place) -> str:
    """Return a place in words, rows and columns counted from one."""
    if isinstance(where, str):
        return where
    matrix, row, column = where
    return f"{matrix}, row {row + 1}, column {column + 1}"


def make_fraction(numerator: int, denominator: int) -> Fraction:
    """Return a Fraction from integers that are already coprime, denominator positive.

    Skips the greatest common divisor of the public constructor, which would cost more than the
    work around it. The two slots are the same in Python 3.11 to 3.14; a test holds that.
    """
    fraction = object.__new__(Fraction)
    fraction._numerator = numerator  # type: ignore[attr-defined]
    fraction._denominator = denominator  # type: ignore[attr-defined]
    return fraction


def fraction_array(entries: Iterable[Fraction], shape: tuple[int, ...]) -> NDArray[np.object_]:
    """Return an object array of the given shape from its entries, row by row."""
    flat = np.fromiter(entries, dtype=object, count=math.prod(shape))
    return flat.reshape(shape)


def round_fraction(number: Fraction, where: Place = "number") -> float:
    """Return the double nearest to a rational, ties to even.

    Raises
    ------
    EntryError
        When the number is too large for a double.
    """
    try:
        # True division of Python integers is correctly rounded, subnormal results included.
        return number.numerator / number.denominator
    except OverflowError:
        place = place_text(where)
        raise EntryError(
            f"{place}: a number of about 2^"
            f"{number.numerator.bit_length() - number.denominator.bit_length()} "
            "is too large for a double; scale the model, or keep it on the exact path",
            where=place,
        ) from None


def round_entry(entry: Entry | Constant, where: Place = "number") -> float:
    """Return the double nearest to an entry of any kind.

    Raises
    ------
    EntryError
        When the number is too large for a double.
    """
    if isinstance(entry, float):
        return entry
    if isinstance(entry, Fraction):
        return round_fraction(entry, where)
    if isinstance(entry, numbers.Rational):
        return round_fraction(Fraction(int(entry.numerator), int(entry.denominator)), where)
    return round_constant(entry, where)


# Irrational constants


def is_constant(entry: Entry | Constant) -> bool:
    """Whether an entry is neither a float nor rational."""
    return not isinstance(entry, (float, Fraction, numbers.Rational))


def constant_near(value: Constant, digits: int, where: Place = "number") -> Fraction:
    """Return a rational that agrees with an irrational constant to so many digits.

    Raises
    ------
    EntryError
        When the digits cancel, so that the value cannot be told from zero.
    LimitError
        When it lies beyond 10 to the power `MAX_EXPONENT`, up or down.

    Notes
    -----
    The digits are those that sympy computes with error estimates that grow the precision as
    digits cancel; nothing is simplified, and nothing is proved.
    """
    import sympy
    from sympy.core.evalf import PrecisionExhausted

    try:
        number = value.evalf(digits, maxn=digits + _LOST_DIGITS, strict=True)
    except PrecisionExhausted:
        place = place_text(where)
        raise EntryError(
            f"{place}: {_shortened(str(value))} cannot be told from zero with "
            f"{digits + _LOST_DIGITS} digits; simplify it, or write 0 if it is zero",
            where=place,
            found=str(value),
        ) from None
    if not isinstance(number, sympy.Float):
        raise _unsupported(value, f"{_shortened(str(value))} has no decimals", where)
    if not sympy.Integer(10) ** -MAX_EXPONENT < abs(number) < sympy.Integer(10) ** MAX_EXPONENT:
        raise _too_large_exponent(where)
    exact = sympy.Rational(number)
    return make_fraction(int(exact.p), int(exact.q))


def decided(value: Constant, where: Place = "number") -> Constant:
    """Return an expression that arithmetic made of constants, zero only if it is written so.

    An expression is not zero when its decimals say so. What they do not tell from zero is expanded,
    which multiplies out and simplifies nothing: (1 + sqrt(2))**2 - 2*sqrt(2) - 3 becomes zero so,
    cos(1)**2 + sin(1)**2 - 1 does not.

    Raises
    ------
    EntryError
        When neither tells the value from zero: whether it is zero is then not decidable here.
    """
    if isinstance(value, numbers.Rational):
        return value
    try:
        constant_near(value, _DOUBT_DIGITS, where)
    except EntryError:
        value = value.expand()
        if not isinstance(value, numbers.Rational):
            constant_near(value, _DOUBT_DIGITS, where)
    return value


def round_constant(value: Constant, where: Place = "number") -> float:
    """Return the double nearest to an irrational constant.

    Raises
    ------
    EntryError
        When it is too large for a double, or cannot be told from the middle between two doubles.
    """
    digits = _DOUBT_DIGITS
    while digits <= _MOST_DOUBT_DIGITS:
        near = constant_near(value, digits, where)
        # Both sides of what is not known must round alike.
        slack = abs(near) / 10 ** (digits - 1)
        low, high = round_fraction(near - slack, where), round_fraction(near + slack, where)
        if low == high:
            return low
        digits *= 2
    place = place_text(where)
    raise EntryError(
        f"{place}: {_shortened(str(value))} lies so near the middle between two doubles that "
        f"{_MOST_DOUBT_DIGITS} digits do not part them; simplify it, or give the double meant",
        where=place,
        found=str(value),
    )


# Readings of a double


def read_float(value: float, reading: Reading | str) -> Fraction:
    """Return the exact number that a finite double stands for.

    Parameters
    ----------
    value : float
        A finite double.
    reading : {"stored", "written", "intended"}
        See `Reading`.

    Returns
    -------
    Fraction
        Always a number that rounds to `value`.

    Raises
    ------
    EntryError
        When the double is NaN or infinite.
    UnknownWordError
        For any other word; ``"given"`` is no reading of a double.
    """
    try:
        if reading == "stored":
            return make_fraction(*value.as_integer_ratio())
        if reading == "written":
            return make_fraction(*Decimal(float.__repr__(value)).as_integer_ratio())
        if reading == "intended":
            return _intended(value)
    except (OverflowError, ValueError):
        raise EntryError(
            f"{value!r} stands for no number; give finite numbers", found=repr(value)
        ) from None
    allowed = tuple(str(word) for word in EXACT_READINGS)
    raise UnknownWordError(
        f"reading={str(reading)!r} says nothing about a float; "
        f"use one of {', '.join(map(repr, allowed))}",
        argument="reading",
        found=str(reading),
        allowed=allowed,
    )


def _intended(value: float) -> Fraction:
    """Return the simplest fraction that rounds to the double, or its decimal if that is shorter.

    Without the second clause 1e16 would be read as 9999999999999999, and 1e-17 as the
    reciprocal of some 17-digit integer.
    """
    if value == 0.0:
        return _ZERO
    if value.is_integer() and -1e15 < value < 1e15:
        return make_fraction(int(value), 1)  # the only integer that rounds to it
    simplest = _simplest(*_rounding_interval(abs(value)))
    if value < 0:
        simplest = -simplest
    written = make_fraction(*Decimal(float.__repr__(value)).as_integer_ratio())
    if written != simplest and description_bits(written) < description_bits(simplest):
        return written
    return simplest


def _rounding_interval(value: float) -> tuple[int, int, int, bool]:
    """(low, high, denominator, closed): the reals that round to a positive double.

    The ends low/denominator and high/denominator are halfway to the neighbours; they belong to
    the interval when the significand is even (ties to even).
    """
    fraction, exponent = math.frexp(value)
    last_place = max(exponent - 53, _SMALLEST_EXPONENT)
    significand = int(math.ldexp(fraction, exponent - last_place))
    # Everything in quarters of the last place: below a power of two the spacing is half as
    # wide, except at the smallest normal double.
    below = 1 if significand == _HIDDEN_BIT and last_place > _SMALLEST_EXPONENT else 2
    low = 4 * significand - below
    high = 4 * significand + 2
    power = last_place - 2
    closed = significand % 2 == 0
    if power >= 0:
        return low << power, high << power, 1, closed
    return low, high, 1 << -power, closed


def _simplest(low: int, high: int, denominator: int, closed: bool) -> Fraction:
    """Return the fraction of smallest denominator, then numerator, between two positive ones.

    The continued fractions of the two ends agree up to some partial quotient; the simplest
    number between them continues there with the smallest integer that fits.
    """
    # Ends as n1/d1 < n2/d2; (p, q) and (p0, q0) are the last two convergents.
    n1, d1, n2, d2 = low, denominator, high, denominator
    p0, q0, p, q = 0, 1, 1, 0
    while True:
        quotient, rest1 = divmod(n1, d1)
        # The smallest integer at or above the lower end.
        candidate = quotient if rest1 == 0 and closed else quotient + 1
        below_upper = candidate * d2 - n2
        if below_upper < 0 or (below_upper == 0 and closed):
            return make_fraction(candidate * p + p0, candidate * q + q0)
        # No integer between the ends, so both have the same whole part: take it off and invert,
        # which swaps the ends. An open lower end at an integer becomes an upper end at infinity,
        # kept as the ratio with denominator zero.
        p0, q0, p, q = p, q, quotient * p + p0, quotient * q + q0
        n1, d1, n2, d2 = d2, n2 - quotient * d2, d1, rest1


def description_bits(number: Fraction) -> int:
    """How many bits it takes to spell a rational, as a fraction or as a decimal.

    The lesser of the bits of numerator and denominator and, for a terminating decimal
    c * 10^k, the bits of c and of k.
    """
    numerator, denominator = abs(number.numerator), number.denominator
    bits = numerator.bit_length() + denominator.bit_length()
    if numerator == 0:
        return bits
    twos = (denominator & -denominator).bit_length() - 1
    fives, rest = _count_fives(denominator >> twos)
    if rest == 1:
        power = -max(twos, fives)
        digits = numerator * 2 ** max(fives - twos, 0) * 5 ** max(twos - fives, 0)
        if power == 0:
            fives, _ = _count_fives(digits)
            power = min(fives, (digits & -digits).bit_length() - 1)
            digits //= 10**power
        bits = min(bits, digits.bit_length() + abs(power).bit_length())
    return bits


def _count_fives(number: int) -> tuple[int, int]:
    """(count, rest) with number = 5^count * rest, rest not divisible by five."""
    count = 0
    while number % 5 == 0:
        number //= 5
        count += 1
    return count, number


def is_simple(number: Fraction) -> bool:
    """Whether an intended fraction is simple at all, or only the least bad one.

    True when it can be described in at most `SIMPLE_BITS` bits.
    """
    return description_bits(number) <= SIMPLE_BITS


# Text


def int_from_digits(digits: str) -> int:
    """Return the integer that a run of ASCII digits spells, of any length."""
    return int(digits) if len(digits) <= _PLAIN_DIGITS else int(Decimal(digits))


def int_to_digits(number: int) -> str:
    """Return an integer of any size in decimal digits."""
    return str(number) if number.bit_length() <= _PLAIN_BITS else str(Decimal(number))


def spell_fraction(number: Fraction) -> str:
    """Return a rational as text that `parse_number` reads back: ``"3"`` or ``"-1/3"``."""
    numerator = int_to_digits(number.numerator)
    if number.denominator == 1:
        return numerator
    return f"{numerator}/{int_to_digits(number.denominator)}"


def parse_number(text: str, where: Place = "number") -> Fraction:
    """Return the rational that a string spells, by the grammar at the head of this module.

    Parameters
    ----------
    text : str
        For example ``"1/3"``, ``"-0.125"``, ``"1e-3"``.
    where : str or (str, int, int)
        The place, for messages.

    Raises
    ------
    EntryError
        When the text is not a number, or divides by zero.
    LimitError
        When it has more than `MAX_DIGITS` digits or an exponent beyond `MAX_EXPONENT`.
    """
    if len(text) > 2 * MAX_DIGITS + 16:
        raise _too_many_digits(len(text), where)
    match = _DECIMAL.fullmatch(text)
    if match is not None:
        return _decimal(match, where)
    match = _FRACTION.fullmatch(text)
    if match is None:
        place = place_text(where)
        raise EntryError(
            f"{place}: {_shortened(text)} is not a number; "
            'write an integer, a decimal such as "-0.125" or "1e-3", or a fraction such as "1/3"',
            where=place,
            found=text,
        )
    longest = max(len(match["numerator"]), len(match["denominator"]))
    if longest > MAX_DIGITS:
        raise _too_many_digits(longest, where)
    numerator = int_from_digits(match["numerator"])
    denominator = int_from_digits(match["denominator"])
    if denominator == 0:
        place = place_text(where)
        raise EntryError(
            f"{place}: {_shortened(text)} divides by zero; give a fraction with a denominator "
            "that is not zero",
            where=place,
            found=text,
        )
    return Fraction(-numerator if match["sign"] == "-" else numerator, denominator)


def _decimal(match: re.Match[str], where: Place) -> Fraction:
    """Return the value of a decimal that the grammar has matched."""
    part = match["part"] or match["bare"] or ""
    digits = (match["whole"] or "") + part
    if len(digits) > MAX_DIGITS:
        raise _too_many_digits(len(digits), where)
    exponent_digits = match["exponent"] or "0"
    # Length first: an exponent of a million digits is not converted to be refused.
    if len(exponent_digits.lstrip("+-0")) > 9 or abs(int(exponent_digits)) > MAX_EXPONENT:
        raise _too_large_exponent(where)
    number = int_from_digits(digits)
    if match["sign"] == "-":
        number = -number
    power = int(exponent_digits) - len(part)
    if power >= 0:
        return make_fraction(number * 10**power, 1)
    return Fraction(number, 10**-power)


def _too_many_digits(count: int, where: Place) -> LimitError:
    place = place_text(where)
    return LimitError(
        f"{place}: a number of {count} characters; at most {MAX_DIGITS} digits are read",
        what="digits",
        where=place,
        found=count,
        limit=MAX_DIGITS,
    )


def _too_large_exponent(where: Place) -> LimitError:
    place = place_text(where)
    return LimitError(
        f"{place}: the decimal exponent is beyond {MAX_EXPONENT}, the largest that is read; "
        "scale the model",
        what="exponent",
        where=place,
        limit=MAX_EXPONENT,
    )


def _shortened(text: str) -> str:
    """Return a text fit to be quoted: one line, not long, control characters escaped."""
    return repr(text if len(text) <= 40 else text[:37] + "...")


# Entries of every kind


@overload
def parse_entry(
    value: Any, where: Place = "number", *, constants: Literal[False] = False
) -> Entry: ...
@overload
def parse_entry(value: Any, where: Place = "number", *, constants: bool) -> Any: ...
def parse_entry(value: Any, where: Place = "number", *, constants: bool = False) -> Any:
    """Return the float or the exact rational that a caller's value is.

    Parameters
    ----------
    value : int, Fraction, Decimal, numpy number, sympy number, str or float
        Half and single precision widen without change; integers and rationals of any library
        that registers them with the standard number types are exact.
    where : str or (str, int, int)
        The place, for messages: a text, or matrix, row and column counted from zero.
    constants : bool, keyword-only
        Whether irrational constants are taken too; they are returned as they are.

    Raises
    ------
    EntryError
        NaN, an infinity, text that is no number, a division by zero, a constant that cannot be
        told from zero.
    UnsupportedEntryError
        A complex number, a bool, None, an extended-precision float, a symbol, any other object.
    LimitError
        Too many digits or too large an exponent.
    """
    kind = type(value)
    if kind is float:
        return _finite(value, where)
    if kind is int:
        return make_fraction(value, 1)
    if kind is Fraction:
        return value
    if isinstance(value, str):
        return parse_number(str(value), where)
    if isinstance(value, float):  # numpy's double is one
        return _finite(float(value), where)
    if isinstance(value, bool):
        raise _unsupported(value, "a bool is not a number here; write 0 or 1", where)
    if isinstance(value, numbers.Rational):
        # numpy integers and sympy rationals are registered as such.
        return Fraction(int(value.numerator), int(value.denominator))
    if isinstance(value, Decimal):
        return _from_decimal(value, where)
    if isinstance(value, np.generic):
        return _from_numpy(value, where)
    if value is None:
        raise _unsupported(value, "None is not a number; write 0 for an entry that is zero", where)
    if isinstance(value, numbers.Complex) and not isinstance(value, numbers.Real):
        raise _unsupported(value, "entries are real; complex models are not supported", where)
    if "sympy" in sys.modules:
        import sympy

        if isinstance(value, sympy.Basic):
            return _from_sympy(value, where, constants)
    raise _unsupported(
        value,
        "an entry is an int, a float, a Fraction, a Decimal, a rational of sympy, or a string "
        'such as "1/3"',
        where,
    )


def _finite(value: float, where: Place) -> float:
    if not math.isfinite(value):
        place = place_text(where)
        raise EntryError(
            f"{place}: {value!r} is not a finite number; give finite entries",
            where=place,
            found=repr(value),
        )
    return value


def _unsupported(value: Any, advice: str, where: Place) -> UnsupportedEntryError:
    place = place_text(where)
    name = type(value).__name__
    return UnsupportedEntryError(
        f"{place}: found a value of type {name}; {advice}", where=place, found=name
    )


def _from_decimal(value: Decimal, where: Place) -> Fraction:
    if not value.is_finite():
        place = place_text(where)
        raise EntryError(
            f"{place}: {value!r} is not a finite number; give finite entries",
            where=place,
            found=str(value),
        )
    _, digits, exponent = value.as_tuple()
    assert isinstance(exponent, int)  # a finite Decimal has a number here
    if len(digits) > MAX_DIGITS:
        raise _too_many_digits(len(digits), where)
    if abs(exponent) > MAX_EXPONENT + MAX_DIGITS or abs(value.adjusted()) > MAX_EXPONENT:
        raise _too_large_exponent(where)
    return make_fraction(*value.as_integer_ratio())


def _from_numpy(value: np.generic, where: Place) -> Entry:
    """Numpy scalars that the standard number types do not cover."""
    if isinstance(value, np.float16 | np.float32):
        return _finite(float(value), where)
    if isinstance(value, np.longdouble):
        raise _unsupported(
            value,
            "extended precision differs between machines; convert it to float, or to a Fraction "
            "if every digit counts",
            where,
        )
    if isinstance(value, np.bool_):
        raise _unsupported(value, "a bool is not a number here; write 0 or 1", where)
    raise _unsupported(value, "entries are real numbers", where)


def _from_sympy(value: Any, where: Place, constants: bool) -> Entry | Constant:
    """Numbers of sympy that are not rational, and everything else that sympy makes."""
    import sympy

    if isinstance(value, sympy.Float):
        return _finite(float(value), where)
    place = place_text(where)
    if value in (sympy.nan, sympy.oo, -sympy.oo, sympy.zoo):
        raise EntryError(
            f"{place}: {value} is not a finite number; give finite entries",
            where=place,
            found=str(value),
        )
    if value.free_symbols:
        raise _unsupported(
            value,
            "models with symbols are not built yet; put numbers in for the symbols",
            where,
        )
    if not constants:
        raise _unsupported(
            value,
            "only rational numbers and floats of sympy are taken here; for a number such as "
            "sqrt(2) give a float or a fraction near it",
            where,
        )
    if not isinstance(value, sympy.Expr) or value.is_real is not True:
        raise _unsupported(
            value,
            f"{_shortened(str(value))} is not known to be a real number; entries are real. Where "
            "only rounding makes it complex, give its real part, sympy.re(...)",
            where,
        )
    if value.has(sympy.Float):
        raise _unsupported(
            value,
            f"{_shortened(str(value))} holds a float, so its digits end there; write the float as "
            "a rational number, or round the whole with float(...)",
            where,
        )
    constant_near(value, _DOUBT_DIGITS, where)
    return value
