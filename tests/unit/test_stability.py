"""Counting and locating roots with respect to the stability boundary, and the cautions."""

from __future__ import annotations

import cmath
import math
import pickle
from collections import Counter
from dataclasses import dataclass
from fractions import Fraction

import flint
import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize import stability
from realize.errors import EntryError
from realize.polynomials import (
    ONE,
    ZERO,
    Box,
    Polynomial,
    add,
    degree,
    multiply,
    power,
    roots,
    text,
)
from realize.stability import (
    Located,
    Region,
    RootCounts,
    Stability,
    _circle_gap,
    computed_stability,
    damping,
    hidden_cautions,
    is_stable,
    judge,
    locate,
    root_counts,
    time_constant,
)

SIDES = (Region.INSIDE, Region.BOUNDARY, Region.OUTSIDE)


def poly(*coefficients: int | str | Fraction) -> Polynomial:
    """A polynomial from its coefficients, descending powers."""
    return tuple(Fraction(c) for c in coefficients)


def product(*polynomials: Polynomial) -> Polynomial:
    """The product of all."""
    result = ONE
    for p in polynomials:
        result = multiply(result, p)
    return result


def counts(inside: int, boundary: int, outside: int) -> RootCounts:
    """Short for the record."""
    return RootCounts(inside=inside, boundary=boundary, outside=outside)


def counts_located(located: tuple[Located, ...]) -> RootCounts:
    """Multiplicities added up by region."""
    tally: Counter[Region] = Counter()
    for each in located:
        tally[each.region] += each.root.multiplicity
    return counts(*[tally[region] for region in SIDES])


def both(p: Polynomial, sampling_period: int | None) -> RootCounts:
    """The counts, after both methods have agreed on them."""
    counted = root_counts(p, sampling_period)
    assert counts_located(locate(p, sampling_period)) == counted, text(p)
    return counted


# Published examples. H-01 to H-04 are continuous, H-05 to H-07 discrete.

CONTINUOUS = [
    # Many course notes; Ogata. Published; recomputed.
    pytest.param(poly(1, 2, 3, 4, 5), counts(2, 0, 2), id="H-01"),
    # Ogata, "Modern Control Engineering". From memory; recomputed: (s-1)(s+1)(s+2)(s^2+25).
    pytest.param(poly(1, 2, 24, 48, -25, -50), counts(2, 2, 1), id="H-02"),
    # Course note. Published; recomputed: stable for 0 < K < 70.
    pytest.param(poly(1, 7, 10, "699999/10000"), counts(3, 0, 0), id="H-03 below 70"),
    pytest.param(poly(1, 7, 10, 70), counts(1, 2, 0), id="H-03 at 70"),
    pytest.param(poly(1, 7, 10, "700001/10000"), counts(1, 0, 2), id="H-03 above 70"),
    pytest.param(poly(1, 7, 10, 0), counts(2, 1, 0), id="H-03 at 0"),
    pytest.param(poly(1, 7, 10, "-1/10000"), counts(2, 0, 1), id="H-03 below 0"),
    # Ogata, Kuo and similar textbooks. From memory; recomputed.
    pytest.param(poly(1, 2, 1, 2), counts(1, 2, 0), id="H-04 zero row"),
    pytest.param(poly(1, 0, -3, 2), counts(1, 0, 2), id="H-04 zero in the first column"),
    pytest.param(poly(1, 1, 2, 2, 3, 5), counts(3, 0, 2), id="H-04 first-column zero"),
    pytest.param(poly(1, 2, 8, 12, 20, 16, 16), counts(2, 4, 0), id="H-04 four on the axis"),
]
DISCRETE = [
    # Ogata, "Discrete-Time Control Systems", Jury example. From memory; recomputed.
    pytest.param(poly(1, "-1.2", "0.07", "0.3", "-0.08"), counts(4, 0, 0), id="H-05"),
    # Same source: critical, and unstable.
    pytest.param(poly(1, "-1.1", "-0.1", "0.2"), counts(2, 1, 0), id="H-06 critical"),
    pytest.param(poly(1, "-1.3", "-0.08", "0.24"), counts(2, 0, 1), id="H-06 outside"),
    # Jury-test textbooks. From memory; recomputed: the end-point test alone is not enough.
    pytest.param(poly(2, 7, 10, 4, 1), counts(2, 0, 2), id="H-07"),
]


