"""Exact polynomials: arithmetic against plain Python, roots against multiprecision."""

from __future__ import annotations

import math
import pickle
import threading
from fractions import Fraction
from itertools import pairwise

import flint
import mpmath
import pytest
import sympy
from hypothesis import given
from hypothesis import strategies as st

from realize.errors import EntryError, VerificationError, ZeroDenominatorError
from realize.polynomials import (
    ONE,
    ZERO,
    Box,
    Polynomial,
    Root,
    _disjoint,
    add,
    degree,
    derivative,
    divide_exact,
    evaluate,
    factor,
    from_flint,
    gcd,
    moebius,
    monic,
    multiply,
    power,
    root_boxes,
    roots,
    strip,
    text,
    to_flint,
    working_precision,
)


def poly(*coefficients: int | str | Fraction) -> Polynomial:
    """A polynomial from its coefficients, descending powers."""
    return tuple(Fraction(c) for c in coefficients)


def product(*polynomials: Polynomial) -> Polynomial:
    """The product by the school method, which shares no code with the library."""
    result = [Fraction(1)]
    for p in polynomials:
        longer = [Fraction(0)] * (len(result) + len(p) - 1)
        for i, a in enumerate(result):
            for j, b in enumerate(p):
                longer[i + j] += a * b
        result = longer
    while len(result) > 1 and not result[0]:
        del result[0]
    return tuple(result)


rationals = st.fractions(-20, 20, max_denominator=12)
nonzero = rationals.filter(bool)
polynomials = st.builds(lambda lead, rest: (lead, *rest), nonzero, st.lists(rationals, max_size=6))
monic_polynomials = st.builds(
    lambda rest: (Fraction(1), *rest), st.lists(rationals, min_size=1, max_size=5)
)


# Arithmetic


def test_the_constants_are_in_the_normal_form() -> None:
    """Zero is (0,), of degree -1; one is (1,), of degree 0."""
    assert poly(0) == ZERO
    assert poly(1) == ONE
    assert (degree(ZERO), degree(ONE), degree(poly(2, 0, 1))) == (-1, 0, 2)


@pytest.mark.parametrize(
    ("given_coefficients", "expected"),
    [((), (0,)), ((0,), (0,)), ((0, 0), (0,)), ((0, 0, 3, 0), (3, 0)), ((1, 0), (1, 0))],
)
def test_strip_removes_leading_zeros_only(
    given_coefficients: tuple[int, ...], expected: tuple[int, ...]
) -> None:
    """Leading zeros go, inner and trailing ones stay, nothing at all becomes zero."""
    assert strip(poly(*given_coefficients)) == poly(*expected)


@given(polynomials, polynomials)
def test_multiply_agrees_with_the_school_method(p: Polynomial, q: Polynomial) -> None:
    """The product has the coefficients that plain Fractions give."""
    assert multiply(p, q) == product(p, q)


@given(polynomials, polynomials, rationals)
def test_add_and_evaluate_agree(p: Polynomial, q: Polynomial, x: Fraction) -> None:
    """The value of a sum is the sum of the values, and a sum has no leading zeros."""
    total = add(p, q)
    assert evaluate(total, x) == sum(
        (c * x**k for f in (p, q) for k, c in enumerate(reversed(f))), Fraction(0)
    )
    assert total == ZERO or total[0]


@given(polynomials)
def test_a_polynomial_less_itself_is_zero(p: Polynomial) -> None:
    """Cancelled leading terms are stripped down to the zero polynomial."""
    assert add(p, tuple(-c for c in p)) == ZERO


def test_the_zero_polynomial_in_arithmetic() -> None:
    """Zero absorbs in a product, is neutral in a sum, and evaluates to zero."""
    p = poly(1, "2/3")
    assert multiply(p, ZERO) == multiply(ZERO, p) == ZERO
    assert add(p, ZERO) == add(ZERO, p) == p
    assert evaluate(ZERO, Fraction(5, 3)) == 0
    assert derivative(ZERO) == derivative(ONE) == ZERO
    assert gcd(ZERO, ZERO) == ZERO
    assert gcd(ZERO, poly(2, 4)) == poly(1, 2)


@given(polynomials, st.integers(0, 4))
def test_power_is_repeated_multiplication(p: Polynomial, exponent: int) -> None:
    """A power is the product of so many copies; the power 0 is one."""
    assert power(p, exponent) == product(*[p] * exponent)


