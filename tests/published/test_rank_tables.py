"""Ranks, determinants and resultants with published values, as questions about models."""

from fractions import Fraction
from math import gcd, prod
from types import ModuleType

import numpy as np
import pytest

import realize
from realize import Realization, exact, floating, polynomials
from tests.helpers import CONTROLLABLE_OBSERVABLE, ONE, identity, times, zeros
from tests.published.tools import (
    chebyshev,
    derivative,
    matrix,
    model,
    poly,
    resultant_size,
    row,
    transfer,
)

pytestmark = pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")

RUMP = matrix(
    [
        [-5046135670319638, -3871391041510136, -5206336348183639, -6745986988231149],
        [-640032173419322, 8694411469684959, -564323984386760, -2807912511823001],
        [-16935782447203334, -18752427538303772, -8188807358110413, -14820968618548534],
        [-1069537498856711, -14079150289610606, 7074216604373039, 7257960283978710],
    ]
)


def constant_term(A: np.ndarray) -> Fraction:
    """The constant term of the characteristic polynomial, which is +-det A."""
    size = A.shape[0]
    parts = exact.kalman_parts(model(A, identity(size), identity(size)))
    assert parts.dimensions[CONTROLLABLE_OBSERVABLE] == size
    return parts.polynomials[CONTROLLABLE_OBSERVABLE][-1]


def test_determinant_one_condition_1e65() -> None:
    """K-01: every entry is a double, the determinant is 1, and the condition is 6.4e64.

    Source: matrix of S. M. Rump, quoted in a release note on verified linear systems. Published;
    recomputed. A double-precision factorisation finds the determinant 0.
    """
    assert constant_term(RUMP) == 1
    assert all(int(float(v)) == v for v in RUMP.ravel())
    system = model(zeros(4, 4), RUMP, identity(4))
    assert exact.staircase(system).stairs == (4,)
    # Without the dynamics, only rank 3 is within reach of doubles.
    assert floating.staircase(system).dimension == 3


def test_determinant_one_condition_1e65_examined() -> None:
    """K-01 as doubles: both readings are full, the floating path is not, and it is said.

    Source: as above.
    """
    system = Realization(np.zeros((4, 4)), RUMP.astype(float), np.eye(4))
    found = realize.examine(system)
    assert found.minimal_order["stored"] == 4
    assert found.minimal_order["written"] == 4
    assert found.floating_order == 3
    assert not found.paths_agree
    assert found.cutoff_ranges["stored"] is None
    # A model of order 3 lies within rounding of the numbers given.
    assert found.answer.order == 3
    assert found.answer.basis == "nearest"


HILBERT = {
    1: 1,
    2: 12,
    3: 2160,
    4: 6048000,
    5: 266716800000,
    6: 186313420339200000,
    7: 2067909047925770649600000,
    8: 365356847125734485878112256000000,
    9: 1028781784378569697887052962909388800000000,
    10: 46206893947914691316295628839036278726983680000000000,
}


@pytest.mark.parametrize("size", HILBERT)
def test_hilbert_matrix(size: int) -> None:
    """K-02: 1/det of the Hilbert matrices, through exact characteristic polynomials.

    Source: OEIS A005249. Published; recomputed.
    """
    A = matrix([[Fraction(1, i + j + 1) for j in range(size)] for i in range(size)])
    assert constant_term(A) == Fraction((-1) ** size, HILBERT[size])


def ones_over_minus_ones(size: int) -> np.ndarray:
    """Unit upper triangle with -1 above the diagonal."""
    return matrix([[(j == i) - (j > i) for j in range(size)] for i in range(size)])


