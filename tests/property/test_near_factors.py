"""Laws of near cancellation, over planted ones of known size."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize import TransferMatrix, Uncertainty, exact
from realize.arithmetic.nearby_divisors import Metric, level_weights, size_of_change
from tests.helpers import Polynomial, times

pytestmark = pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")


@dataclass(frozen=True)
class Planted:
    """A fraction, the one near it with a common factor, and how far each coefficient moved."""

    numerator: Polynomial
    denominator: Polynomial
    source: tuple[Polynomial, Polynomial]
    degree: int
    radii: tuple[Polynomial, Polynomial]


@st.composite
def planted(draw: st.DrawFn) -> Planted:
    """A common factor of degree one or two, then coefficients moved by up to one part in 10^k."""

    def with_roots(count: int) -> Polynomial:
        product: Polynomial = (Fraction(1),)
        while len(product) - 1 < count:
            if count - len(product) + 1 >= 2 and draw(st.booleans()):
                real, imag = (Fraction(draw(st.integers(1, 30)), 10) for _ in range(2))
                product = times(product, (1, 2 * real, real**2 + imag**2))
            else:
                product = times(product, (1, Fraction(draw(st.integers(1, 60)), 10)))
        return product

    degree = draw(st.integers(1, 2))
    h = with_roots(degree)
    below = times(h, with_roots(draw(st.integers(1, 3))))
    above = times(h, with_roots(draw(st.integers(0, len(below) - len(h)))))
    size = Fraction(1, 10 ** draw(st.integers(3, 12)))

    def moved(p: Polynomial) -> Polynomial:
        return tuple(c * (1 + size * Fraction(draw(st.integers(-8, 8)), 8)) for c in p)

    radii = tuple(tuple(abs(c) * size for c in p) for p in (above, below))
    return Planted(moved(above), moved(below), (above, below), degree, (radii[0], radii[1]))


@given(planted())
def test_no_farther_than_planted(case: Planted) -> None:
    """The change found is never larger than the one planted, and the lower bound holds."""
    found = exact.cancel(TransferMatrix([[case.numerator]], [[case.denominator]]))
    if len(found.common) > 1:
        return  # moved back onto one that cancels
    given_pair = case.numerator, case.denominator
    metric = Metric(level_weights(case.numerator), level_weights(case.denominator))
    change = size_of_change(given_pair, case.source, metric)
    near = [each for each in found.near if each.degree == case.degree]
    # What was planted is a local minimum's basin away at most when it is small.
    if change <= 1e-4:
        assert near
        assert min(each.change for each in near) <= change * (1 + 1e-6)
    for each in near:
        assert each.least_change <= change * (1 + 1e-9)
        assert each.least_change <= each.change
        assert exact.cancel(each.witness).common == each.factor
        again = each.witness.numerators[0][0], each.witness.denominators[0][0]
        assert size_of_change(given_pair, again, metric) == pytest.approx(each.change)


@given(planted())
def test_the_bounds_that_were_used_allow_it(case: Planted) -> None:
    """Within the bounds it was moved by a factor cancels: "yes", with a witness, never "no"."""
    uncertainty = Uncertainty(
        absolute={"numerators": [[case.radii[0]]], "denominators": [[case.radii[1]]]}
    )
    source = TransferMatrix([[case.numerator]], [[case.denominator]])
    found = exact.cancel(source, uncertainty=uncertainty)
    if len(found.common) > 1:
        return
    near = [each for each in found.near if each.degree == case.degree]
    assert not [each for each in near if each.allowed == "no"]
    for each in near:
        if each.allowed == "yes":
            assert exact.cancel(each.witness).common == each.factor
            for table, before, radii in (
                (each.witness.numerators, case.numerator, case.radii[0]),
                (each.witness.denominators, case.denominator, case.radii[1]),
            ):
                for a, b, radius in zip(table[0][0], before, radii, strict=True):
                    assert abs(a - b) <= radius
    wider = Uncertainty(
        absolute={
            name: [[tuple(2 * r for r in radii)]]
            for name, radii in zip(("numerators", "denominators"), case.radii, strict=True)
        }
    )
    near = list(exact.cancel(source, uncertainty=wider).near)
    assert any(each.allowed == "yes" and each.degree == case.degree for each in near)


@given(planted(), st.integers(-40, 40), st.integers(-40, 40))
def test_units_of_time_and_gain_change_nothing(case: Planted, time: int, gain: int) -> None:
    """Powers of two in the unit of time or in the gain leave the change as it is."""
    scale = Fraction(2) ** time

    def scaled(p: Polynomial, by: Fraction) -> Polynomial:
        return tuple(by * c * scale**k for k, c in enumerate(p))

    first = exact.cancel(TransferMatrix([[case.numerator]], [[case.denominator]])).near
    above = scaled(case.numerator, Fraction(2) ** gain)
    second = exact.cancel(TransferMatrix([[above]], [[scaled(case.denominator, Fraction(1))]])).near
    assert [each.degree for each in first] == [each.degree for each in second]
    for one, other in zip(first, second, strict=True):
        assert other.change == pytest.approx(one.change, rel=1e-5)
        assert other.response_change.relative == pytest.approx(
            one.response_change.relative, rel=1e-3
        )