@pytest.mark.parametrize(("p", "expected"), CONTINUOUS)
def test_published_continuous(p: Polynomial, expected: RootCounts) -> None:
    """Both methods give the published count of left, axis and right half plane roots."""
    assert both(p, None) == expected
    assert is_stable(p, None) == (expected.boundary == expected.outside == 0)


@pytest.mark.parametrize(("p", "expected"), DISCRETE)
def test_published_discrete(p: Polynomial, expected: RootCounts) -> None:
    """Both methods give the published count of roots in, on and outside the unit circle."""
    assert both(p, 1) == expected
    assert is_stable(p, 1) == (expected.boundary == expected.outside == 0)


def test_published_values_of_roots() -> None:
    """The right half plane roots of H-01 and H-04 and the moduli of H-07, as published there."""
    h01 = [e.root.value for e in locate(poly(1, 2, 3, 4, 5), None) if e.region is Region.OUTSIDE]
    assert h01[1] == pytest.approx(0.287815479558 + 1.41609308017j, rel=1e-11)
    h04 = [e.root.value for e in locate(poly(1, 1, 2, 2, 3, 5), None) if e.region is Region.OUTSIDE]
    assert h04[1] == pytest.approx(0.720651518332 + 1.16563663217j, rel=1e-11)
    moduli = sorted(abs(root.value) for root in roots(poly(2, 7, 10, 4, 1)))
    assert moduli == pytest.approx([0.378502814400327] * 2 + [1.86816782936433] * 2, rel=1e-14)


# Generated polynomials

rationals = st.fractions(-3, 3, max_denominator=7)
# Few different values, so that factors repeat and roots mirror each other.
coarse = st.sampled_from([Fraction(k, 2) for k in range(-4, 5)])


@st.composite
def planted(draw: st.DrawFn, *, discrete: bool) -> tuple[Polynomial, RootCounts]:
    """A product of factors of degree one and two, with the regions of their known roots."""
    p: Polynomial = (draw(st.sampled_from([Fraction(1), Fraction(-3), Fraction(2, 7)])),)
    tally: Counter[Region] = Counter()
    for _ in range(draw(st.integers(1, 5))):
        real = draw(coarse | rationals)
        imag = draw(st.just(Fraction(0)) | coarse | rationals)
        if draw(st.booleans()):
            # Half of the time exactly on the boundary.
            if discrete:
                t = draw(rationals)  # the rational points of the circle
                real, imag = (1 - t**2) / (1 + t**2), 2 * t / (1 + t**2)
            else:
                real = Fraction(0)
        gap = real**2 + imag**2 - 1 if discrete else real
        region = Region.BOUNDARY if not gap else Region.INSIDE if gap < 0 else Region.OUTSIDE
        f = poly(1, -2 * real, real**2 + imag**2) if imag else poly(1, -real)
        p = multiply(p, f)
        tally[region] += degree(f)
    return p, counts(*[tally[region] for region in SIDES])


@given(planted(discrete=False))
def test_planted_roots_are_counted_in_continuous_time(case: tuple[Polynomial, RootCounts]) -> None:
    """Roots planted left, on and right of the axis, many of them repeated, are all found."""
    p, expected = case
    assert both(p, None) == expected


@given(planted(discrete=True))
def test_planted_roots_are_counted_in_discrete_time(case: tuple[Polynomial, RootCounts]) -> None:
    """Roots planted in, on and outside the circle, z = 1, -1 and 0 among them, are all found."""
    p, expected = case
    assert both(p, 1) == expected