@pytest.mark.parametrize("size", [5, 10, 20, 60, 100])
def test_healthy_pivots_and_a_singular_matrix_nearby(size: int) -> None:
    """K-06: all pivots 1, full rank; adding -2^(2-n) in one corner makes it exactly singular.

    Source: Gragg and Stewart 1976; Golub and Van Loan, Matrix Computations. Memory; recomputed.
    """
    T = ones_over_minus_ones(size)
    assert exact.staircase(model(zeros(size, size), T, identity(size))).stairs == (size,)
    T[size - 1, 0] = -(Fraction(2) ** (2 - size))
    singular = model(zeros(size, size), T, identity(size))
    assert exact.staircase(singular).stairs == (size - 1,)
    assert exact.minimal(singular).order == size - 1


@pytest.mark.parametrize("size", [5, 10])
def test_healthy_pivots_in_floats(size: int, face: ModuleType) -> None:
    """K-06 where doubles still separate the two cases (smallest singular value 0.0029 at n = 10).

    Source: as above.
    """
    T = ones_over_minus_ones(size)
    assert face.staircase(model(zeros(size, size), T, identity(size))).dimension == size
    T[size - 1, 0] = -(Fraction(2) ** (2 - size))
    assert face.staircase(model(zeros(size, size), T, identity(size))).dimension == size - 1


def test_healthy_pivots_examined() -> None:
    """K-06 at n = 40: singular values down to 2.7e-12, so a cutoff decides, and it is shown.

    Source: as above. The cutoff must lie below 2.72848410531878e-12 (for the matrix unscaled) to
    find the exact rank 40.
    """
    size = 40
    T = ones_over_minus_ones(size)
    values = np.linalg.svd(T.astype(float), compute_uv=False)
    assert values[-1] == pytest.approx(2.72848410531878e-12, rel=1e-3)
    assert values[-2] > 1.4
    found = realize.examine(
        Realization(np.zeros((size, size)), T.astype(float), np.eye(size)), readings=("stored",)
    )
    assert found.minimal_order["stored"] == size
    assert found.floating_order == size - 1


RESULTANTS_OF_CHEBYSHEV = [
    (0,),
    (-1, 0),
    (0, -4, 0),
    (1, 16, 64, 0),
    (0, -16, 0, 4096, 0),
    (-1, 0, -4096, 65536, -1048576, 0),
    (0, -64, 0, 262144, 0, -1073741824, 0),
    (1, 256, 16384, 16777216, 268435456, 68719476736, 4398046511104, 0),
]


@pytest.mark.parametrize("n", range(1, 9))
def test_resultants_of_chebyshev_polynomials(n: int) -> None:
    """K-09: |res(T_k, T_n)|, from observability matrices; zero exactly where modes are hidden.

    Source: OEIS A054375; Jacobs, Rayes and Trevisan 2011. Published; recomputed.
    """
    for k, wanted in enumerate(RESULTANTS_OF_CHEBYSHEV[n - 1], start=1):
        assert resultant_size(chebyshev(n), chebyshev(k)) == abs(wanted), k
        fraction = transfer([[(chebyshev(k), chebyshev(n))]])
        assert (exact.minimal(fraction).order == n) is (wanted != 0), k
        g = gcd(k, n)
        if wanted:
            assert abs(wanted) == 2 ** ((k - 1) * (n - 1) + g - 1)


@pytest.mark.parametrize(
    ("n", "wanted"),
    [
        (1, 1),
        (2, 1),
        (3, 37),
        (4, 289),
        (5, 411701),
        (6, 28976689),
        (7, 1273783660297),
        (8, 870606927590401),
        (9, 1051623015879083528521),
    ],
)
def test_resultants_with_roots_of_unity(n: int, wanted: int) -> None:
    """K-10: |res(x^n - 1, T_n)|, a biproper fraction.

    Source: OEIS A086840. Published; recomputed.
    """
    assert resultant_size(poly(1, *[0] * (n - 1), -1), chebyshev(n)) == wanted


