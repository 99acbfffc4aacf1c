"""Laws of transfer matrices (exact face)."""

from __future__ import annotations

from fractions import Fraction

from hypothesis import assume, given
from hypothesis import strategies as st

from realize import Realization, exact
from tests.helpers import (
    assert_equal_exact,
    assert_same_transfer,
    characteristic_polynomial,
    identity,
    inverse,
    product,
    remainder,
)
from tests.helpers import exact as as_exact
from tests.strategies import Planted, planted, unstructured

points = st.builds(Fraction, st.integers(-50, 50), st.integers(1, 7))


@given(planted(most=1), points)
def test_it_is_what_the_definition_says(case: Planted, point: Fraction) -> None:
    """At a rational point it equals C (sI - A)^-1 B + D, exactly."""
    A, B, C, D = (as_exact(m) for m in case.model.matrices())
    pencil = point * identity(case.model.order) - A
    assume(evaluate(characteristic_polynomial(A), point) != 0)
    expected = product(C, inverse(pencil), B) + D
    found = exact.transfer_matrix(case.model).evaluate(point)
    assert_equal_exact(found, expected, f"value at {point}")


def evaluate(p: tuple[Fraction, ...], point: Fraction) -> Fraction:
    """The value of a polynomial (Horner)."""
    value = Fraction(0)
    for c in p:
        value = value * point + c
    return value


@given(unstructured())
def test_denominators_divide_the_characteristic_polynomial(model: Realization) -> None:
    """No denominator holds a pole that A does not have."""
    whole = characteristic_polynomial(model.A)
    for row in exact.transfer_matrix(model).denominators:
        for denominator in row:
            assert remainder(whole, denominator) == (0,)


@given(planted(most=1))
def test_the_dual_has_the_transpose(case: Planted) -> None:
    """The transfer matrix of the dual is the transpose."""
    assert_same_transfer(
        exact.transfer_matrix(case.model.dual()), exact.transfer_matrix(case.model).dual()
    )


@given(planted(most=1))
def test_a_proper_model_gives_a_proper_matrix(case: Planted) -> None:
    """The numerators' degrees do not exceed the denominators', and D is the value at infinity."""
    found = exact.transfer_matrix(case.model)
    for i in range(found.output_count):
        for j in range(found.input_count):
            p, q = found.numerators[i][j], found.denominators[i][j]
            assert len(p) <= len(q)
            assert (p[0] / q[0] if len(p) == len(q) else 0) == case.model.D[i, j]