@given(st.lists(st.integers(-4, 4), max_size=8), st.integers(1, 4), st.sampled_from([None, 1]))
def test_the_two_methods_agree(tail: list[int], lead: int, sampling_period: int | None) -> None:
    """Small integer coefficients: irreducible factors of every kind and degree."""
    p = poly(lead, *tail)
    counted = both(p, sampling_period)
    assert counted.inside + counted.boundary + counted.outside == degree(p)


@given(st.lists(st.integers(-4, 4), min_size=1, max_size=5), st.sampled_from([None, 1]))
def test_the_two_methods_agree_on_symmetric_polynomials(
    half: list[int], sampling_period: int | None
) -> None:
    """Even and palindromic polynomials, which alone can have irrational roots on the boundary."""
    if sampling_period is None:
        p = tuple(c for h in (1, *half) for c in (Fraction(h), Fraction(0)))[:-1]
    else:
        p = poly(1, *half[:-1], half[-1], *half[:-1][::-1], 1)
    counted = both(p, sampling_period)
    assert counted.inside == counted.outside


@given(st.lists(st.integers(-4, 4), max_size=6), st.sampled_from([None, 1]))
def test_mirrored_roots_change_places(tail: list[int], sampling_period: int | None) -> None:
    """With p(-s), or the coefficients reversed, inside and outside swap; the boundary stays."""
    p = poly(1, *tail, 3)
    mirrored = tuple(c * (-1) ** k for k, c in enumerate(p)) if sampling_period is None else p[::-1]
    there, here = root_counts(mirrored, sampling_period), root_counts(p, sampling_period)
    assert (there.inside, there.boundary, there.outside) == (
        here.outside,
        here.boundary,
        here.inside,
    )


# Hard cases


@pytest.mark.parametrize("n", [1, 2, 3, 4, 5, 12, 15, 30, 105])
def test_cyclotomic_polynomials_lie_on_the_circle(n: int) -> None:
    """All roots of the n-th cyclotomic polynomial are roots of unity."""
    p = tuple(Fraction(int(c)) for c in reversed(flint.fmpz_poly.cyclotomic(n).coeffs()))
    assert both(p, Fraction(1, 10)) == counts(0, degree(p), 0)
    # Next to the circle, at a distance that no double shows.
    for factor, region in ((1 - Fraction(1, 10**25), 0), (1 + Fraction(1, 10**25), 2)):
        moved = tuple(c * factor**k for k, c in enumerate(p))
        expected = [0, 0, 0]
        expected[region] = degree(p)
        assert both(moved, 1) == counts(*expected)


def test_lehmer_polynomial() -> None:
    """An irreducible polynomial with eight roots on the circle, one inside and one outside.

    Source: Lehmer (1933), from memory; the root outside is 1.17628081826.
    """
    p = poly(1, 1, 0, -1, -1, -1, -1, -1, 0, 1, 1)
    assert both(p, 1) == counts(1, 8, 1)
    (outside,) = [e.root.value for e in locate(p, 1) if e.region is Region.OUTSIDE]
    assert outside == pytest.approx(1.17628081826, rel=1e-11)


@pytest.mark.parametrize(
    ("p", "expected"),
    [
        (poly(1, 0, 0, 0, -2), counts(1, 2, 1)),
        (poly(1, 0, 0, 0, 2), counts(2, 0, 2)),
        (poly(1, 0, 0, 0, -4, 0, 0, 0, 2), counts(2, 4, 2)),
        (poly(1, 0, 3, 0, 1), counts(0, 4, 0)),
        (poly(1, 0, 1, 0, -1), counts(1, 2, 1)),
        (poly(1, 0, 0, 0, 0, 0, -2), counts(3, 0, 3)),
        (poly(1, 0, 0, 0, 0, 0, 2), counts(2, 2, 2)),
        (poly(1, 0, 0), counts(0, 2, 0)),
    ],
)
def test_even_polynomials(p: Polynomial, expected: RootCounts) -> None:
    """Mirrored pairs, quadruples and roots on the axis are told apart (checked by hand)."""
    assert both(p, None) == expected


