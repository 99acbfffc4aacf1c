"""Entries: the readings of a double, the grammar of number strings, rounding."""

from __future__ import annotations

import math
import random
import sys
from decimal import Decimal
from fractions import Fraction

import numpy as np
import pytest
import sympy
from hypothesis import example, given
from hypothesis import strategies as st

from realize.entries import (
    EXACT_READINGS,
    MAX_DIGITS,
    MAX_EXPONENT,
    Reading,
    _rounding_interval,
    _simplest,
    description_bits,
    int_from_digits,
    int_to_digits,
    is_simple,
    known_word,
    make_fraction,
    parse_entry,
    parse_number,
    read_float,
    round_fraction,
    spell_fraction,
)
from realize.errors import EntryError, LimitError, UnknownWordError, UnsupportedEntryError

doubles = st.floats(allow_nan=False, allow_infinity=False)
powers_of_two = st.integers(-1074, 1023).map(lambda e: math.ldexp(1.0, e))
subnormals = st.integers(1, 2**52).map(lambda m: math.ldexp(float(m), -1074))


def rounds_to(numerator: int, denominator: int, value: float) -> bool:
    """Whether a fraction rounds to a double; Python's integer division rounds correctly."""
    try:
        return numerator / denominator == value
    except OverflowError:
        return False


def parents(number: Fraction) -> tuple[tuple[int, int], tuple[int, int]]:
    """Return the two neighbours of a positive fraction in the Stern-Brocot tree, (1, 0) allowed.

    From p q' - p' q = 1; Graham, Knuth, Patashnik, Concrete Mathematics, section 4.5.
    """
    p, q = number.numerator, number.denominator
    if q == 1:
        return (p - 1, 1), (1, 0)
    below_q = pow(p, -1, q)
    below_p = (p * below_q - 1) // q
    return (below_p, below_q), (p - below_p, q - below_q)


def simplest_by_definition(value: float, largest: int) -> Fraction | None:
    """Return the simplest fraction that rounds to a double, by trying denominators in turn."""
    for denominator in range(1, largest + 1):
        nearest = round(Fraction(value) * denominator)
        for numerator in range(max(nearest - 1, 0), nearest + 2):
            if rounds_to(numerator, denominator, value):
                return Fraction(numerator, denominator)
    return None


@pytest.mark.parametrize(
    ("value", "stored", "written", "intended"),
    [
        (0.5, "1/2", "1/2", "1/2"),
        (0.1, "3602879701896397/36028797018963968", "1/10", "1/10"),
        (
            0.3333333333333333,
            "6004799503160661/18014398509481984",
            "3333333333333333/10000000000000000",
            "1/3",
        ),
        (-2 / 7, str(Fraction(-2 / 7)), "-2857142857142857/10000000000000000", "-2/7"),
        (1e16, "10000000000000000", "10000000000000000", "10000000000000000"),
        (1e-17, str(Fraction(1e-17)), "1/100000000000000000", "1/100000000000000000"),
        (3.0, "3", "3", "3"),
        (0.0, "0", "0", "0"),
        (-0.0, "0", "0", "0"),
        (5e-324, f"1/{2**1074}", f"1/{2 * 10**323}", f"1/{2 * 10**323}"),
    ],
)
def test_readings_of_known_doubles(value: float, stored: str, written: str, intended: str) -> None:
    """Each reading of a double worked out by hand is the one that comes back."""
    assert read_float(value, Reading.STORED) == Fraction(stored)
    assert read_float(value, "written") == Fraction(written)
    assert read_float(value, "intended") == Fraction(intended)


@given(doubles | powers_of_two | subnormals)
@example(sys.float_info.max)
@example(sys.float_info.min)
@example(2.0**53)
def test_every_reading_rounds_back(value: float) -> None:
    """Whatever a double is read as rounds to that double, and a negative is read as minus."""
    for reading in EXACT_READINGS:
        number = read_float(value, reading)
        assert round_fraction(number) == value
        assert math.gcd(number.numerator, number.denominator) == 1
        assert read_float(-value, reading) == -number


@given(doubles)
def test_stored_is_the_double_itself(value: float) -> None:
    """The stored reading is the dyadic rational, as Python's own Fraction finds it."""
    assert read_float(value, "stored") == Fraction(value)


@given(doubles)
def test_written_is_the_text(value: float) -> None:
    """The written reading is the number that the shortest text spells."""
    assert read_float(value, "written") == Fraction(repr(value))


@given(st.integers(1, 20_000), st.integers(1, 20_000))
def test_intended_finds_small_ratios(numerator: int, denominator: int) -> None:
    """A ratio of small integers, rounded to a double, is found again."""
    number = Fraction(numerator, denominator)
    assert read_float(numerator / denominator, "intended") == number
    assert is_simple(number)


