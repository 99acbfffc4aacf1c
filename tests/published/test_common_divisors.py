"""Common factors of polynomials, exactly, as poles and zeros that cancel."""

from fractions import Fraction
from math import gcd
from types import ModuleType

import numpy as np
import pytest

from realize import exact, floating, polynomials
from tests.helpers import ONE, Polynomial, plus, times
from tests.published.tools import (
    assert_transfer,
    chebyshev,
    companion_matrix,
    derivative,
    model,
    poly,
    resultant_size,
    row,
    scaled,
    transfer,
    unit,
    with_roots,
)

pytestmark = pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")

KNUTH_U = poly(1, 0, 1, 0, -3, -3, 8, 2, -5)
KNUTH_V = poly(3, 0, 5, 0, -4, -9, 21)


def test_remainders_that_explode(face: ModuleType) -> None:
    """G-01: two polynomials of Knuth with no common factor: nothing cancels, order 8.

    Source: Knuth, The Art of Computer Programming, vol. 2, section 4.6.1; the remainder
    sequences read in an encyclopedia and in public test files. Published; recomputed.
    """
    fraction = transfer([[(KNUTH_V, KNUTH_U)]])
    found = face.cancel(fraction)
    assert tuple(found.common) == (1,)
    assert len(found.transfer.denominators[0][0]) == 9
    assert face.minimal(fraction).order == 8


def test_remainders_that_explode_resultant() -> None:
    """G-01: the resultant is 260708 = 2^2 * 7 * 9311, so only these primes mislead.

    Source: as above.
    """
    assert resultant_size(KNUTH_U, KNUTH_V) == 260708 == 2**2 * 7 * 9311


CORLESS_F = poly(1, "5.503", "9.765", "7.647", "2.762", "0.37725")
CORLESS_G = poly(1, "-2.993", "-0.7745", "2.007", "0.7605")


def test_near_common_factor_is_not_common() -> None:
    """G-03: exactly coprime, with g = (x + 1/2)(x + 507/1000)(x - 1)(x - 3).

    Source: Corless, Gianni, Trager and Watt 1995, The singular value decomposition for polynomial
    systems. Memory; recomputed. The nearest pair with a common factor of degree two is at
    distance 1.25e-4, which an exact answer must not mistake for zero.
    """
    found = exact.cancel(transfer([[(CORLESS_G, CORLESS_F)]]))
    assert found.common == ONE
    assert polynomials.gcd(CORLESS_F, CORLESS_G) == ONE
    assert exact.minimal(transfer([[(CORLESS_G, CORLESS_F)]])).order == 5
    assert dict(polynomials.factor(CORLESS_G)) == {
        poly(1, "1/2"): 1,
        poly(1, "507/1000"): 1,
        poly(1, -1): 1,
        poly(1, -3): 1,
    }
    assert float(resultant_size(CORLESS_F, CORLESS_G)) == pytest.approx(
        0.000111488174372037107, rel=1e-15
    )


def test_near_common_factor_is_reported_as_near(face: ModuleType) -> None:
    """G-03: the near pair is named as near, and is still not common.

    Source: as above. Some change of 5.41e-5 (recomputed), against coefficients of norm 15, gives
    a common root, though the nearest zero and pole are five parts in a hundred away.
    """
    found = face.cancel(transfer([[(CORLESS_G, CORLESS_F)]]))
    assert tuple(found.common) == (1,)
    assert found.near
    assert min(pair.change for pair in found.near) < 1e-4


RATIONAL_CIRCLE = [
    # (cos, sin) of angles with a rational half-angle tangent
    ((1 - t * t) / (1 + t * t), 2 * t / (1 + t * t))
    for t in (Fraction(1, 5), Fraction(2, 5), Fraction(3, 5), Fraction(1), Fraction(8, 5))
]


