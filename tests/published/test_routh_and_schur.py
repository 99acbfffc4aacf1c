"""Exact stability of textbook polynomials, counted, located, and as hidden parts of models."""

from fractions import Fraction
from typing import NamedTuple

import pytest

import realize
from realize import polynomials, stability
from tests.helpers import Polynomial, times
from tests.published.tools import (
    block_diagonal,
    companion_matrix,
    matrix,
    model,
    poly,
    unit,
    value_at,
    with_roots,
)


class Case(NamedTuple):
    """A polynomial, its time domain, and how many roots lie inside, on and outside."""

    polynomial: Polynomial
    period: int | None
    inside: int
    boundary: int
    outside: int


CASES = {
    # Ogata and many course notes; one note that was read calls it stable. Published; recomputed.
    "H-01": Case(poly(1, 2, 3, 4, 5), None, 2, 0, 2),
    # Ogata, Modern Control Engineering. Memory; recomputed.
    "H-02": Case(poly(1, 2, 24, 48, -25, -50), None, 2, 2, 1),
    # A course note: stable for 0 < K < 70. Published; recomputed.
    "H-03 K=-1": Case(poly(1, 7, 10, -1), None, 2, 0, 1),
    "H-03 K=0": Case(poly(1, 7, 10, 0), None, 2, 1, 0),
    "H-03 K=1/1000": Case(poly(1, 7, 10, "1/1000"), None, 3, 0, 0),
    "H-03 K=69.999": Case(poly(1, 7, 10, "69.999"), None, 3, 0, 0),
    "H-03 K=70": Case(poly(1, 7, 10, 70), None, 1, 2, 0),
    "H-03 K=70.001": Case(poly(1, 7, 10, "70.001"), None, 1, 0, 2),
    # Ogata, Kuo and similar textbooks. Memory; recomputed.
    "H-04 zero row": Case(poly(1, 2, 1, 2), None, 1, 2, 0),
    "H-04 zero in the column": Case(poly(1, 0, -3, 2), None, 1, 0, 2),
    "H-04 zero, nonzero row": Case(poly(1, 1, 2, 2, 3, 5), None, 3, 0, 2),
    "H-04 four on the axis": Case(poly(1, 2, 8, 12, 20, 16, 16), None, 2, 4, 0),
    # Ogata, Discrete-Time Control Systems. Memory; recomputed.
    "H-05": Case(poly(1, "-1.2", "0.07", "0.3", "-0.08"), 1, 4, 0, 0),
    "H-06 critical": Case(poly(1, "-1.1", "-0.1", "0.2"), 1, 2, 1, 0),
    "H-06 outside": Case(poly(1, "-1.3", "-0.08", "0.24"), 1, 2, 0, 1),
    # Textbooks on the Jury test: the test at the end points alone is not enough.
    # Memory; recomputed.
    "H-07": Case(poly(2, 7, 10, 4, 1), 1, 2, 0, 2),
}


@pytest.mark.parametrize("name", CASES)
def test_counts(name: str) -> None:
    """H-01 to H-07: roots inside, on the boundary and outside, counted without finding them."""
    case = CASES[name]
    counts = stability.root_counts(case.polynomial, case.period)
    assert (counts.inside, counts.boundary, counts.outside) == case[2:]
    only_inside = case.boundary == case.outside == 0
    assert stability.is_stable(case.polynomial, case.period) is only_inside


@pytest.mark.parametrize("name", CASES)
def test_located_roots(name: str) -> None:
    """H-01 to H-07: the same counts, from the roots found and located one by one."""
    case = CASES[name]
    counts = dict.fromkeys(("inside", "boundary", "outside"), 0)
    for located in stability.locate(case.polynomial, case.period):
        counts[str(located.region)] += located.root.multiplicity
    assert tuple(counts.values()) == case[2:]


@pytest.mark.parametrize("name", CASES)
def test_hidden_part(name: str) -> None:
    """H-01 to H-07: hidden in a model, the polynomial decides what may be said of it."""
    case = CASES[name]
    size = len(case.polynomial) - 1
    A = block_diagonal(companion_matrix(case.polynomial), matrix([["-1/5"]]))
    system = model(
        A, unit(size + 1, size + 1), unit(size + 1, size + 1).T, sampling_period=case.period
    )
    found = realize.examine(system)
    assert found.minimal_order == {"given": 1}
    answer = "yes" if case.inside == size else "no"
    assert found.stabilizable == answer
    assert found.detectable == answer
    counts = dict.fromkeys(("stable", "marginal", "unstable"), 0)
    for mode in found.modes:
        if mode.part != "controllable, observable":
            counts[str(mode.stability)] += mode.multiplicity
    assert tuple(counts.values()) == case[2:]
    cautions = " ".join(found.cautions)
    assert ("unstable" in cautions) is (case.outside > 0)
    assert ("marginal" in cautions) is (case.boundary > 0)