@given(polynomials, polynomials)
def test_a_product_divides_exactly(p: Polynomial, q: Polynomial) -> None:
    """Dividing p q by q gives p."""
    assert divide_exact(product(p, q), q) == p


def test_a_division_with_remainder_is_refused() -> None:
    """The error names both polynomials and what was left over."""
    with pytest.raises(VerificationError, match=r"\(s \+ 1\) does not divide \(s\^2 \+ 1\).*is 2;"):
        divide_exact(poly(1, 0, 1), poly(1, 1))


def test_a_division_by_zero_is_refused() -> None:
    """The zero polynomial is no divisor."""
    with pytest.raises(ZeroDenominatorError, match="by the zero polynomial"):
        divide_exact(poly(1, 0, 1), ZERO)


@given(monic_polynomials, monic_polynomials, monic_polynomials)
def test_gcd_finds_a_planted_factor(p: Polynomial, q: Polynomial, shared: Polynomial) -> None:
    """The divisor is monic, divides both, is a multiple of the shared factor, leaves nothing."""
    first, second = product(p, shared), product(q, shared)
    common = gcd(first, second)
    assert common[0] == 1
    assert gcd(divide_exact(first, common), divide_exact(second, common)) == ONE
    assert product(divide_exact(common, shared), shared) == common


def test_gcd_of_huge_powers() -> None:
    """x^m - 1 and x^n - 1 have the common divisor x^gcd(m, n) - 1 (common practice)."""
    first = poly(1, *[0] * 119, -1)
    second = poly(1, *[0] * 83, -1)
    assert gcd(first, second) == poly(1, *[0] * 11, -1)


@given(polynomials)
def test_monic_keeps_the_ratios(p: Polynomial) -> None:
    """The leading coefficient becomes one and every other is divided by it."""
    assert monic(p) == tuple(c / p[0] for c in p)


@given(polynomials, polynomials)
def test_the_derivative_obeys_the_product_rule(p: Polynomial, q: Polynomial) -> None:
    """(p q)' = p' q + p q'."""
    expected = add(product(derivative(p), q), product(p, derivative(q)))
    assert derivative(product(p, q)) == expected


def test_evaluate_with_long_numbers() -> None:
    """Horner's rule on integers agrees with Fractions for numbers of many digits."""
    p = poly("123456789/1000003", "-7/3", 0, "1/998244353")
    x = Fraction(10**20 + 1, 3**30)
    assert evaluate(p, x) == p[0] * x**3 + p[1] * x**2 + p[3]


@given(polynomials)
def test_flint_and_back(p: Polynomial) -> None:
    """Going to FLINT and back changes nothing, and what comes back is made of Fraction."""
    back = from_flint(to_flint(p))
    assert back == p
    assert all(type(c) is Fraction for c in back)


def test_integer_polynomials_of_flint_are_read_too() -> None:
    """Coefficients come out in descending powers; FLINT's zero is ours."""
    assert from_flint(flint.fmpz_poly([-1, 0, 2])) == poly(2, 0, -1)
    assert from_flint(flint.fmpz_poly([])) == from_flint(flint.fmpq_poly([])) == ZERO


@given(polynomials, rationals)
def test_moebius_is_the_substitution(p: Polynomial, w: Fraction) -> None:
    """The value at w is (1 - w)^n p((1 + w) / (1 - w)), computed here with Fractions."""
    if w == 1:
        return
    n = len(p) - 1
    z = (1 + w) / (1 - w)
    value = sum(c * z ** (n - k) for k, c in enumerate(p)) * (1 - w) ** n
    assert sum(c * w**k for k, c in enumerate(reversed(moebius(p)))) == value


@given(monic_polynomials, st.integers(0, 3))
def test_moebius_loses_a_degree_for_each_root_at_minus_one(p: Polynomial, times: int) -> None:
    """A root at z = -1 goes to infinity."""
    alternating = sum(c * (-1) ** k for k, c in enumerate(p))
    if alternating == 0:
        return
    assert degree(moebius(product(p, *[poly(1, 1)] * times))) == degree(p)


# Factors and text


@given(st.lists(st.tuples(monic_polynomials, st.integers(1, 2)), min_size=1, max_size=3))
def test_factors_multiply_back(planted: list[tuple[Polynomial, int]]) -> None:
    """The factors are monic, coprime, in order, and their product is the polynomial."""
    p = product(*[f for f, m in planted for _ in range(m)])
    found = factor(p)
    assert product(*[f for f, m in found for _ in range(m)]) == p
    keys = [(len(f), f) for f, _ in found]
    assert keys == sorted(set(keys))
    assert all(f[0] == 1 for f, _ in found)
    assert all(gcd(a, b) == ONE for a, b in pairwise([f for f, _ in found]))