@pytest.mark.parametrize(
    ("n", "wanted"),
    [(1, 1), (2, 16), (3, 2048), (4, 1638400), (5, 7247757312), (6, 164995463643136)],
)
def test_discriminants_of_the_second_kind(n: int, wanted: int) -> None:
    """K-11: disc U_n = |res(U_n, U_n')| / lead, = (n + 1)^(n - 2) 2^(n^2).

    Source: OEIS A086804. Published; recomputed.
    """
    U = chebyshev(n, second=True)
    assert resultant_size(U, derivative(U)) / U[0] == wanted
    assert wanted * (n + 1) ** 2 == (n + 1) ** n * 2 ** (n * n)


@pytest.mark.parametrize("n", range(2, 9))
def test_discriminants_of_the_first_kind(n: int) -> None:
    """K-12: disc T_n = 2^((n-1)^2) n^n.

    Source: Rivlin 1990, Chebyshev Polynomials. Memory; recomputed.
    """
    T = chebyshev(n)
    assert resultant_size(T, derivative(T)) / T[0] == 2 ** ((n - 1) ** 2) * n**n


@pytest.mark.parametrize("n", range(2, 7))
@pytest.mark.parametrize(("a", "b"), [("1", "1"), ("-3", "2"), ("2/3", "-5"), ("0", "7/2")])
def test_discriminants_of_trinomials(n: int, a: str, b: str) -> None:
    """K-13: |disc(x^n + a x + b)| = |n^n b^(n-1) + (-1)^(n-1) (n-1)^(n-1) a^n|.

    Source: classical. Common practice; recomputed. It vanishes exactly where p'/p loses a state.
    """
    x, y = Fraction(a), Fraction(b)
    middle = [Fraction(0)] * (n - 2)
    p = poly(1, *middle, x, y)
    wanted = abs(n**n * y ** (n - 1) + (-1) ** (n - 1) * (n - 1) ** (n - 1) * x**n)
    assert resultant_size(p, derivative(p)) == wanted
    reduced = exact.minimal(transfer([[(derivative(p), p)]]))
    assert (reduced.order == n) is (wanted != 0)


def cyclotomic(n: int) -> tuple[Fraction, ...]:
    """Phi_n: what x^n - 1 has beyond the Phi_d of its divisors."""
    rest = poly(1, *[0] * (n - 1), -1)
    for d in range(1, n):
        if n % d == 0:
            rest = polynomials.divide_exact(rest, cyclotomic(d))
    return rest


def test_resultants_of_cyclotomic_polynomials() -> None:
    """K-14: |res(Phi_m, Phi_n)| is p^phi(n) when m/n is a power of the prime p, else 1.

    Source: Apostol 1970. Memory; recomputed. So different ones never cancel.
    """
    for m in range(2, 16):
        for n in range(1, m):
            high, low = cyclotomic(m), cyclotomic(n)
            totient = sum(1 for k in range(1, n + 1) if gcd(k, n) == 1)
            ratio, rest = divmod(m, n)
            primes = [
                p
                for p in range(2, ratio + 1)
                if ratio % p == 0 and prod(p % q for q in range(2, p))
            ]
            power = rest == 0 and len(primes) == 1
            below, above = (high, low) if len(low) <= len(high) else (low, high)
            size = resultant_size(below, above)
            assert size == (primes[0] ** totient if power else 1), (m, n)


@pytest.mark.parametrize("n", [12, 30, 36])
def test_factors_of_unity(n: int) -> None:
    """K-14: x^n - 1 has one irreducible factor for each divisor of n.

    Source: classical.
    """
    factors = polynomials.factor(poly(1, *[0] * (n - 1), -1))
    divisors = [d for d in range(1, n + 1) if n % d == 0]
    assert dict(factors) == {cyclotomic(d): 1 for d in divisors}
    assert times(*(f for f, _ in factors)) == poly(1, *[0] * (n - 1), -1)
    system = exact.companion(transfer([[(ONE, poly(1, *[0] * (n - 1), -1))]], sampling_period=1))
    assert exact.staircase(system).dimension == n
    assert (
        exact.staircase(
            Realization(system.A, system.B, row(*[0] * n), sampling_period=1), side="output"
        ).dimension
        == 0
    )
