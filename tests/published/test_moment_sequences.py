"""Orders and recurrences of integer and rational sequences taken as Markov parameters.

The first value of a sequence is the first Markov parameter after D = 0.
"""

from collections.abc import Sequence
from fractions import Fraction
from math import comb, factorial, prod
from types import ModuleType

import pytest

from realize import exact
from tests.helpers import Polynomial, characteristic_polynomial
from tests.published.tools import Number, monic, poly, sequence, with_roots


def recurrence(values: Sequence[Number]) -> Polynomial:
    """The characteristic polynomial of the realization; its parameters are the values given."""
    reduction = exact.from_markov_parameters(sequence(values))
    found = exact.markov_parameters(reduction.model, len(values) + 1)
    assert [block[0][0] for block in found[1:]] == [Fraction(v) for v in values]
    polynomial = characteristic_polynomial(reduction.model.A)
    assert len(polynomial) == reduction.order + 1
    return polynomial


def orders(face: ModuleType, values: Sequence[Number]) -> list[int]:
    """The order after each further value."""
    return [
        face.from_markov_parameters(sequence(values[: k + 1])).order for k in range(len(values))
    ]


FIBONACCI = (1, 1, 2, 3, 5, 8, 13, 21)
PRIMES = (2, 3, 5, 7, 11, 13, 17, 19, 23, 29, 31, 37)
THREE_MODES = (150, 3204, 79272, 2245968, 70411680, 2352815424, 81496927872)


def test_fibonacci(face: ModuleType) -> None:
    """P-01: order 2, x^2 - x - 1.

    Source: classical (Kronecker 1881; Ho and Kalman 1966). Common practice; recomputed.
    """
    assert face.from_markov_parameters(sequence(FIBONACCI)).order == 2
    assert recurrence(FIBONACCI) == poly(1, -1, -1)


def test_primes() -> None:
    """P-02: twelve primes, the shortest rational recurrence has order 6.

    Source: manual page of a general computer-algebra system. Published; recomputed.
    """
    assert recurrence(PRIMES) == poly(1, "-14/9", "-7/9", "157/54", "-25/27", "-73/18", "37/9")


def test_primes_profile(face: ModuleType) -> None:
    """P-02: the order after each prime; it jumps by two.

    Source: as above; the profile is ours (recomputed).
    """
    assert orders(face, PRIMES) == [1, 1, 2, 2, 3, 3, 3, 5, 5, 5, 6, 6]


def test_three_modes() -> None:
    """P-03: four terms suggest a quadratic that does not split; seven give 12, 18, 36.

    Source: after Kaltofen and Lee 2003, in a general computer-algebra manual. Published;
    recomputed.
    """
    assert recurrence(THREE_MODES[:4]) == poly(1, "-10662/209", "117288/209")
    cubic = poly(1, -66, 1296, -7776)
    assert cubic == with_roots(12, 18, 36)
    assert recurrence(THREE_MODES) == cubic


def test_three_modes_order(face: ModuleType) -> None:
    """P-03 on both faces: the order of the seven terms.

    Source: as above.
    """
    assert face.from_markov_parameters(sequence(THREE_MODES)).order == 3


def test_eight_terms() -> None:
    """P-04: an order of 4 with large fractions.

    Source: as P-02. Published; recomputed.
    """
    wanted = poly(1, "-36727/11711", "34213/5019", "7024942/35133", "-335813/1673")
    assert recurrence((2, 2, 1, 2, 1, 191, 393, 132)) == wanted


@pytest.mark.parametrize("half", range(1, 13))
def test_reciprocals(half: int) -> None:
    """P-06: 1, 1/2, 1/3, ...: 2N terms have order N, and the poles are Legendre's nodes on [0, 1].

    Source: Kronecker 1881. Common practice; recomputed. The Hankel matrices are Hilbert's. The
    nodes are the roots of sum (-1)^(N-k) C(N, k) C(N + k, k) x^k (Rodrigues).
    """
    values = [Fraction(1, k) for k in range(1, 2 * half + 1)]
    legendre = poly(
        *((-1) ** (half - k) * comb(half, k) * comb(half + k, k) for k in range(half, -1, -1))
    )
    assert recurrence(values) == monic(legendre)


@pytest.mark.parametrize("half", range(1, 6))
def test_reciprocals_on_both_faces(half: int, face: ModuleType) -> None:
    """P-06: 2N terms have order N, while doubles still tell (condition 5e5 at N = 5).

    Source: as above.
    """
    values = [Fraction(1, k) for k in range(1, 2 * half + 1)]
    assert face.from_markov_parameters(sequence(values)).order == half