@pytest.mark.parametrize("offset", ["1e-30", "-1e-30", "0"])
def test_roots_a_hair_from_the_axis(offset: str) -> None:
    """A real part of 1e-30 beside an imaginary part of 1000 is decided, and so is none."""
    real = Fraction(offset)
    p = product(poly(1, -2 * real, real**2 + 10**6), poly(1, 1))
    expected = [1, 0, 0]
    expected[1 if not real else 0 if real < 0 else 2] += 2
    assert both(p, None) == counts(*expected)


def test_irrational_roots_a_hair_from_the_axis() -> None:
    """(s^4 - 2)^2 + 1e-30 moves every double root off both axes; the odd term decides the side."""
    square = power(poly(1, 0, 0, 0, -2), 2)
    assert both(add(square, poly("1e-30")), None) == counts(4, 0, 4)
    assert both(add(poly(1, 0, 0, 0, -2), poly("1e-30", 0)), None) == counts(1, 0, 3)
    assert both(add(poly(1, 0, 0, 0, -2), poly("-1e-30", 0)), None) == counts(3, 0, 1)


@pytest.mark.parametrize("n", [8, 15])
def test_wilkinson_polynomial(n: int) -> None:
    """The roots 1..n are all on the right; shifted by k, the ones below k are on the left.

    Source: Wilkinson (1963), Rounding Errors in Algebraic Processes (polynomial from memory).
    """
    assert both(product(*[poly(1, -k) for k in range(1, n + 1)]), None) == counts(0, 0, n)
    shifted = product(*[poly(1, 5 - k) for k in range(1, n + 1)])
    assert both(shifted, None) == counts(4, 1, n - 5)


@pytest.mark.parametrize("times", [1, 2, 5])
@pytest.mark.parametrize("z", [1, -1, 0])
def test_real_points_of_the_circle(z: int, times: int) -> None:
    """z = 1 and z = -1, also repeated, are on the boundary; z = 0 is inside."""
    p = multiply(power(poly(1, -z), times), poly(1, -3))
    assert both(p, 1) == (counts(0, times, 1) if z else counts(times, 0, 1))


def test_a_root_below_the_smallest_double_has_its_side() -> None:
    """-1e-400 rounds to zero and is on the left all the same."""
    (left,) = locate((Fraction(1), Fraction(1, 10**400)), None)
    assert (left.root.value, left.region) == (0j, Region.INSIDE)


def test_the_gap_to_the_circle_covers_the_whole_box() -> None:
    """In a box across an axis the least modulus is on the axis, not at a corner."""
    half, one = Fraction(1, 2), Fraction(1)
    assert _circle_gap(Box(-half, half, one, one)) == (0, Fraction(1, 4))
    assert _circle_gap(Box(-one, -half, -half, one)) == (Fraction(-3, 4), 1)


def test_a_constant_is_stable() -> None:
    """No root is no danger."""
    for sampling_period in (None, 1):
        assert both(poly(-7), sampling_period) == counts(0, 0, 0)
        assert is_stable(poly(-7), sampling_period)


@pytest.mark.parametrize("question", [root_counts, locate, is_stable])
@pytest.mark.parametrize("sampling_period", [None, Fraction(1, 2)])
def test_the_zero_polynomial_is_refused(question: object, sampling_period: Fraction | None) -> None:
    """Every number is a root of it, so no count is right."""
    assert callable(question)
    with pytest.raises(EntryError, match="zero polynomial"):
        question(ZERO, sampling_period)


def test_locate_keeps_the_order_of_roots() -> None:
    """The same roots in the same order as without regions, each with its polynomial."""
    p = product(poly(1, 2, 3, 4, 5), power(poly(1, 0, 4), 2), poly(3, 1))
    located = locate(p, None)
    assert tuple(each.root for each in located) == roots(p)
    assert {each.polynomial for each in located} == {
        poly(1, 2, 3, 4, 5),
        poly(1, 0, 4),
        poly(1, "1/3"),
    }
    assert pickle.loads(pickle.dumps(located)) == located