@pytest.mark.parametrize(
    "p",
    [
        poly(1, 0, 0, 0, 4),  # Sophie Germain: splits into two quadratics (common practice)
        poly(1, 0, -10, 0, 1),  # irreducible, though it splits modulo every prime (common practice)
        poly(6, -5, "-7/3", "1/2", 11, 0, 0),
        poly(2, 7, 10, 4, 1),
    ],
)
def test_factors_agree_with_sympy(p: Polynomial) -> None:
    """Sympy's factorisation over the rationals has the same monic factors."""
    s = sympy.Symbol("s")
    _, expected = sympy.Poly(
        [sympy.Rational(c.numerator, c.denominator) for c in p], s
    ).factor_list()
    assert sorted(factor(p)) == sorted(
        (tuple(Fraction(int(c.p), int(c.q)) for c in f.monic().all_coeffs()), m)
        for f, m in expected
    )


def test_a_constant_has_no_factors_and_no_roots() -> None:
    """The empty product and no root."""
    assert factor(poly("-7/2")) == ()
    assert roots(poly("-7/2")) == ()


@pytest.mark.parametrize("question", [factor, roots, monic])
def test_questions_without_an_answer_for_zero(question: object) -> None:
    """The zero polynomial has no factors, no list of roots and no leading coefficient."""
    assert callable(question)
    with pytest.raises(EntryError, match="zero polynomial"):
        question(ZERO)


@pytest.mark.parametrize(
    ("p", "expected"),
    [
        (poly(1, "3/2", -1), "s^2 + 3/2 s - 1"),
        (poly(-1, 0, 0), "-s^2"),
        (poly(-1, "-1/2"), "-s - 1/2"),
        (poly("2/3", 1, 0), "2/3 s^2 + s"),
        (ZERO, "0"),
        (ONE, "1"),
        (poly(-1), "-1"),
    ],
)
def test_text(p: Polynomial, expected: str) -> None:
    """What a person reads: no zero terms, no coefficient one before a power."""
    assert text(p) == expected


def test_text_with_another_variable() -> None:
    """The variable is the caller's."""
    assert text(poly(1, -1), "z") == "z - 1"


# Roots


def close_roots(p: Polynomial, digits: int = 60) -> list[mpmath.mpc]:
    """All roots by mpmath's simultaneous iteration, far beyond double precision."""
    with mpmath.workdps(digits):
        coefficients = [mpmath.mpf(c.numerator) / c.denominator for c in p]
        return list(mpmath.polyroots(coefficients, maxsteps=400, extraprec=400))


def assert_correctly_rounded(p: Polynomial, found: tuple[Root, ...]) -> None:
    """Each root found is the rounded value of a different root of mpmath, within its radius."""
    left = close_roots(p)
    with mpmath.workdps(60):
        for root in found:
            exact = min(left, key=lambda candidate: abs(candidate - root.value))
            left.remove(exact)
            # A part that is zero comes out of the iteration as a tiny number.
            tiny = mpmath.mpf(10) ** -45
            real = exact.real if abs(exact.real) > tiny else mpmath.mpf(0)
            imag = exact.imag if abs(exact.imag) > tiny else mpmath.mpf(0)
            assert (float(real), float(imag)) == (root.value.real, root.value.imag)
            assert abs(mpmath.mpc(real, imag) - root.value) <= root.radius + tiny
            assert root.radius <= 2.0**-52 * abs(root.value)
    assert not left


SQUAREFREE = [
    poly(1, 2, 3, 4, 5),
    poly(1, 1, 2, 2, 3, 5),
    poly(1, 0, 0, -2),
    poly(1, 0, 0, 0, -2),  # symmetric about 0: two real roots, two on the imaginary axis
    poly(1, 0, 0, 0, 2),  # symmetric about 0, nothing on an axis
    poly(1, 4, 10, 12, 7, 5),
    poly(1, "4/3", "2/3", "4/27", "-161/81"),  # (s + 1/3)^4 - 2
    poly(1, 0, "1/3", 0, "1/7", 0, "-1/11"),
    poly(1, 0, 0, 0, 0, 0, 0, 0, 0, 0, 1),
    poly(3, "-1/2", 5, "-10/7", 1, 1, "1/9", -2),
    poly(1, -2, 5),
    poly(1, -1, -1),
]