@pytest.mark.parametrize(
    ("name", "factors"),
    [
        ("H-02", [(1, -1), (1, 1), (1, 2), (1, 0, 25)]),
        ("H-04 zero row", [(1, 2), (1, 0, 1)]),
        ("H-04 zero in the column", [(1, -1), (1, -1), (1, 2)]),
        ("H-04 four on the axis", [(1, 0, 2), (1, 0, 4), (1, 2, 2)]),
        ("H-05", [(1, "-1/2"), (1, "1/2"), (1, "-4/5"), (1, "-2/5")]),
        ("H-06 critical", [(1, -1), (1, "-1/2"), (1, "2/5")]),
        ("H-06 outside", [(1, "-6/5"), (1, "-1/2"), (1, "2/5")]),
    ],
)
def test_factors(name: str, factors: list[tuple[int | str, ...]]) -> None:
    """H-02, H-04 to H-06: the factors of the textbooks, irreducible and with multiplicity."""
    expected: dict[Polynomial, int] = {}
    for coefficients in factors:
        factor = poly(*coefficients)
        expected[factor] = expected.get(factor, 0) + 1
    assert dict(polynomials.factor(CASES[name].polynomial)) == expected
    assert times(*factors) == CASES[name].polynomial


def upper(name: str) -> list[complex]:
    """The roots with a positive imaginary part, by real part."""
    found = [root.value for root in polynomials.roots(CASES[name].polynomial)]
    return sorted((z for z in found if z.imag > 0), key=lambda z: z.real)


def test_right_half_plane_roots() -> None:
    """H-01 and H-04: the pairs in the right half plane, to the digits given."""
    pair = upper("H-01")[-1]
    assert pair.real == pytest.approx(0.287815479558, rel=1e-11)
    assert pair.imag == pytest.approx(1.41609308017, rel=1e-11)
    pair = upper("H-04 zero, nonzero row")[-1]
    assert pair.real == pytest.approx(0.720651518332, rel=1e-11)
    assert pair.imag == pytest.approx(1.16563663217, rel=1e-11)


def test_end_points_are_not_enough() -> None:
    """H-05 to H-07: the values at 1 and -1, and the moduli that they fail to show."""

    def ends(name: str) -> tuple[Fraction, Fraction]:
        p = CASES[name].polynomial
        assert polynomials.evaluate(p, 1) == value_at(p, 1)
        return polynomials.evaluate(p, 1), polynomials.evaluate(p, -1)

    assert ends("H-05") == (Fraction(9, 100), Fraction(189, 100))
    assert ends("H-06 critical")[0] == 0
    assert ends("H-06 outside")[0] == Fraction(-7, 50)
    assert ends("H-07") == (24, 2)
    low, high = sorted(abs(z) for z in upper("H-07"))
    assert high == pytest.approx(1.86816782936433, rel=1e-14)
    assert low == pytest.approx(0.378502814400327, rel=1e-14)


def test_hidden_double_integrator_grows() -> None:
    """Two integrators in a row, hidden, grow without a push: unstable, not marginal.

    Source: common practice. Side by side they stay where they are.
    """
    chain = model(
        block_diagonal(matrix([[0, 1], [0, 0]]), matrix([[-1]])), unit(3, 3), unit(3, 3).T
    )
    found = realize.examine(chain)
    hidden = [mode for mode in found.modes if mode.part != "controllable, observable"]
    assert {str(mode.stability) for mode in hidden} == {"unstable"}
    beside = model(
        block_diagonal(matrix([[0, 0], [0, 0]]), matrix([[-1]])), unit(3, 3), unit(3, 3).T
    )
    found = realize.examine(beside)
    hidden = [mode for mode in found.modes if mode.part != "controllable, observable"]
    assert {str(mode.stability) for mode in hidden} == {"marginal"}
    assert (
        with_roots(0, 0)
        == realize.exact.kalman_parts(beside).polynomials["uncontrollable, unobservable"]
    )