def hankel_determinants(moments: Sequence[int], count: int) -> list[Fraction]:
    """Determinants of the leading Hankel sections, from the library's orthogonal polynomials.

    The realization of the first 2n moments has the n-th orthogonal polynomial p_n for
    characteristic polynomial, and sum of (coefficients of p_n) times (moments n, n+1, ...) is the
    ratio of the determinants n + 1 and n.
    """
    found = [Fraction(moments[0])]
    for n in range(1, count):
        p = recurrence(moments[: 2 * n])
        assert len(p) == n + 1
        ratio = sum((c * moments[n + n - i] for i, c in enumerate(p)), Fraction(0))
        found.append(found[-1] * ratio)
    return found


def catalan(k: int) -> int:
    """The k-th Catalan number."""
    return comb(2 * k, k) // (k + 1)


@pytest.mark.parametrize(
    ("start", "wanted"),
    [
        (0, [1] * 12),
        (1, [1] * 12),
        (2, [n + 1 for n in range(1, 13)]),
        (3, [5, 14, 30, 55, 91, 140, 204]),
        (6, [132, 4719, 81796, 884884, 6852768]),
    ],
)
def test_catalan_numbers(start: int, wanted: list[int]) -> None:
    """P-07: no finite order; Hankel determinants 1, 1, 1, ... and the tables for later starts.

    Source: OEIS A000108, A335857, A368025; Mays and Wojciechowski 2000. Published; recomputed.
    """
    moments = [catalan(start + k) for k in range(2 * len(wanted))]
    assert hankel_determinants(moments, len(wanted)) == wanted


def test_bell_numbers() -> None:
    """P-08: Hankel determinants are products of factorials.

    Source: Radoux; general literature on sequences. Memory; recomputed.
    """
    bell = [1]
    while len(bell) < 16:
        bell.append(sum(comb(len(bell) - 1, k) * bell[k] for k in range(len(bell))))
    wanted = [1, 1, 2, 12, 288, 34560, 24883200, 125411328000]
    assert wanted == [prod(factorial(k) for k in range(n)) for n in range(1, 9)]
    assert hankel_determinants(bell, 8) == wanted


def test_factorials() -> None:
    """P-09: products of squared factorials; the poles are the nodes of Laguerre.

    Source: classical (Laguerre). Memory; recomputed.
    """
    moments = [factorial(k) for k in range(12)]
    assert hankel_determinants(moments, 6) == [1, 1, 4, 144, 82944, 1194393600]
    # Monic Laguerre polynomial: sum (-1)^(n-k) C(n, k) n!/k! x^k.
    n = 6
    laguerre = poly(
        *((-1) ** (n - k) * comb(n, k) * factorial(n) // factorial(k) for k in range(n, -1, -1))
    )
    assert recurrence(moments) == laguerre


def test_triple_pole(face: ModuleType) -> None:
    """P-10: k^2 2^k has order 3, (x - 2)^3.

    Source: Kronecker's theorem. Common practice; recomputed.
    """
    values = [k * k * 2**k for k in range(8)]
    assert recurrence(values) == with_roots(2, 2, 2)
    assert face.from_markov_parameters(sequence(values)).order == 3


def test_order_is_not_the_rank_of_one_block(face: ModuleType) -> None:
    """P-11: 1, 0, 0, 0, 1 and 0, 0, 0, 1 have order 4, though their square blocks have rank 2, 1.

    Source: Kalman 1979, On partial realizations, transfer functions and canonical forms; Gragg
    and Lindquist 1983. Memory; recomputed.
    """
    for values in ((1, 0, 0, 0, 1), (0, 0, 0, 1)):
        reduction = face.from_markov_parameters(sequence(values))
        assert reduction.order == 4, values
        found = face.markov_parameters(reduction.model, len(values) + 1)
        assert [float(block[0][0]) for block in found[1:]] == pytest.approx(values, abs=1e-12)


def test_orders_jump(face: ModuleType) -> None:
    """P-12: 1, 1, 1, 2, 1, 3, 2: orders after each term 1, 1, 1, 3, 3, 3, 3.

    Source: as above, a sequence in that style. Memory; recomputed.
    """
    assert orders(face, (1, 1, 1, 2, 1, 3, 2)) == [1, 1, 1, 3, 3, 3, 3]


@pytest.mark.parametrize("half", [1, 2, 3, 5, 8, 13, 21, 30])
def test_thue_morse(half: int) -> None:
    """P-13: no Hankel section of the signs of Thue and Morse is singular: 2N terms, order N.

    Source: Allouche, Peyriere, Wen and Wen 1998. Memory; recomputed.
    """
    signs = [(-1) ** k.bit_count() for k in range(2 * half)]
    assert exact.from_markov_parameters(sequence(signs)).order == half
