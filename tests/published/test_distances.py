"""Distances to uncontrollability, bracketed and proved, against values from outside."""

import math
from collections.abc import Callable
from fractions import Fraction
from typing import Any

import numpy as np
import pytest

from realize import Distance, Realization, distance_to_uncontrollability
from tests.published.tools import with_roots

Rows = list[list[Any]]


def pair(A: Rows, B: Rows) -> Realization:
    return Realization(A, B, [[0] * len(A)])


def column(*entries: Any) -> Rows:
    return [[entry] for entry in entries]


def unit_column(size: int, place: int) -> Rows:
    return column(*(int(i == place) for i in range(size)))


def shift(size: int) -> Rows:
    return [[int(j == i + 1) for j in range(size)] for i in range(size)]


def companion(*roots: int) -> tuple[Rows, Rows]:
    """The companion form of a polynomial with these roots, coefficients in the last row."""
    polynomial = with_roots(*roots)
    A = shift(len(roots))
    A[-1] = [-value for value in reversed(polynomial[1:])]
    return A, unit_column(len(roots), len(roots) - 1)


def wilkinson() -> Rows:
    return [[20 - i if i == j else 20 * int(j == i + 1) for j in range(20)] for i in range(20)]


def weak_chain(size: int) -> tuple[Rows, Rows]:
    A = [[0] * size for _ in range(size)]
    for j in range(size - 1):
        for i in range(j + 1):
            A[i][j] = -1
        A[j + 1][j] = 1
    A[0][-1], A[1][-1] = 1, -1
    return A, unit_column(size, 0)


def path(size: int) -> Rows:
    return [[int(abs(i - j) == 1) for j in range(size)] for i in range(size)]


SATELLITE = [[0, 1, 0, 0], [3, 0, 0, 2], [0, 0, 0, 1], [0, -2, 0, 0]]
GAO = [[1, 1, 1], ["0.1", 3, 5], [0, -1, -1]], [[1], ["0.1"], [0]]
PENDULUM = [[0, 1, 0, 0], [0, 0, -1, 0], [0, 0, 0, 1], [0, 0, 5, 0]], column(0, 1, 0, -2)
SPRING = [[0, 0, 1, 0], [0, 0, 0, 1], [-1, 1, 0, 0], [1, -1, 0, 0]], column(0, 0, 1, 0)
HALVES = [[Fraction(int(i == j), 2**i) for j in range(10)] for i in range(10)]

CASES: dict[str, tuple[tuple[Rows, Rows], float, complex | None, float]] = {
    # Gao and Neumann 1993, also Elsner and He 1991, Burke, Lewis, Overton 2004; remembered 0.0392.
    # Memory; recomputed.
    "D-01": (GAO, 0.03923843021870002302, 0.93708466554719585566 + 0.99857141628143869j, 1e-9),
    # Paige 1981, Properties of numerical algorithms related to computing controllability. The
    # model from memory; tau = 2^-10 exactly from above, recomputed from below.
    "D-04": ((HALVES, column(*[1] * 10)), 2.0**-10, 3 / 1024 + 0j, 1e-6),
    # Wilkinson 1965, The Algebraic Eigenvalue Problem; distances recomputed.
    "D-05, last": ((wilkinson(), unit_column(20, 19)), 0.1045508016392249, 28.38697 + 0j, 1e-6),
    "D-05, all": (
        (wilkinson(), column(*[1] * 20)),
        0.3446251714388801,
        23.857142505 + 12.062694379j,
        1e-6,
    ),
    # Chen 1999, Linear System Theory and Design, ch. 6; distance recomputed. Attained at
    # 0.487440611110526546 and at its mirror image.
    "D-06": (PENDULUM, 0.491085563460386638874, None, 1e-9),
    # Brockett 1970, Finite Dimensional Linear Systems; distances recomputed.
    "D-07, tangential": ((SATELLITE, unit_column(4, 3)), 0.352695761861954376801, None, 1e-9),
    "D-07, both": (
        (SATELLITE, [[0, 0], [1, 0], [0, 0], [0, 1]]),
        0.410487010188506779650,
        None,
        1e-9,
    ),
    # Wie and Bernstein 1992, benchmark problems for robust control; distance recomputed.
    "D-08": (SPRING, 0.333097992275700914744, 1.347657628766881563j, 1e-9),
    # Kenney and Laub 1988, Controllability and stability radii for companion form systems; the
    # form from there, distances recomputed.
    "D-09, 3": (companion(*[-1] * 3), 0.277838625750005381947, -0.2348637646103865 + 0j, 1e-9),
    "D-09, 5": (companion(*[-1] * 5), 0.0770501195812814797, -0.1785914349775733 + 0j, 1e-9),
    "D-09, 10": (companion(*[-1] * 10), 0.00267900672743428011, -0.1190433618375734 + 0j, 1e-6),
    # Wilkinson's polynomial in the form of Kenney and Laub; recomputed, the last one twice: a first
    # computation gave 9.856929038964e-8, which the exact upper bound refutes in the tenth digit;
    # with 60 digits sigma at 0.99999999996 is the value here. No lower bound was known before.
    "D-10, 5": (companion(1, 2, 3, 4, 5), 0.00479744141604885571, 0.995780923308117 + 0j, 1e-6),
    "D-10, 10": (companion(*range(1, 11)), 9.8569290364162198912e-8, 0.99999999996 + 0j, 0.1),
    # A chain with fixed ends; common practice, distances recomputed to five digits from below.
    "S-10, 1": ((path(8), unit_column(8, 0)), 0.1068420360633, None, 1e-6),
    "S-10, 2": ((path(8), unit_column(8, 1)), 0.119184265341, None, 1e-6),
    "S-10, 4": ((path(8), unit_column(8, 3)), 0.0839877472159, None, 1e-6),
    # A perfect staircase that hides a near loss; derived here, recomputed.
    "X-01, 5": (weak_chain(5), 0.0969065639624129994, None, 1e-9),
    "X-01, 8": (weak_chain(8), 0.0118517151074824620, None, 1e-6),
    "X-01, 10": (weak_chain(10), 0.00294055646413259780, None, 1e-6),
    # Two modes side by side; derived here.
    "X-02, 1": (([[0, 0], [0, 1]], column(1, 1)), 0.5, 0.5 + 0j, 1e-9),
    "X-02, 2": (([[0, 0], [0, 2]], column(1, 1)), 0.8660254037844386, None, 1e-6),
    "X-02, 10": (([[0, 0], [0, 10]], column(1, 1)), 0.99498743710662, None, 1e-6),
}