@pytest.mark.parametrize("p", SQUAREFREE, ids=text)
def test_roots_are_correctly_rounded(p: Polynomial) -> None:
    """Value and radius hold against roots computed to 60 digits by another method."""
    found = roots(p)
    assert len(found) == degree(p)
    assert_correctly_rounded(p, found)
    assert list(found) == sorted(found, key=lambda root: (root.value.real, root.value.imag))


@given(st.lists(st.integers(-9, 9), min_size=2, max_size=6), st.integers(1, 9))
def test_roots_of_random_polynomials_are_correctly_rounded(tail: list[int], lead: int) -> None:
    """The same for the squarefree part of polynomials with small integer coefficients."""
    p = poly(lead, *tail)
    squarefree = divide_exact(p, gcd(p, derivative(p)))
    if degree(squarefree) > 0:
        assert_correctly_rounded(squarefree, roots(squarefree))


@given(monic_polynomials, st.integers(1, 3))
def test_multiplicities_add_up_to_the_degree(p: Polynomial, times: int) -> None:
    """Each root carries its multiplicity and the factor that it is a root of."""
    p = product(*[p] * times)
    found = roots(p)
    assert sum(root.multiplicity for root in found) == degree(p)
    factors = factor(p)
    for index, (f, multiplicity) in enumerate(factors):
        mine = [root for root in found if root.factor == index]
        assert len(mine) == degree(f)
        assert all(root.multiplicity == multiplicity for root in mine)


@given(monic_polynomials)
def test_roots_come_in_exact_pairs(p: Polynomial) -> None:
    """The conjugate of every value is a value, with the same radius and multiplicity."""
    found = {(root.value, root.radius, root.multiplicity) for root in roots(p)}
    assert found == {(value.conjugate(), radius, times) for value, radius, times in found}


def test_exact_roots_have_radius_zero() -> None:
    """Roots whose parts are doubles are returned exactly; others are not said to be exact."""
    p = product(poly(1, "-3/4"), poly(1, -2, 5), poly(1, 0, "9/4"), poly(1, "-1/3"))
    assert [(root.value, root.radius == 0.0) for root in roots(p)] == [
        (-1.5j, True),
        (1.5j, True),
        (complex(1 / 3), False),
        (complex(0.75), True),
        (1 - 2j, True),
        (1 + 2j, True),
    ]


def test_the_radius_bounds_the_rounding_error() -> None:
    """1/3 as a double is off by less than the radius, and by more than half of it at most bits."""
    (root,) = roots(poly(3, -1))
    assert 0 < abs(Fraction(root.value.real) - Fraction(1, 3)) <= Fraction(root.radius)
    assert root.radius <= 2.0**-54


@pytest.mark.parametrize("scale", [Fraction(1), Fraction(10) ** 200, Fraction(1, 10**200)])
def test_roots_on_the_axes_are_exactly_there(scale: Fraction) -> None:
    """A real root has no imaginary part and a root on the imaginary axis no real part, at all."""
    # s^4 - 2 with s measured in other units.
    values = [root.value for root in roots(poly(1, 0, 0, 0, -2 * scale**4))]
    assert [(v.real == 0.0, v.imag == 0.0) for v in values] == [
        (False, True),
        (True, False),
        (True, False),
        (False, True),
    ]
    # No negative zeros either: they print as -0.0.
    assert all(math.copysign(1, v.real) > 0 for v in values[1:3])


def test_a_root_next_to_an_axis_is_not_on_it() -> None:
    """Parts of 1e-40 beside 1 are returned as they are: nothing is decided by smallness."""
    tiny = Fraction(1, 10**40)
    found = roots(poly(1, -2 * tiny, 1 + tiny**2))  # 1e-40 +/- i
    assert [root.value for root in found] == [complex(1e-40, -1), complex(1e-40, 1)]
    p = product(poly(1, 0, 0, -2), poly(1, 0, 0, -2))
    p = add(p, poly(tiny))  # (s^3 - 2)^2 + 1e-40: every root is half of a close pair
    found = roots(p)
    assert len(found) == 6
    assert all(root.value.imag for root in found)
    # The pair near the real cube root of 2 is off the line by 1e-20 / (3 * 2^(2/3)).
    offset = 1e-20 / (3 * 2 ** (2 / 3))
    pair = [root.value for root in found if root.value.real > 1]
    assert len(pair) == 2
    assert all(abs(abs(v.imag) / offset - 1) < 1e-12 for v in pair)