@pytest.mark.parametrize("half", [1, 3, 5])
def test_roots_on_two_circles(half: int) -> None:
    """G-05, at rational points of the circle: the factors shared are those of the inner circle.

    Source: the construction is that of Zeng 2011, The numerical greatest common divisor of
    univariate polynomials, and Bini and Boito 2007 (memory); its own nodes are algebraic, these
    are ours. The common factor has degree 2k. Note the last factor of the source, (x + r)^2.
    """
    inner, outer = Fraction(1, 2), Fraction(3, 2)

    def around(radius: Fraction, nodes: list[tuple[Fraction, Fraction]]) -> Polynomial:
        return times(*((1, -2 * radius * c, radius**2 * (c**2 + s**2)) for c, s in nodes))

    low = RATIONAL_CIRCLE[:half]
    high = [(-c, s) for c, s in RATIONAL_CIRCLE[: half - 1]] + [(Fraction(-1), Fraction(0))]
    p = times(around(inner, low), around(outer, high))
    q = times(around(inner, low), around(inner, high))
    found = exact.cancel(transfer([[(q, p)]]))
    assert found.common == around(inner, low)
    assert exact.minimal(transfer([[(q, p)]])).order == 2 * half
    assert floating.minimal(transfer([[(q, p)]])).order == 2 * half


MULTIPLICITIES = [
    pytest.param((2, 1, 1, 0), 1, id="2-1-1-0"),
    pytest.param((3, 2, 1, 0), 3, id="3-2-1-0"),
    pytest.param((4, 3, 2, 1), 6, id="4-3-2-1"),
    pytest.param((5, 3, 2, 1), 7, id="5-3-2-1"),
    pytest.param((9, 6, 4, 2), 17, id="9-6-4-2"),
    pytest.param((20, 14, 10, 5), 45, id="20-14-10-5"),
    pytest.param((80, 60, 40, 20), 196, id="80-60-40-20"),
    pytest.param((100, 60, 40, 20), 216, id="100-60-40-20"),
]


@pytest.mark.parametrize(("times_each", "degree"), MULTIPLICITIES)
def test_polynomial_and_its_derivative(times_each: tuple[int, ...], degree: int) -> None:
    """G-06: p and p' share every root once less than p has it.

    Source: test sets of Zeng for multiple roots and common divisors (memory; recomputed). The
    last has coefficients of 318 bits.
    """
    roots = [k + 1 for k, count in enumerate(times_each) for _ in range(count)]
    p = with_roots(*roots)
    wanted = with_roots(*(k + 1 for k, c in enumerate(times_each) for _ in range(c - 1)))
    found = exact.cancel(transfer([[(derivative(p), p)]]))
    assert found.common == wanted
    assert len(found.common) - 1 == degree
    assert dict(found.factors) == {
        poly(1, -k - 1): count - 1 for k, count in enumerate(times_each) if count > 1
    }
    # What is left is the sum of (how often)/(x - root).
    distinct = [k + 1 for k, count in enumerate(times_each) if count]
    left = with_roots(*distinct)
    numerator = poly(0)
    for k, count in enumerate(times_each):
        if count:
            others = with_roots(*(root for root in distinct if root != k + 1))
            numerator = plus(numerator, scaled(count, others))
    assert_transfer(found.transfer, [[(numerator, left)]])


@pytest.mark.parametrize("times_each", [(2, 1, 1, 0), (3, 2, 1, 0), (4, 3, 2, 1), (9, 6, 4, 2)])
def test_polynomial_and_its_derivative_as_models(times_each: tuple[int, ...]) -> None:
    """G-06: p'/p as a model keeps one state for each different root; sums of powers come out.

    Source: as above; the Markov parameters of p'/p are the power sums of the roots (Newton).
    """
    roots = [k + 1 for k, count in enumerate(times_each) for _ in range(count)]
    p = with_roots(*roots)
    reduction = exact.minimal(transfer([[(derivative(p), p)]]))
    assert reduction.order == len(set(roots))
    parameters = exact.markov_parameters(reduction.model, 8)
    assert [block[0][0] for block in parameters] == [
        0,
        *(sum(root**k for root in roots) for k in range(7)),
    ]