# Stability


def test_judge_asks_about_boundary_factors_only() -> None:
    """A mode on the boundary is marginal when semisimple and unstable when not."""
    p = product(poly(1, 1), poly(1, -1), poly(1, 0, 4), poly(1, 0, 9))
    asked: list[Polynomial] = []

    def is_semisimple(f: Polynomial) -> bool:
        asked.append(f)
        return f == poly(1, 0, 4)

    judged = judge(p, None, is_semisimple)
    assert {(root.value, str(verdict)) for root, _, verdict in judged} == {
        (-1 + 0j, "stable"),
        (1 + 0j, "unstable"),
        (2j, "marginal"),
        (-2j, "marginal"),
        (3j, "unstable"),
        (-3j, "unstable"),
    }
    assert sorted(asked) == [poly(1, 0, 4), poly(1, 0, 9)]
    assert all(f[-1] != 0 and degree(f) in (1, 2) for _, f, _ in judged)


@pytest.mark.parametrize(
    ("value", "sampling_period", "expected"),
    [
        (-0.2 + 9j, None, Stability.STABLE),
        (-0.1 + 9j, None, Stability.CANNOT_TELL),
        (0.1 + 0j, None, Stability.CANNOT_TELL),
        (0.2 + 0j, None, Stability.UNSTABLE),
        (0.8j, 1, Stability.STABLE),
        (0.95j, 1, Stability.CANNOT_TELL),
        (-1.05 + 0j, 1, Stability.CANNOT_TELL),
        (-1.2 + 0j, 1, Stability.UNSTABLE),
    ],
)
def test_a_computed_root_is_judged_by_its_distance_from_the_boundary(
    value: complex, sampling_period: int | None, expected: Stability
) -> None:
    """Within 0.1 of the boundary nothing is claimed; beyond it the side decides."""
    assert computed_stability(value, sampling_period, 0.1) is expected


def test_the_words_of_the_enums() -> None:
    """These four words are what callers compare with."""
    assert [str(word) for word in Stability] == ["stable", "unstable", "marginal", "cannot tell"]
    assert [str(word) for word in Region] == ["inside", "boundary", "outside"]


# Time constants and damping


@pytest.mark.parametrize(
    ("value", "sampling_period", "expected"),
    [
        (-4 + 3j, None, 0.25),
        (0.5 + 0j, None, -2.0),
        (7j, None, None),
        (-5e-324 + 0j, None, None),  # too long for a double
        (complex(math.exp(-0.5)), 0.1, 0.2),
        (0.3 * cmath.exp(2j), Fraction(1, 2), -0.5 / math.log(0.3)),
        (2 + 0j, 1, -1 / math.log(2)),
        (0j, 0.1, 0.0),
        (-1 + 0j, 0.1, None),
        (0.6 + 0.8j, 0.1, None),  # on the circle; the doubles are not
        (cmath.exp(1j), 0.1, None),
        (complex(1 - 2.0**-40), 1, 2.0**40 - 0.5),
        (complex(1 - 2.0**-53), 1, 2.0**53),  # a double next to the circle is not on it
    ],
)
def test_time_constant(
    value: complex, sampling_period: float | Fraction | None, expected: float | None
) -> None:
    """-1/Re s or -T/log|z|; negative for growth, None on the boundary, zero for a delay."""
    found = time_constant(value, sampling_period)
    assert found == (None if expected is None else pytest.approx(expected, rel=1e-14))


