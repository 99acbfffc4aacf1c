"""Root enclosures of polynomials and matrices whose roots floating-point arithmetic spoils."""

from fractions import Fraction

import numpy as np
import pytest

from realize import exact, polynomials, stability
from tests.helpers import CONTROLLABLE_OBSERVABLE, Polynomial, plus, times
from tests.published.tools import (
    data,
    derivative,
    diagonal,
    model,
    poly,
    scaled,
    shift,
    unit,
    with_roots,
)

WILKINSON = with_roots(*range(1, 21))
TABLE = data("wilkinson")


def changed(t: Fraction) -> Polynomial:
    """(x - 1)...(x - 20) + t x^19."""
    return plus(WILKINSON, scaled(t, (1, *[0] * 19)))


def enclosed(polynomial: Polynomial) -> list[complex]:
    """The roots with their multiplicity, each proved to lie within a few units of rounding."""
    found: list[complex] = []
    for root in polynomials.roots(polynomial):
        assert root.radius <= 4 * np.spacing(abs(root.value))
        found += [root.value] * root.multiplicity
    return found


def test_coefficients() -> None:
    """R-02: (x - 1)...(x - 20), expanded; and its factors and roots found again.

    Source: Wilkinson 1984 and an encyclopedia text. Published; recomputed.
    """
    coefficients = poly(*TABLE["coefficients"])
    expanded: Polynomial = (Fraction(1),)
    for k in range(1, 21):
        expanded = polynomials.multiply(expanded, poly(1, -k))
    assert expanded == coefficients
    assert dict(polynomials.factor(coefficients)) == {poly(1, -k): 1 for k in range(1, 21)}
    roots = polynomials.roots(coefficients)
    assert [root.value for root in roots] == list(range(1, 21))
    assert all(root.radius == 0.0 for root in roots)


def test_one_coefficient_changed_by_a_bit() -> None:
    """R-01: with -210 changed by 2^-23, ten of the roots turn complex; every digit agrees.

    Source: Wilkinson 1959, 1963, 1984; the roots to five decimals in an encyclopedia text.
    Published; recomputed.
    """
    wanted = [complex(float(text)) for text in TABLE["real_roots_after_the_change"]]
    for real, imaginary in TABLE["pairs_after_the_change"]:
        wanted += [complex(float(real), sign * float(imaginary)) for sign in (1, -1)]
    found = enclosed(changed(Fraction(-1, 2**23)))
    order = sorted(wanted, key=lambda z: (z.real, z.imag))
    assert sorted(found, key=lambda z: (z.real, z.imag)) == order


def test_sensitivities() -> None:
    """R-03: the roots move at the rate -x^19/w'(x): 43 million at 20, 1/19! at 1.

    Source: as above ("about 43000000" read). Published; recomputed.
    """
    slope = polynomials.derivative(WILKINSON)
    assert slope == derivative(WILKINSON)

    def rate(root: int) -> Fraction:
        return -(Fraction(root) ** 19) / polynomials.evaluate(slope, root)

    assert rate(20) == Fraction(-640000000000000000, 14849255421)
    assert rate(1) == Fraction(1, 121645100408832000)
    assert float(rate(16)) == pytest.approx(-2407513979.744, abs=5e-4)
    assert float(rate(15)) == pytest.approx(2119065222.105, abs=5e-4)


@pytest.mark.parametrize(
    ("t", "root", "text"),
    [("-1e10", 1, "0.99999991779379990836"), ("1e-9", 20, "19.950949654306395237")],
)
def test_moved_roots(t: str, root: int, text: str) -> None:
    """R-03: where a huge change leaves the root 1, and a tiny one carries the root 20.

    Source: as above (0.99999991779380 and 19.9509 read). Published; recomputed.
    """
    found = enclosed(changed(Fraction(t)))
    nearest = min(found, key=lambda z: abs(z - root))
    assert nearest == float(text)