@pytest.mark.parametrize("degree", [3, 20, 200])
def test_degree_of_the_divisor_is_underestimated(degree: int) -> None:
    """G-07: the two cofactors share x^2 + 1, so the common factor has degree n + 2, not n.

    Source: Zeng 2011; Bini and Boito 2007, as remembered; the sign pattern may differ in print.
    Memory; recomputed.
    """
    rng = np.random.default_rng(degree)
    u = poly(1, *(int(v) for v in rng.integers(-5, 6, size=degree)))
    p = times(u, (1, 1, 1, 1))
    q = times(u, (-1, 1, -1, 1))
    found = exact.cancel(transfer([[(q, p)]]))
    assert found.common == times(u, (1, 0, 1))
    assert_transfer(found.transfer, [[((-1, 1), (1, 1))]])


@pytest.mark.parametrize("high", range(2, 16))
def test_chebyshev_polynomials(high: int) -> None:
    """G-08: gcd(T_m, T_n) is T_g when m/g and n/g are both odd, else 1; gcd(U, U) is U_g-1.

    Source: Rivlin, Chebyshev Polynomials; Jacobs, Rayes and Trevisan 2011, The resultant of
    Chebyshev polynomials. Memory; recomputed.
    """
    for low in range(1, high):
        g = gcd(low, high)
        found = exact.cancel(transfer([[(chebyshev(low), chebyshev(high))]]))
        both_odd = low // g % 2 == 1 and high // g % 2 == 1
        wanted = chebyshev(g) if both_odd else ONE
        assert found.common == scaled(1 / wanted[0], wanted), low
        second = [chebyshev(k - 1, second=True) for k in (low, high, g)]
        found = exact.cancel(transfer([[(second[0], second[1])]]))
        assert found.common == scaled(1 / second[2][0], second[2]), low


@pytest.mark.parametrize(("low", "high"), [(4, 6), (6, 9), (5, 7), (12, 18), (1, 40), (30, 30)])
def test_roots_of_unity(low: int, high: int) -> None:
    """G-09: gcd(x^m - 1, x^n - 1) = x^gcd(m, n) - 1.

    Source: common practice.
    """

    def power(n: int) -> Polynomial:
        return poly(1, *[0] * (n - 1), -1)

    found = exact.cancel(transfer([[(power(low), power(high))]], sampling_period=1))
    assert found.common == power(gcd(low, high))
    reduced = exact.minimal(transfer([[(power(low), power(high))]], sampling_period=1))
    assert reduced.order == high - gcd(low, high)


def mignotte(size: int, a: int) -> Polynomial:
    """x^n - 2 (a x - 1)^2."""
    return plus(poly(1, *[0] * size), scaled(-2, times((a, -1), (a, -1))))


@pytest.mark.parametrize(("size", "a"), [(10, 10), (20, 10), (20, 100), (30, 100)])
def test_poles_close_to_a_zero(size: int, a: int) -> None:
    """G-10: resultant 1, so exactly coprime, with two poles closer to a zero than doubles see.

    Source: Mignotte 1982, Some useful bounds. Memory; recomputed.
    """
    P = mignotte(size, a)
    assert resultant_size(P, (a, -1)) == 1
    found = exact.cancel(transfer([[((a, -1), P)]]))
    assert found.common == ONE
    assert exact.minimal(transfer([[((a, -1), P)]])).order == size
    # Seen through the companion pair, too: nothing is hidden.
    system = model(companion_matrix(P), unit(size, size), row(-1, a, *[0] * (size - 2)))
    assert exact.staircase(system, side="output").dimension == size


@pytest.mark.parametrize(
    ("size", "a", "separation"),
    [(10, 10, 1.4142135648479688e-6), (20, 10, 1.4142135623730950498e-11)],
)
def test_separation_of_two_poles(size: int, a: int, separation: float) -> None:
    """G-10: the two real poles straddle 1/a, about sqrt(2) a^(-(n+2)/2) apart.

    Source: as above. Doubles near 0.1 are 1.4e-17 apart, which limits what can be read off them.
    """
    near = [
        root
        for root in polynomials.roots(mignotte(size, a))
        if abs(root.value - 1 / a) < 1e-3 and root.value.imag == 0
    ]
    assert [root.multiplicity for root in near] == [1, 1]
    low, high = (root.value.real for root in near)
    assert low < 1 / a < high
    assert high - low == pytest.approx(separation, abs=2 * 1.4e-17)