def test_mignotte_roots_are_told_apart() -> None:
    """Two real roots of x^30 - 2 (100 x - 1)^2 are 1.41421356237309505e-32 apart.

    Source: Mignotte (1982), "Some useful bounds" (polynomial from memory, separation recomputed).
    As doubles they are equal; the boxes tell them apart.
    """
    p = add(poly(1, *[0] * 30), tuple(-2 * c for c in poly(10000, -200, 1)))
    near = [root for root in roots(p) if abs(root.value - 0.01) < 1e-6]
    assert [root.value for root in near] == [0.01 + 0j, 0.01 + 0j]
    for _, boxes in root_boxes(p):
        pair = sorted(box for box in boxes if abs(box.real_low - Fraction(1, 100)) < 1e-6)
        width = max(box.real_high - box.real_low for box in pair)
        if width < Fraction(1, 10**50):
            break
    assert len(pair) == 2
    assert abs((pair[1].real_low - pair[0].real_low) / Fraction(1, 10**32)) == pytest.approx(
        Fraction("1.41421356237309505"), rel=1e-15
    )


def test_wilkinson_with_a_changed_coefficient() -> None:
    """Twenty roots 1..20, one coefficient changed by 2^-23: ten become complex.

    Source: Wilkinson (1959, 1963, 1984), published to five decimals, recomputed to twenty.
    """
    p = list(product(*[poly(1, -k) for k in range(1, 21)]))
    p[1] -= Fraction(1, 2**23)
    found = roots(tuple(p))
    values = [root.value for root in found]
    assert sum(v.imag == 0 for v in values) == 10
    for expected in (
        8.0072676034503768549,
        8.9172502485170704943,
        20.846908101482256915,
        complex(10.095266145129963366, 0.64350090386360357599),
        complex(19.502439400493681724, 1.9403303466644795427),
    ):
        assert min(abs(v - expected) for v in values) <= 4e-15


def test_wilkinson_roots_are_exact() -> None:
    """The unchanged polynomial splits into linear factors, and every root is exact."""
    found = roots(product(*[poly(1, -k) for k in range(1, 21)]))
    assert [(root.value, root.radius) for root in found] == [
        (complex(k), 0.0) for k in range(1, 21)
    ]


TIE = 1 + Fraction(1, 2**53)  # the middle of 1 and the next double
LATER_TIE = 1 + Fraction(3, 2**53)  # the middle of two doubles, of which the upper one is even


@pytest.mark.parametrize(
    ("middle", "rounded"), [(TIE, 1.0), (LATER_TIE, 1 + 2.0**-51)], ids=["down", "up"]
)
def test_parts_halfway_between_two_doubles(middle: Fraction, rounded: float) -> None:
    """A part that no precision can round is recognised, and goes to the even neighbour."""
    # Real parts: a linear factor, a quadratic, and a quartic symmetric about the middle.
    assert [root.value for root in roots((Fraction(1), -middle))] == [complex(rounded)]
    quadratic = (Fraction(1), -2 * middle, middle**2 + 3)
    assert {root.value.real for root in roots(quadratic)} == {rounded}
    shifted = sum(
        (to_flint(poly(c)) * to_flint((Fraction(1), -middle)) ** k for k, c in ((4, 1), (0, -2))),
        start=to_flint(ZERO),
    )
    values = [root.value for root in roots(from_flint(shifted))]
    assert [v.real for v in values if v.imag] == [rounded, rounded]
    # Imaginary part: x + i middle with x^2 = 2, then with x^3 = 2, which has no symmetry.
    square = (Fraction(1), Fraction(0), -(middle**2) - 2)
    quartic = add(product(square, square), (4 * middle**2, Fraction(0), Fraction(0)))
    assert {abs(root.value.imag) for root in roots(quartic)} == {rounded}
    # (s - i m)^3 = 2 has real part s^3 - 3 m^2 s - 2 and imaginary part -3 m s^2 + m^3.
    real_part = (Fraction(1), Fraction(0), -3 * middle**2, Fraction(-2))
    imag_part = (-3 * middle, Fraction(0), middle**3)
    sextic = add(product(real_part, real_part), product(imag_part, imag_part))
    values = [root.value for root in roots(sextic)]
    assert len(values) == 6
    assert sorted(v.imag for v in values if abs(v.real - 2 ** (1 / 3)) < 1e-9) == [
        -rounded,
        rounded,
    ]