@given((doubles | powers_of_two | subnormals).filter(lambda value: value > 0))
@example(1.0)
@example(2.0**-1022)
@example(2.0**-1074)
@example(sys.float_info.max)
def test_intended_is_simplest_or_a_shorter_decimal(value: float) -> None:
    """No simpler fraction rounds to the double, unless its decimal was taken for being shorter.

    A fraction is the simplest of an interval exactly when neither of its parents in the
    Stern-Brocot tree lies in it.
    """
    number = read_float(value, "intended")
    if any(rounds_to(p, q, value) for p, q in parents(number) if q):
        assert number == read_float(value, "written")


@given(st.floats(0.001, 1000.0))
def test_intended_agrees_with_trying_denominators(value: float) -> None:
    """Where a fraction with a small denominator rounds to the double, that one is read."""
    rounded = float(f"{value:.3g}")
    assert read_float(rounded, "intended") == simplest_by_definition(rounded, 1000)


@given((doubles | powers_of_two | subnormals).filter(lambda value: value > 0))
@example(2.0**-1022)
@example(2.0**-1074)
@example(1.0)
def test_rounding_interval_ends_halfway_to_the_neighbours(value: float) -> None:
    """The ends are the midpoints to the neighbouring doubles, closed when these round back."""
    low, high, denominator, closed = _rounding_interval(value)
    below, above = math.nextafter(value, 0.0), math.nextafter(value, math.inf)
    assert Fraction(low, denominator) == (Fraction(below) + Fraction(value)) / 2
    assert closed is rounds_to(low, denominator, value)
    if math.isfinite(above):
        assert Fraction(high, denominator) == (Fraction(value) + Fraction(above)) / 2
        assert closed is rounds_to(high, denominator, value)