@pytest.mark.parametrize("name", CASES)
def test_bracket(name: str) -> None:
    """The proved bracket holds the value, as narrow as was asked for; sources in the table."""
    (A, B), value, point, rtol = CASES[name]
    found = distance_to_uncontrollability(pair(A, B), rtol=rtol)
    assert found.proved
    digits = 1e-12  # the table has at least so many
    assert found.lower <= value * (1 + digits)
    assert found.upper >= value * (1 - digits)
    assert found.upper - found.lower <= rtol * found.upper
    if point is not None:
        # sigma grows like the square of the offset, so the point is good to the root of rtol.
        assert min(abs(found.point - point), abs(found.point.conjugate() - point)) <= (
            2 * math.sqrt(rtol) * max(1, abs(point))
        )


@pytest.mark.parametrize(("size", "rtol"), [(2, 1e-4), (3, 1e-4), (5, 1e-3), (8, 1e-3)])
def test_minima_on_a_whole_circle(size: int, rtol: float) -> None:
    """D-03: tau of the shift is sin(pi / (n + 1)), attained on a circle; the search ends.

    Source: Kenney and Laub 1988 for companion pairs; memory; recomputed.
    """
    found = distance_to_uncontrollability(pair(shift(size), unit_column(size, size - 1)), rtol=rtol)
    assert found.lower <= math.sin(math.pi / (size + 1)) <= found.upper * (1 + 1e-15)
    assert abs(found.point) == pytest.approx(math.cos(math.pi / (size + 1)), abs=0.1)


def exactly_zero(found: Distance, point: complex) -> None:
    assert found.lower == found.upper == found.real_upper == 0.0
    assert found.proved
    assert found.point == point


def test_exactly_uncontrollable() -> None:
    """D-11 and the radial satellite of D-07: zero from the exact path, with the mode.

    Source: Antsaklis and Michel 2006, Linear Systems; Brockett 1970. Memory; recomputed.
    """
    A, B = [[0, -1, 1], [1, -2, 1], [0, 1, -1]], [[1, 0], [1, 1], [1, 2]]
    exactly_zero(distance_to_uncontrollability(pair(A, B)), -2)
    exactly_zero(distance_to_uncontrollability(pair(SATELLITE, unit_column(4, 1))), 0)


def test_far_below_the_roundoff() -> None:
    """X-01 at n = 30: a distance near 3e-9 of a model that no staircase suspects.

    Source: derived here; tau <= 1 / sqrt(1 + (4^(n-1) - 1) / 3).
    """
    found = distance_to_uncontrollability(pair(*weak_chain(30)), rtol=0.5)
    ceiling = 1 / math.sqrt(1 + (4**29 - 1) / 3)
    assert found.proved
    assert 0 < found.lower <= ceiling
    assert 0.5 * found.upper <= found.lower
    assert found.upper <= ceiling


@pytest.mark.parametrize("build", [lambda n: companion(*range(n)), lambda n: companion(*[2] * n)])
def test_companion_pairs_are_never_far(build: Callable[[int], tuple[Rows, Rows]]) -> None:
    """X-03: any companion pair of order n with one input has tau <= sin(pi / n).

    Source: derived here, from D-03 for the first n - 1 rows.
    """
    for n in (3, 4, 6):
        assert distance_to_uncontrollability(pair(*build(n))).lower <= math.sin(math.pi / n)


def test_real_points_alone_overstate() -> None:
    """D-02: on the real line the least singular value of D-01 is 0.17246, more than four times tau.

    Source: as D-01; recomputed. It bounds the distance of the real witness from above.
    """
    found = distance_to_uncontrollability(pair(*GAO))
    assert np.iscomplexobj(found.perturbation[0])
    assert found.upper <= found.real_upper <= 0.1724603218064199696922