@pytest.mark.parametrize(
    ("offset", "rounded"), [(Fraction(1, 2**1500), 1 + 2.0**-52), (Fraction(-1, 2**1500), 1.0)]
)
def test_parts_next_to_the_middle_of_two_doubles(offset: Fraction, rounded: float) -> None:
    """2^-1500 above or below the middle is no tie, though it looks like one at 256 bits."""
    middle = TIE + offset
    real_part = (Fraction(1), Fraction(0), -3 * middle**2, Fraction(-2))
    imag_part = (-3 * middle, Fraction(0), middle**3)
    sextic = add(product(real_part, real_part), product(imag_part, imag_part))
    values = [root.value for root in roots(sextic) if abs(root.value.real - 2 ** (1 / 3)) < 1e-9]
    assert sorted(v.imag for v in values) == [-rounded, rounded]


def test_boxes_that_meet_are_not_disjoint() -> None:
    """A common edge, or one exact point in another box, counts as meeting."""
    zero, one, two = Fraction(0), Fraction(1), Fraction(2)
    square = Box(zero, one, zero, one)
    assert _disjoint((square, Box(zero, one, two, two), Box(two, two, zero, one)))
    assert not _disjoint((Box(two, two, two, two), square, Box(one, two, one, two)))
    assert not _disjoint((square, Box(one / 2, one / 2, one / 3, one / 3)))


def test_roots_below_the_smallest_double() -> None:
    """A root of 1e-400 rounds to zero, and the radius says that it is not zero."""
    (root,) = roots((Fraction(1), Fraction(-1, 10**400)))
    assert (root.value, root.radius) == (0j, math.ulp(0.0))
    (root,) = roots((Fraction(1), Fraction(1, 10**400)))
    assert math.copysign(1, root.value.real) == 1, "a negative zero, which prints as -0.0"
    found = roots((Fraction(1), Fraction(0), Fraction(0), Fraction(-2, 10**1200)))
    assert [(root.value, root.radius > 0) for root in found] == [(0j, True)] * 3


@pytest.mark.parametrize("n", [1, 2, 3, 4])
def test_roots_too_large_for_a_double_are_refused(n: int) -> None:
    """The error is ours and says what to do, whichever way the root was found."""
    with pytest.raises(EntryError, match=r"root.* too large for a double"):
        roots((Fraction(1), *[Fraction(0)] * (n - 1), -2 * Fraction(10) ** (400 * n)))


@pytest.mark.parametrize("before", [53, 71])
def test_the_precision_of_flint_is_put_back(before: int) -> None:
    """Global precision is what it was, after an answer and after an error."""
    kept = flint.ctx.prec
    flint.ctx.prec = before
    try:
        roots(poly(1, 1, 2, 2, 3, 5))
        assert flint.ctx.prec == before
        with pytest.raises(EntryError):
            roots((Fraction(1), Fraction(1), Fraction(0), -3 * Fraction(10) ** 1300))
        assert flint.ctx.prec == before
    finally:
        flint.ctx.prec = kept


def test_threads_do_not_disturb_each_other() -> None:
    """Four threads at once get the answers of one, and the precision is put back."""
    before = flint.ctx.prec
    expected = [roots(p) for p in SQUAREFREE]
    found: list[list[tuple[Root, ...]]] = []
    threads = [
        threading.Thread(target=lambda: found.append([roots(p) for p in SQUAREFREE]))
        for _ in range(4)
    ]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert found == [expected] * 4
    assert flint.ctx.prec == before


def test_a_thread_waits_while_another_has_changed_the_precision() -> None:
    """Only one thread at a time may hold FLINT's precision, or it would be put back wrong."""
    before = flint.ctx.prec
    thread = threading.Thread(target=roots, args=(poly(1, 0, 1, -3),))
    with working_precision(before + 100):
        thread.start()
        thread.join(0.2)
        assert thread.is_alive()
        assert flint.ctx.prec == before + 100
    thread.join()
    assert flint.ctx.prec == before


def test_roots_are_frozen_and_pickle() -> None:
    """A root is a plain record: no FLINT inside, equal after a round trip, not to be changed."""
    root = roots(poly(1, 1, 2, 2, 3, 5))[0]
    assert pickle.loads(pickle.dumps(root)) == root
    assert (type(root.value), type(root.radius)) == (complex, float)
    with pytest.raises(AttributeError):
        root.radius = 0.0  # type: ignore[misc]