@pytest.mark.parametrize(
    ("value", "sampling_period", "expected"),
    [
        (-3 + 4j, None, 0.6),
        (-3 - 4j, None, 0.6),
        (-2 + 0j, None, 1.0),
        (2 + 0j, None, -1.0),
        (5j, None, 0.0),
        (0j, None, None),
        (cmath.exp((-3 + 4j) / 10), 0.1, 0.6),
        (cmath.exp((-3 + 4j) / 10), Fraction(1, 7), 0.6),
        (0.5 + 0j, 1, 1.0),
        (1 + 0j, 1, None),
        (0j, 1, None),
        (0.6 + 0.8j, 1, 0.0),
        (-0.5 + 0j, 1, math.log(2) / math.hypot(math.log(2), math.pi)),
    ],
)
def test_damping(
    value: complex, sampling_period: float | Fraction | None, expected: float | None
) -> None:
    """-cos(arg s) with s = log(z)/T; None where there is no angle."""
    found = damping(value, sampling_period)
    assert found == (None if expected is None else pytest.approx(expected, rel=1e-14))
    assert found is None or math.copysign(1, found) > 0 or found < 0, "a negative zero"


# Cautions


@dataclass(frozen=True)
class FakeMode:
    """What the cautions read of a mode."""

    value: complex
    part: str
    stability: str


GENERAL = (
    stability.HIDDEN_IS_RELATIVE,
    stability.NOT_INTERCHANGEABLE,
    stability.WEAK_IS_NOT_HIDDEN,
    stability.ROUNDED_COEFFICIENTS,
    stability.NUMBERS_NOT_PLANT,
)
ALL_KINDS = tuple(
    FakeMode(value, "uncontrollable, observable", word)
    for value, word in ((-1 + 0j, "stable"), (2 + 0j, "cannot tell"), (3j, "marginal"))
) + tuple(FakeMode(v, "controllable, unobservable", "unstable") for v in (0.5 - 2j, 0.5 + 2j))


def test_cautions_defer_and_fit_a_line() -> None:
    """Every caution names who decides and the codes, and has no line break."""
    for caution in (*GENERAL, *hidden_cautions(ALL_KINDS)):
        assert "person responsible for the plant" in caution
        assert "codes that bind" in caution
        assert len(caution.splitlines()) == 1
        assert caution.endswith(".")
        assert caution.isascii()


def test_the_words_unstable_and_marginal_are_kept_for_hidden_modes_that_are() -> None:
    """No general caution says them, and each hidden mode gets only its own."""
    said = {word: [c for c in GENERAL if word in c.lower()] for word in ("unstable", "marginal")}
    assert said == {"unstable": [], "marginal": []}
    for mode in ALL_KINDS:
        joined = " ".join(hidden_cautions([mode])).lower()
        for word in ("unstable", "marginal"):
            assert (word in joined) == (mode.stability == word)


def test_hidden_modes_are_named_worst_first() -> None:
    """Growing, then on the boundary, then not to be told; a pair once; then what hidden means."""
    cautions = hidden_cautions(ALL_KINDS)
    assert len(cautions) == 5
    assert cautions[0].startswith("Hidden unstable mode at 0.5 +/- 2j (controllable, unobservable)")
    assert cautions[1].startswith("Hidden marginal mode at 0 +/- 3j (uncontrollable, observable)")
    assert cautions[2].startswith("Hidden mode at 2 (uncontrollable, observable)")
    assert cautions[3:] == (stability.HIDDEN_IS_RELATIVE, stability.NOT_INTERCHANGEABLE)
    for caution in cautions[:3]:
        assert "transfer function does not show it" in caution
        assert "Do not judge the stability of the plant from the reduced model." in caution


def test_a_hidden_stable_mode_is_relative_only() -> None:
    """It brings no alarm, but says what it is hidden from."""
    assert hidden_cautions(ALL_KINDS[:1]) == (
        stability.HIDDEN_IS_RELATIVE,
        stability.NOT_INTERCHANGEABLE,
    )


def test_visible_modes_bring_no_caution() -> None:
    """An unstable mode that the transfer function shows is not hidden."""
    assert hidden_cautions([]) == ()
    assert hidden_cautions([FakeMode(1 + 0j, "controllable, observable", "unstable")]) == ()