@pytest.mark.parametrize(
    ("t", "where"),
    [
        pytest.param("-5.7104889251543614e-10", 18.619103819526815137, id="18-and-19"),
        pytest.param("1.3508821368996105e-10", 15.486499904338720276, id="15-and-16"),
    ],
)
def test_roots_collide(t: str, where: float) -> None:
    """R-04: two real roots meet at 18.6191 and leave the axis; the first collision is at 15.4865.

    Source: as above ("about 18.62" read; the second is ours). Published; recomputed. A part
    in 10^15 to either side of the value given, the pair is real, and then complex.
    """
    value = Fraction(t)
    step = abs(value) * Fraction(1, 10**15)
    before = enclosed(changed(value - step * (1 if value > 0 else -1)))
    after = enclosed(changed(value + step * (1 if value > 0 else -1)))

    def pair(roots: list[complex]) -> list[complex]:
        return sorted(roots, key=lambda z: abs(z - where))[:2]

    assert [z.imag for z in pair(before)] == [0.0, 0.0]
    first, second = pair(after)
    assert first == second.conjugate()
    assert first.imag != 0.0
    assert first.real == pytest.approx(where, abs=1e-12)


def test_close_roots_that_are_well_conditioned() -> None:
    """R-06: (x - 1/2)(x - 1/4)...(x - 2^-20): every root exact.

    Source: Wilkinson's second example, same encyclopedia text. Published; recomputed. Changing
    the coefficient of x^19 relatively by 2^-30 moves no root by more than 136 times that.
    """
    roots = [Fraction(1, 2**k) for k in range(1, 21)]
    p = with_roots(*roots)
    found = polynomials.roots(p)
    assert [root.value for root in found] == [float(r) for r in sorted(roots)]
    assert all(root.radius == 0.0 for root in found)
    moved = enclosed(plus(p, scaled(p[1] / 2**30, (1, *[0] * 19))))
    for root, other in zip(sorted(roots), sorted(moved, key=lambda z: z.real), strict=True):
        assert other.imag == 0.0
        assert abs(other.real - float(root)) <= 136 * 2**-30 * float(root)


def test_matrix_with_a_sensitive_spectrum() -> None:
    """R-08: the matrix with 1e-10 in its corner, through its exact characteristic polynomial.

    Source: Wilkinson 1965, The Algebraic Eigenvalue Problem, pp. 90-91. Memory; recomputed. The
    eigenvalues solve (x - 1)...(x - 20) = 20^19 / 10^10.
    """
    A = diagonal(*range(20, 0, -1)) + 20 * shift(20)
    A[19, 0] = Fraction(1, 10**10)
    parts = exact.kalman_parts(model(A, unit(20, 20), unit(20, 1).T))
    assert parts.dimensions[CONTROLLABLE_OBSERVABLE] == 20
    polynomial = parts.polynomials[CONTROLLABLE_OBSERVABLE]
    assert polynomial == plus(WILKINSON, (Fraction(-(20**19), 10**10),))
    wanted = [complex(float(text)) for text in TABLE["matrix_real_eigenvalues"]]
    for real, imaginary in TABLE["matrix_pairs"]:
        wanted += [complex(float(real), sign * float(imaginary)) for sign in (1, -1)]
    found = enclosed(polynomial)
    assert len(found) == len(wanted) == 20
    for value in wanted:
        nearest = min(found, key=lambda z: abs(z - value))
        assert abs(nearest - value) <= 1e-11 * abs(value)
        found.remove(nearest)


def test_matrix_made_unstable_by_a_tiny_entry() -> None:
    """R-09: 1e-18 in the corner puts an eigenvalue of a stable matrix at 10^(1/20) - 1 > 0.

    Source: Malyshev and Sadkane 1999, On the stability of large matrices, Journal of
    Computational and Applied Mathematics 102. Published; recomputed.
    """
    A = diagonal(*[-1] * 20) + 10 * shift(20).T
    for corner, outside in ((Fraction(0), 0), (Fraction(1, 10**18), 1)):
        A[0, 19] = corner
        parts = exact.kalman_parts(model(A, unit(20, 1), unit(20, 20).T))
        polynomial = parts.polynomials[CONTROLLABLE_OBSERVABLE]
        assert polynomial == plus(times(*[(1, 1)] * 20), (-(10**19) * corner,))
        right = [z for z in enclosed(polynomial) if z.real > 0]
        assert (len(right) > 0) is bool(outside)
        assert stability.is_stable(polynomial, None) is not bool(outside)
        if outside:
            assert max(z.real for z in right) == float("0.12201845430196343559")