@given(st.integers(0, 300), st.integers(1, 60), st.integers(1, 40), st.booleans())
def test_simplest_fraction_of_any_interval(low: int, width: int, whole: int, closed: bool) -> None:
    """The simplest fraction between two others is the first when all are tried in order."""
    lower, upper = Fraction(low, whole), Fraction(low + width, whole)
    inside = (
        Fraction(p, q)
        for q in range(1, 2 * whole + 2)
        for p in range(q * low // whole, q * (low + width) // whole + 2)
        if lower < Fraction(p, q) < upper or (closed and Fraction(p, q) in (lower, upper))
    )
    assert _simplest(low, low + width, whole, closed) == next(inside)


def test_half_even_ends_belong_to_even_doubles() -> None:
    """The midpoint to a neighbour is read for the even double of the two and not for the odd."""
    # 2^53 + 1 is halfway between 2^53 (even) and 2^53 + 2 (odd significand).
    assert rounds_to(2**53 + 1, 1, 2.0**53)
    odd = read_float(2.0**53 + 2, "intended")
    assert odd > 2**53 + 1


def test_random_doubles_have_no_simple_fraction() -> None:
    """Fewer than one random double in a thousand passes for a simple fraction."""
    draw = random.Random(20)
    count = sum(is_simple(read_float(draw.gauss(0.0, 1.0), "intended")) for _ in range(4000))
    assert count < 4


@pytest.mark.parametrize(
    ("number", "bits"),
    [("0", 1), ("1/3", 3), ("7/8", 7), ("10000000000000000", 6), ("1/1000", 3), ("300", 4)],
)
def test_description_bits_by_hand(number: str, bits: int) -> None:
    """The bits of hand-counted descriptions: fraction, or decimal digits and power of ten."""
    assert description_bits(Fraction(number)) == bits


def test_decimals_are_simple_and_long_ones_are_not() -> None:
    """Ten-digit decimals count as simple; the exact value of the double 0.1 does not."""
    assert is_simple(Fraction("3.141592654"))
    assert is_simple(Fraction("1.25e-11"))
    assert not is_simple(Fraction(0.1))


@pytest.mark.parametrize("value", [math.nan, math.inf, -math.inf])
@pytest.mark.parametrize("reading", EXACT_READINGS)
def test_no_reading_of_what_is_not_finite(value: float, reading: Reading) -> None:
    """NaN and infinities stand for no number under any reading."""
    with pytest.raises(EntryError):
        read_float(value, reading)


def test_numpy_doubles_are_read() -> None:
    """A numpy double is a double, though it prints otherwise."""
    for reading in EXACT_READINGS:
        assert read_float(np.float64(0.1), reading) == read_float(0.1, reading)


@pytest.mark.parametrize("word", ["given", "rounded", ""])
def test_words_that_read_no_float(word: str) -> None:
    """A word that does not read floats is refused, and the error lists those that do."""
    with pytest.raises(UnknownWordError) as caught:
        read_float(0.5, word)
    assert caught.value.allowed == ("stored", "written", "intended")


def test_known_word_names_argument_and_words() -> None:
    """An unknown word is reported with the argument and the words it takes."""
    assert known_word(Reading, "stored", "reading") is Reading.STORED
    with pytest.raises(UnknownWordError, match="reading='exact'") as caught:
        known_word(Reading, "exact", "reading")
    assert caught.value.argument == "reading"
    assert caught.value.allowed == ("stored", "written", "intended", "given")


@given(st.fractions())
def test_make_fraction_equals_the_constructor(number: Fraction) -> None:
    """A Fraction made without a gcd behaves as any other."""
    made = make_fraction(number.numerator, number.denominator)
    assert made == number
    assert hash(made) == hash(number)
    assert type(made) is Fraction
    assert made + Fraction(1, 2) == number + Fraction(1, 2)
    assert str(made) == str(number)


# Rounding


def test_rounding_is_to_nearest_even() -> None:
    """Midpoints go to the even neighbour, and tiny numbers to zero or the least double."""
    assert round_fraction(Fraction(2**53 + 1)) == 2.0**53
    assert round_fraction(Fraction(2**53 + 3)) == 2.0**53 + 4
    assert round_fraction(Fraction(1, 2**1075)) == 0.0
    assert round_fraction(Fraction(3, 2**1076)) == 5e-324


def test_rounding_past_the_largest_double() -> None:
    """A number too large for a double is refused with its place."""
    with pytest.raises(EntryError, match="A, row 2, column 1") as caught:
        round_fraction(Fraction(10**400), ("A", 1, 0))
    assert caught.value.where == "A, row 2, column 1"


# Text


@pytest.mark.parametrize(
    ("text", "number"),
    [
        ("0", Fraction(0)),
        ("-7", Fraction(-7)),
        ("+7", Fraction(7)),
        ("007", Fraction(7)),
        ("1/3", Fraction(1, 3)),
        ("-2/4", Fraction(-1, 2)),
        ("-0.125", Fraction(-1, 8)),
        (".5", Fraction(1, 2)),
        ("5.", Fraction(5)),
        ("1e-3", Fraction(1, 1000)),
        ("1E+3", Fraction(1000)),
        ("-2.50e1", Fraction(-25)),
        ("1e1000", Fraction(10**1000)),
        ("1e-0001", Fraction(1, 10)),
    ],
)
def test_number_strings(text: str, number: Fraction) -> None:
    """Each form of the grammar is read as the number it spells."""
    assert parse_number(text) == number
    assert parse_entry(text) == number


@pytest.mark.parametrize(
    "text",
    [
        "", ".", "+", "-", "e5", "1e", "1e+", "1e5.0", "--1", "1 ", " 1", "1\n", "1_0", "0x10",
        "1/-2", "1/2/3", "1.5/2", "1/2e3", "1,5", "nan", "inf", "-Infinity", "1j",
        "\u00bd", "\u0661", "\uff11", "one", "__import__('os')", "1+1", "2**3", "1" * 50 + "x",
    ],
)  # fmt: skip
def test_strings_that_are_no_numbers(text: str) -> None:
    """Everything outside the grammar is refused: spaces, underscores, other scripts, formulas."""
    with pytest.raises(EntryError) as caught:
        parse_number(text, ("B", 0, 2))
    assert caught.value.where == "B, row 1, column 3"
    assert caught.value.found == text


@pytest.mark.parametrize("text", ["1/0", "0/0", "-3/000"])
def test_division_by_zero(text: str) -> None:
    """A fraction over zero is refused as such."""
    with pytest.raises(EntryError, match="divides by zero"):
        parse_number(text)


@pytest.mark.parametrize(
    "text",
    [
        "1e999999999",
        "1e-999999999",
        "1e" + "9" * 100_000,
        f"1e{MAX_EXPONENT + 1}",
        f"-1e-{MAX_EXPONENT + 1}",
        "1" * (MAX_DIGITS + 1),
        "0." + "1" * MAX_DIGITS,
        "1/" + "1" * (MAX_DIGITS + 1),
        "7" * 10_000_000,
    ],
    ids=lambda text: f"{text[:12]}({len(text)})",
)
def test_numbers_beyond_the_limits(text: str) -> None:
    """Too many digits or too large an exponent is refused, not expanded."""
    with pytest.raises(LimitError) as caught:
        parse_number(text)
    assert caught.value.limit in (MAX_DIGITS, MAX_EXPONENT)


@given(st.integers(0, 10**40), st.integers(1, 10**40), st.booleans())
def test_spelling_round_trips(numerator: int, denominator: int, negative: bool) -> None:
    """What is spelled is read back as the same number."""
    number = Fraction(-numerator if negative else numerator, denominator)
    assert parse_number(spell_fraction(number)) == number


def test_integers_past_the_interpreters_digit_limit() -> None:
    """Integers of any size are spelled and read, whatever the interpreter's own digit limit."""
    number = 7**10_000
    digits = int_to_digits(number)
    assert len(digits) == 8451  # floor(10000 log10(7)) + 1
    assert digits[-1] == "1"  # 7^4 ends in 1
    assert int_from_digits(digits) == number
    assert parse_number(spell_fraction(Fraction(-number, 2))) == Fraction(-number, 2)


# Entries of every kind


@pytest.mark.parametrize(
    ("value", "number"),
    [
        (3, Fraction(3)),
        (10**400, Fraction(10**400)),
        (Fraction(1, 3), Fraction(1, 3)),
        (Decimal("-0.125"), Fraction(-1, 8)),
        (Decimal("1e3"), Fraction(1000)),
        (np.int8(-3), Fraction(-3)),
        (np.uint64(2**64 - 1), Fraction(2**64 - 1)),
        (sympy.Integer(5), Fraction(5)),
        (sympy.Rational(-1, 3), Fraction(-1, 3)),
        (sympy.S.Half, Fraction(1, 2)),
        (np.str_("1/3"), Fraction(1, 3)),
    ],
)
def test_rational_entries(value: object, number: Fraction) -> None:
    """Integers, rationals, decimals and strings become Fractions of plain Python integers."""
    entry = parse_entry(value)
    assert type(entry) is Fraction
    assert type(entry.numerator) is int
    assert type(entry.denominator) is int
    assert entry == number


@pytest.mark.parametrize(
    ("value", "number"),
    [
        (0.1, 0.1),
        (np.float64(0.1), 0.1),
        (np.float32(0.1), 0.10000000149011612),  # the double of the single's exact value
        (np.float16(0.1), 0.0999755859375),  # likewise for half precision
        (sympy.Float("0.1"), 0.1),
    ],
)
def test_float_entries(value: object, number: float) -> None:
    """Floats of every accepted precision become plain Python floats of the same value."""
    entry = parse_entry(value)
    assert type(entry) is float
    assert entry == number


@pytest.mark.parametrize(
    "value",
    [
        math.nan, math.inf, -math.inf, np.float32("nan"), Decimal("NaN"), Decimal("-Infinity"),
        Decimal("sNaN"), sympy.nan, sympy.oo, -sympy.oo, sympy.zoo, sympy.Float("inf"),
    ],
)  # fmt: skip
def test_entries_that_are_not_finite(value: object) -> None:
    """NaN and infinities of every library are refused as such."""
    with pytest.raises(EntryError, match="finite") as caught:
        parse_entry(value, "A, row 1, column 1")
    assert caught.value.where == "A, row 1, column 1"


@pytest.mark.parametrize(
    ("value", "name"),
    [
        (True, "bool"),
        (np.True_, "bool"),
        (None, "NoneType"),
        (1j, "complex"),
        (np.complex128(1), "complex128"),
        (np.longdouble(1), "longdouble"),
        (object(), "object"),
        (b"1", "bytes"),
        ([1], "list"),
        (sympy.Symbol("k"), "Symbol"),
        (sympy.sqrt(2), "Pow"),
        (sympy.pi, "Pi"),
        (sympy.I, "ImaginaryUnit"),
        (np.datetime64("2020-01-01"), "datetime64"),
    ],
    ids=lambda value: type(value).__name__,
)
def test_entries_of_other_kinds(value: object, name: str) -> None:
    """What is not a real number of a known kind is refused by the name of its type."""
    with pytest.raises(UnsupportedEntryError) as caught:
        parse_entry(value, "C")
    assert caught.value.where == "C"
    assert caught.value.found is not None
    assert caught.value.found.strip("_") == name


def test_symbols_are_said_to_be_for_later() -> None:
    """A symbol is refused with the advice to put numbers in."""
    with pytest.raises(UnsupportedEntryError, match="put numbers in"):
        parse_entry(sympy.Symbol("k") / 2)


@pytest.mark.parametrize("text", ["1e999999999", "1e-999999999", "0e999999999"])
def test_huge_decimals_are_not_expanded(text: str) -> None:
    """A Decimal with an enormous exponent is refused before it becomes an integer."""
    with pytest.raises(LimitError):
        parse_entry(Decimal(text))
